"""Parts from meter readings: the bench is played by the independent solver, and the part's figures must come back."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reference.solver import ReferenceSolver
from tackbench.circuit import Circuit, Part, Supply
from tackbench.cli.edge import run
from tackbench.errors import InputError
from tackbench.parts import load_parts
from tackbench.workbench.diode_meter import diode_from_readings
from tackbench.workbench.fet_meter import JfetTest, MosfetTest, jfet_from_readings, mosfet_from_reading
from tackbench.workbench.readings import Reading, read_point, read_resistor_point
from tackbench.workbench.transistor_meter import BenchTest, transistor_from_readings

LIBRARY = load_parts()
VT = 1.380649e-23 * 298.15 / 1.602176634e-19


def resting(parts: tuple[Part, ...], volts: float = 9.0, celsius: float = 25.0) -> dict[str, float]:
    """Node voltages of a bench circuit on a supply at node ``v``."""
    circuit = Circuit("bench", parts, "in", 1e3, "in", 1e6, Supply("v", volts), celsius + 273.15)
    return ReferenceSolver(circuit).operating_point()


def measured_diode(model: dict[str, Any], resistors: list[float], celsius: float = 25.0) -> list[Reading]:
    readings = []
    for ohms in resistors:
        parts = (
            Part("R1", "resistor", ("v", "a"), ohms),
            Part("D1", "diode", ("a", "0"), model="own", parameters=model),
        )
        volts = resting(parts, 9.0, celsius)["a"]
        readings.append(Reading(volts, (9.0 - volts) / ohms))
    return readings


# ------------------------------------------------------------------ diodes


@pytest.mark.parametrize("celsius", [25.0, 15.0])
@pytest.mark.parametrize("name", ["1N4148", "1N270", "1N5711", "green LED"])
def test_three_readings_give_a_diode_back(name: str, celsius: float) -> None:
    model = dict(LIBRARY.find(name, "diode").parameters)
    found = diode_from_readings(
        measured_diode(model, [1e6, 47e3, 680.0], celsius), LIBRARY.find(name, "diode"), celsius
    )
    for key in ("saturation_current", "ideality", "series_ohms"):
        assert found.parameters[key] == pytest.approx(model[key], rel=2e-3), key
    assert found.kept == ""


def test_two_readings_give_the_ideality_and_one_keeps_it() -> None:
    like = LIBRARY.find("1N4148", "diode")
    own = {**like.parameters, "saturation_current": 8e-9, "ideality": 1.95}
    two = diode_from_readings(measured_diode(own, [1e6, 6.8e3]), like, 25.0)
    assert two.parameters["ideality"] == pytest.approx(1.95, rel=1e-3)
    assert two.parameters["saturation_current"] == pytest.approx(8e-9, rel=0.01)
    one = diode_from_readings(measured_diode(own, [6.8e3]), like, 25.0)
    assert one.parameters["ideality"] == like.parameters["ideality"]
    assert "ideality and series resistance kept from 1N4148" in one.kept


def test_more_readings_leave_less_open() -> None:
    """One reading pins the clip level but hardly the resting resistance; a second at small current pins that too."""
    like = LIBRARY.find("1N4148", "diode")
    model = dict(like.parameters)
    one = diode_from_readings(measured_diode(model, [9.1e3]), like, 25.0)
    two = diode_from_readings(measured_diode(model, [9.1e3, 1e6]), like, 25.0)
    assert one.clip_volts.high / one.clip_volts.low < 1.05
    assert one.rest_ohms.high / one.rest_ohms.low > 8.0
    assert two.rest_ohms.high / two.rest_ohms.low < 0.4 * one.rest_ohms.high / one.rest_ohms.low
    for found in (one, two):
        assert found.rest_ohms.low <= 1.872 * VT / (2 * 2.353e-9) <= found.rest_ohms.high


def test_the_clip_level_is_that_of_the_pair() -> None:
    """Against the independent solver: two such diodes the two ways round, 4 V through 4.7 kilohm."""
    like = LIBRARY.find("1N270", "diode")
    found = diode_from_readings(measured_diode(dict(like.parameters), [1e6, 47e3, 680.0]), like, 25.0)
    model = {**like.parameters, **found.parameters}
    pair = tuple(
        Part(f"D{i}", "diode", pins, model="own", parameters=model) for i, pins in enumerate([("a", "0"), ("0", "a")])
    )
    volts = resting((Part("R1", "resistor", ("v", "a"), 4.7e3), *pair), 4.0)["a"]
    assert found.clip_volts.best == pytest.approx(volts, abs=2e-5)


def test_a_warm_part_is_brought_to_25_degrees() -> None:
    """A germanium diode read at 31 degrees as if at 25 would seem some 9 mV lower (-1.5 mV/K)."""
    like = LIBRARY.find("germanium point contact", "diode")
    readings = measured_diode(dict(like.parameters), [9.1e3], 31.0)
    right = diode_from_readings(readings, like, 31.0).clip_volts.best
    wrong = diode_from_readings(readings, like, 25.0).clip_volts.best
    assert right - wrong == pytest.approx(9e-3, abs=3e-3)


def test_readings_as_typed() -> None:
    assert read_point("0.62@1m", None) == Reading(0.62, 1e-3)
    assert read_point("620 mV", 8e-4) == Reading(0.62, 8e-4)
    assert read_point("0.6@9/8k4", None) == Reading(0.6, 1e-3)
    assert read_resistor_point("8.4@9/8k4").volts == pytest.approx(0.6)
    assert read_resistor_point("8.4@9/8k4").amperes == pytest.approx(1e-3)


@given(st.text(alphabet="0.5@9/kmVAR -", max_size=12))
def test_any_text_is_a_reading_or_a_sentence(text: str) -> None:
    for read in (lambda: read_point(text, 1e-3), lambda: read_resistor_point(text)):
        try:
            reading = read()
        except InputError as error:
            assert str(error).isprintable()  # noqa: PT017
            continue
        assert reading.volts > 0.0
        assert reading.amperes > 0.0


@settings(max_examples=40, deadline=None)
@given(
    st.lists(st.tuples(st.floats(1e-3, 5.0), st.floats(1e-9, 1.0)), min_size=1, max_size=4),
    st.sampled_from(["1N4148", "germanium point contact", "red LED", "BAT43"]),
)
def test_any_readings_give_a_sound_model_or_a_sentence(points: list[tuple[float, float]], like: str) -> None:
    try:
        found = diode_from_readings([Reading(*point) for point in points], LIBRARY.find(like, "diode"), 25.0)
    except InputError as error:
        assert str(error).isprintable()  # noqa: PT017
        return
    assert all(np.isfinite(value) and value >= 0.0 for value in found.parameters.values())
    assert found.clip_volts.low <= found.clip_volts.best <= found.clip_volts.high


# ------------------------------------------------------------------ transistors


def bench_transistor(model: dict[str, Any], kind: str, celsius: float = 25.0, base: float = 2.2e6) -> BenchTest:
    sign = 1.0 if kind == "npn" else -1.0
    device = Part("Q1", "bipolar", ("c", "b", "0"), polarity=int(sign), model="own", parameters=model)
    collector = Part("R1", "resistor", ("v", "c"), 2.2e3)
    readings = []
    for rest in ((), (Part("R2", "resistor", ("v", "b"), base),)):
        readings.append(9.0 - abs(resting((collector, device, *rest), sign * 9.0, celsius)["c"]))
    return BenchTest(9.0, 2.2e3, base, *readings, celsius)


@pytest.mark.parametrize("celsius", [25.0, 33.0])
@pytest.mark.parametrize(
    ("name", "kind", "gain", "leakage"),
    [("AC128", "pnp", 70.0, 1.2e-6), ("2N1308", "npn", 140.0, 3e-6), ("AC128", "pnp", 110.0, 0.1e-6)],
)
def test_the_bench_test_gives_gain_and_leakage_back(
    name: str, kind: str, gain: float, leakage: float, celsius: float
) -> None:
    like = LIBRARY.find(name, kind)
    own = {**like.parameters, "forward_gain": gain, "leakage_current": leakage}
    found = transistor_from_readings(bench_transistor(own, kind, celsius), like)
    assert found.gain.best == pytest.approx(gain, rel=2e-3)
    assert found.leakage.best == pytest.approx(leakage, rel=5e-3)
    assert found.gain.low < gain < found.gain.high


def test_a_leaky_part_seems_to_have_more_gain() -> None:
    like = LIBRARY.find("AC128", "pnp")
    found = transistor_from_readings(bench_transistor(dict(like.parameters), "pnp"), like)
    assert found.apparent_gain > 1.5 * found.gain.best


def test_a_silicon_part_needs_no_leakage() -> None:
    like = LIBRARY.find("2N3904", "npn")
    own = {**like.parameters, "forward_gain": 230.0}
    found = transistor_from_readings(bench_transistor(own, "npn", base=4.7e6), like)
    assert found.gain.best == pytest.approx(230.0, rel=2e-3)
    assert found.leakage.best < 1e-9


@pytest.mark.parametrize(
    ("test", "words"),
    [
        (BenchTest(9, 2200, 2.2e6, 1.5, 1.4), "the first reading is taken with the base open"),
        (BenchTest(9, 2200, 2.2e6, 0.1, 8.9), "it is saturated"),
        (BenchTest(9, 2200, 1e3, 0.0, 0.01), "no transistor's gain gives these readings"),
    ],
)
def test_readings_that_no_transistor_gives_are_said(test: BenchTest, words: str) -> None:
    with pytest.raises(InputError, match=words):
        transistor_from_readings(test, LIBRARY.find("AC128", "pnp"))


# ------------------------------------------------------------------ field-effect transistors


@pytest.mark.parametrize(("kind", "like", "sign"), [("n-jfet", "2N5457", 1.0), ("p-jfet", "2N5460", -1.0)])
@pytest.mark.parametrize("source_ohms", [1.2e3, 220e3])
def test_a_jfets_two_readings_give_it_back(kind: str, like: str, sign: float, source_ohms: float) -> None:
    entry = LIBRARY.find(like, kind)
    own = {**entry.parameters, "drain_current": 1.9e-3, "pinch_off_volts": -sign * 1.3}
    device = ("jfet", ("d", "0", "s"))
    current = resting(
        (
            Part("R1", "resistor", ("v", "d"), 1e-3),
            Part("R2", "resistor", ("s", "0"), 1e-3),
            Part("Q1", *device, polarity=int(sign), model="own", parameters=own),
        ),
        sign * 9.0,
    )["s"]
    volts = resting(
        (
            Part("R1", "resistor", ("v", "d"), 1e-3),
            Part("R2", "resistor", ("s", "0"), source_ohms),
            Part("Q1", *device, polarity=int(sign), model="own", parameters=own),
        ),
        sign * 9.0,
    )["s"]
    found = jfet_from_readings(JfetTest(9.0, abs(current) / 1e-3, abs(volts), source_ohms), entry)
    assert found.drain_current.best == pytest.approx(1.9e-3, rel=1e-3)
    assert found.pinch_off.best == pytest.approx(1.3, rel=1e-3)
    assert found.pinch_off.low < 1.3 < found.pinch_off.high


def test_a_mosfets_reading_gives_its_threshold() -> None:
    entry = LIBRARY.find("2N7000", "n-mosfet")
    own = {**entry.parameters, "threshold_volts": 1.4, "channel_modulation": 0.0}
    device = Part("Q1", "mosfet", ("a", "a", "0"), model="own", parameters=own)
    volts = resting((Part("R1", "resistor", ("v", "a"), 6.8e3), device))["a"]
    found = mosfet_from_reading(MosfetTest(volts, (9.0 - volts) / 6.8e3), entry)
    assert found.best == pytest.approx(1.4, abs=1e-3)
    assert found.low < 1.4 < found.high


def test_field_effect_readings_that_contradict_each_other_are_said() -> None:
    entry = LIBRARY.find("2N5457", "n-jfet")
    with pytest.raises(InputError, match=r"is not below the 2\.84 mA that flow without it"):
        jfet_from_readings(JfetTest(9.0, 3.1e-3, 4.0, 1.2e3), entry)
    with pytest.raises(InputError, match="is not below the supply"):
        jfet_from_readings(JfetTest(9.0, 3.1e-3, 9.5, 1e6), entry)
    with pytest.raises(InputError, match="leaves no threshold"):
        mosfet_from_reading(MosfetTest(0.1, 1e-3), LIBRARY.find("2N7000", "n-mosfet"))


# ------------------------------------------------------------------ the commands and their files


@pytest.fixture(autouse=True)
def _in_a_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


COMMANDS = {
    "D-1": ("diode", ["diode-from-meter", "D-1", "--reading", "0.6@1m", "--reading", "0.45@9/390k"]),
    "Q-1": (
        "pnp",
        [
            "transistor-from-meter",
            "Q-1",
            "--kind",
            "pnp",
            "--collector-ohms",
            "2k2",
            "--base-ohms",
            "2M2",
            "--base-open",
            "0.4",
            "--base-fed",
            "1.4",
        ],
    ),
    "J-1": (
        "n-jfet",
        ["jfet-from-meter", "J-1", "--drain-current", "3m", "--source-volts", "1", "--source-ohms", "1k2"],
    ),
    "M-1": ("n-mosfet", ["mosfet-from-meter", "M-1", "--reading", "2.2@1m"]),
}


@pytest.mark.parametrize("name", COMMANDS)
def test_each_command_writes_a_part_that_the_library_reads(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    kind, arguments = COMMANDS[name]
    assert run(arguments) == 0
    said = capsys.readouterr().out
    assert f"written: {Path('parts') / name}.toml" in said
    assert "low" in said
    entry = load_parts(Path("parts")).find(name, kind)
    assert entry.own
    assert entry.low is not None
    assert entry.high is not None
    assert load_parts(Path("parts")).model(f"{name} high", kind)[1] == entry.high
    assert "own" in entry.source
    before = (Path("parts") / f"{name}.toml").read_bytes()
    assert run(arguments) == 2
    assert "already exists; choose another name" in capsys.readouterr().err
    assert (Path("parts") / f"{name}.toml").read_bytes() == before


def test_the_part_is_found_by_option_variable_and_neighbour(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run(COMMANDS["D-1"][1]) == 0
    check = ["check", "--with", "D1+D2=D-1"]
    assert run(check) == 2
    assert "no diode 'D-1'" in capsys.readouterr().err
    assert run([*check, "--parts", "parts"]) == 0
    assert "D1, D2: D-1 is your own (parts/D-1.toml)" in capsys.readouterr().out
    assert run(check) == 2  # the option holds for its own run only
    monkeypatch.setenv("TACKBENCH_PARTS", str(tmp_path / "parts"))
    assert run(check) == 0
    monkeypatch.delenv("TACKBENCH_PARTS")
    assert run(["new", "mine"]) == 0
    assert run([*check, "--stage", "mine.toml"]) == 0
    assert run(["parts", "D-1", "--parts", "parts"]) == 0
    assert run([*check, "--parts", "nowhere"]) == 2
    assert "the parts folder option names no folder" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("arguments", "sentence"),
    [
        (["diode-from-meter", "X"], "no reading is given; give one with --reading"),
        (
            ["diode-from-meter", "X", "--reading", "0.6"],
            "a meter's diode test sends its own current",
        ),
        (["diode-from-meter", "X", "--reading", "10@9/1k"], "the reading is not below the supply"),
        (["diode-from-meter", "X", "--reading", "0.6@1m", "--reading", "0.5@2m"], "contradict each other"),
        (["diode-from-meter", "X", "--reading", "0.6@1m", "--reading", "0.65@2m"], "lie too near each other"),
        (["diode-from-meter", "X", "--reading", "0.1@1u", "--reading", "3@1m"], "no diode gives these readings"),
        (["diode-from-meter", "X", "--reading", "0.6@1m", "--like", "1N4184"], "did you mean '1N4148'"),
        (["diode-from-meter", "X", "--reading", "0.6@1m", "--like", "1N4733"], "breaks down"),
        (["diode-from-meter", "X", "--reading", "0.6@1m", "--temperature", "400"], "is no temperature of a bench"),
        (["diode-from-meter", " ", "--reading", "0.6@1m"], "cannot name a part"),
        (["diode-from-meter", "X", "--reading", "0.6@1m", "-o", "x.txt"], "a part file ends in .toml"),
        (["diode-from-meter", "X", "--reading", "0.6@1m", "-o", "no/x.toml"], "there is no such folder"),
        (["mosfet-from-meter", "X", "--reading", "2.2"], "the current behind the reading is missing"),
        (["jfet-from-meter", "X", "--drain-current", "3 V"], "--source-volts"),
    ],
    ids=lambda value: " ".join(value)[:60] if isinstance(value, list) else "",
)
def test_what_the_commands_cannot_use_is_said_and_leaves_nothing(
    arguments: list[str], sentence: str, capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    assert run(arguments) == 2
    error = capsys.readouterr().err
    assert sentence in error
    assert len(error.strip().splitlines()) == 1
    assert list(tmp_path.iterdir()) == []


def test_names_with_odd_signs_are_written_and_found() -> None:
    name = 'my "best" D/1 ½'
    assert run(["diode-from-meter", name, "--reading", "0.6@1m"]) == 0
    (path,) = Path("parts").iterdir()
    assert name in tomllib.loads(path.read_text(encoding="utf-8"))
    assert load_parts(Path("parts")).find(name, "diode").own
