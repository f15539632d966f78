"""The guitar in the circuit: against the closed form of its network, and against a guitar played by its string."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reference.solver import ReferenceSolver
from tackbench.circuit import Circuit, Part
from tackbench.errors import InputError
from tackbench.network import response
from tackbench.network.model import network_model
from tackbench.network.operating_point import settle
from tackbench.network.small_signal import small_signal
from tackbench.render import prepare
from tackbench.stage import SURROUNDINGS, Stage, load_stage
from tackbench.stage.guitar import Guitar, with_guitar

FREQUENCIES = np.geomspace(20.0, 20e3, 60)
COIL_OHMS, COIL_HENRIES, COIL_FARADS = 8e3, 4.4, 130e-12
POT_OHMS, TONE_FARADS = 500e3, 22e-9
PICKUP = {
    "coil_ohms": COIL_OHMS,
    "coil_henries": COIL_HENRIES,
    "coil_farads": COIL_FARADS,
    "volume_ohms": POT_OHMS,
    "tone_ohms": POT_OHMS,
    "tone_farads": TONE_FARADS,
}
RECORDED = (500e-12, 1e6)


def audio(position: float) -> float:
    base = (1.0 / 0.15 - 1.0) ** 2
    return (base**position - 1.0) / (base - 1.0)


def transfer(s: Any, load: float, volume: float, tone: float, cable: float) -> Any:
    """Closed form: volts at the jack per volt of the string, into a resistance."""
    lower = max(POT_OHMS * audio(volume), 20.0)
    upper = 0.0 if volume == 1.0 else max(POT_OHMS - lower, 20.0)
    jack = 1.0 / (1.0 / lower + s * cable + 1.0 / load)
    tone_branch = max(POT_OHMS * audio(tone), 20.0) + 1.0 / (s * TONE_FARADS)
    across = s * COIL_FARADS + 1.0 / tone_branch + 1.0 / (upper + jack)
    return jack / (upper + jack) / (1.0 + (COIL_OHMS + s * COIL_HENRIES) * across)


def loaded(ohms: float, volume: float, tone: float, cable: float) -> Circuit:
    stage = Circuit("a load", (Part("R1", "resistor", ("in", "0"), ohms),), "in", 10e3, "in", None)
    return with_guitar(stage, Guitar(PICKUP, volume, tone, cable, *RECORDED))


@pytest.mark.parametrize("ohms", [1e6, 68e3, 5e3])
@pytest.mark.parametrize("cable", [500e-12, 1e-9, 200e-12])
@pytest.mark.parametrize("volume", [1.0, 0.6, 0.0])
@pytest.mark.parametrize("tone", [1.0, 0.5, 0.0])
def test_a_load_gets_what_the_closed_form_says(ohms: float, cable: float, volume: float, tone: float) -> None:
    """The jack as played over the jack as recorded, full up into 1 megohm through 500 pF: both by the closed form."""
    s = 2j * np.pi * FREQUENCIES
    expected = transfer(s, ohms, volume, tone, cable) / transfer(s, RECORDED[1], 1.0, 1.0, RECORDED[0])
    circuit = loaded(ohms, volume, tone, cable)
    assert response(circuit, FREQUENCIES) == pytest.approx(expected, rel=1e-9)
    assert ReferenceSolver(circuit).response(FREQUENCIES) == pytest.approx(expected, rel=1e-9)


def test_a_take_recorded_into_the_same_load_comes_out_untouched() -> None:
    assert response(loaded(1e6, 1.0, 1.0, 500e-12), FREQUENCIES) == pytest.approx(np.ones(60), abs=1e-12)


@pytest.mark.parametrize(("volume", "tone", "cable"), [(1.0, 1.0, 200e-12), (0.5, 0.3, 1e-9), (0.0, 0.0, 500e-12)])
def test_the_parts_with_reversed_sign_make_nothing_unstable(volume: float, tone: float, cable: float) -> None:
    model = network_model(loaded(68e3, volume, tone, cable))
    assert small_signal(model, settle(model)).poles().real.max() < 0.0


def with_string(stage: Stage, volume: float, cable: float) -> Circuit:
    """The stage with the guitar as it is, driven by the string's voltage behind the coil."""
    bare = stage.variant().circuit
    lower = POT_OHMS * audio(volume)
    upper = POT_OHMS - lower if volume < 1.0 else 0.0
    parts = (
        Part("coil", "inductor", ("string", "hot"), COIL_HENRIES, series_ohms=COIL_OHMS),
        Part("across", "capacitor", ("hot", "0"), COIL_FARADS),
        Part("tone", "resistor", ("hot", "t"), POT_OHMS),
        Part("tone capacitor", "capacitor", ("t", "0"), TONE_FARADS),
        Part("upper", "resistor", ("hot", bare.input_node), upper),
        Part("lower", "resistor", (bare.input_node, "0"), lower),
        Part("cable", "capacitor", (bare.input_node, "0"), cable),
    )
    return Circuit(
        bare.title, (*parts, *bare.parts), "string", 0.0, bare.output_node, bare.output_load_ohms, bare.supply
    )


def growing(amplitude: complex, s: complex, end: float) -> Any:
    """A sine that grows exponentially and ends at its amplitude: it has one complex frequency, so a transfer function
    holds for it at every instant, and it begins from almost nothing."""
    return lambda t: np.imag(amplitude * np.exp(s * (np.asarray(t) - end)))


@pytest.mark.parametrize("volume", [1.0, 0.4])
def test_a_fuzz_is_played_as_by_the_string_itself(volume: float) -> None:
    """The nonlinear case: the take (the jack as recorded) through the spliced guitar gives what the string gives
    through the whole guitar, into a transistor's base."""
    end, s = 0.06, 300.0 + 2j * np.pi * 700.0
    stage = load_stage("fuzz-silicon")
    times = np.linspace(0.0, end, 600)
    recorded = 0.4
    string = recorded / transfer(s, RECORDED[1], 1.0, 1.0, RECORDED[0])
    spliced = with_guitar(stage.variant().circuit, Guitar(PICKUP, volume, 1.0, 400e-12, *RECORDED))
    played = ReferenceSolver(spliced, relative=1e-7, absolute=1e-10).transient(growing(recorded, s, end), times)
    whole = ReferenceSolver(with_string(stage, volume, 400e-12), relative=1e-7, absolute=1e-10)
    wanted = whole.transient(growing(string, s, end), times)
    assert np.ptp(wanted.output) > 0.05
    assert np.abs(played.output - wanted.output).max() < 2e-5


def test_loading_darkens_and_the_volume_knob_cleans_a_fuzz() -> None:
    """What players know (common practice, no source): a low input takes the top off, and the knob brings down the
    drive."""
    stage = load_stage("fuzz-germanium")
    full = np.abs(response(stage.variant(guitar="humbucker").circuit, [300.0]))[0]
    down = np.abs(response(stage.variant({"guitar": "humbucker", "guitar-volume": 0.5}).circuit, [300.0]))[0]
    assert down < 0.5 * full


@pytest.mark.parametrize("volume", [1.0, 0.7, 0.0])
def test_the_guitar_does_not_make_the_steps_small(volume: float) -> None:
    """Its fast poles (a pot's end into the cable) must not drive the step control."""
    choices = {"guitar": "humbucker", "guitar-volume": volume, "guitar-tone": 0.5}
    stream = prepare(load_stage("flat-boost").variant(choices).circuit, 48_000).stream(1)
    times = np.arange(4_800) / 48_000.0
    stream.process(0.3 * np.sin(2 * np.pi * 440.0 * times)[:, None])
    stream.finish()
    assert stream.counts.steps < 3 * 8 * 4_800
    assert stream.counts.hard_steps == 0


# ------------------------------------------------------------------ choosing it


def test_choices_words_and_record() -> None:
    stage = load_stage("fuzz-silicon")
    variant = stage.variant({"guitar": "double coil", "guitar-volume": "70%", "cable": "1n"})
    assert variant.words() == "guitar with humbucker, guitar volume 70 %, cable 1 nF"
    assert variant.settings["recorded-into"] == 1e6
    assert variant.circuit.input_ohms == 0.0
    assert "humbucker" in variant.record()["provenance"]
    assert stage.variant().words(variant) == "no guitar in the circuit"
    notes = " ".join(variant.notes)
    assert "the guitar takes the place of the 10 kΩ in series with the input" in notes
    assert "figures of humbucker are from memory" in notes
    assert stage.variant({"guitar": "humbucker high"}).circuit != stage.variant({"guitar": "humbucker"}).circuit


@pytest.mark.parametrize(
    ("choices", "sentence"),
    [
        ({"guitar-volume": 0.5}, "guitar-volume: no guitar stands in the circuit"),
        ({"guitar": "humbuker"}, "no pickup 'humbuker'; did you mean 'humbucker'"),
        ({"guitar": "1N4148"}, "1N4148 is of kind diode, not pickup"),
        ({"guitar": 3}, "3 names nothing in the parts library; write a pickup's name"),
        ({"guitar": "humbucker", "cable": "0"}, "cable: '0' is not allowed; expected farads above zero"),
        ({"guitar": "humbucker", "cable": "5 m"}, "cable: '5 m' is no cable's capacitance; write farads"),
        ({"guitar": "humbucker", "guitar-tone": 2}, "guitar-tone: 2 is outside 0 to 1"),
        ({"guitar": "humbucker", "recorded-into": "1"}, "recorded-into: '1' is no input for a guitar; write ohms"),
        ({"guitar": "humbucker", "recorded-into": "1 nF"}, "recorded-into: '1 nF' is in farads"),
        ({"guitar-volum": 0.5}, "did you mean 'guitar-volume'"),
    ],
    ids=str,
)
def test_what_cannot_be_chosen_is_said(choices: dict[str, object], sentence: str) -> None:
    with pytest.raises(InputError) as caught:
        load_stage("fuzz-silicon").variant(choices)
    assert sentence in str(caught.value)


@given(st.sampled_from(sorted(SURROUNDINGS)), st.text(max_size=12))
def test_any_text_is_a_choice_or_a_sentence(name: str, text: str) -> None:
    stage = load_stage("fuzz-silicon")
    try:
        chosen = stage.parse_choice(name, text)
    except InputError as error:
        assert str(error).isprintable()  # noqa: PT017
        return
    assert set(chosen) == {name}


@settings(max_examples=40, deadline=None)
@given(st.floats(0.0, 1.0), st.floats(0.0, 1.0), st.floats(1e-12, 5e-9), st.floats(1e-12, 5e-9), st.floats(1e4, 1e8))
def test_any_guitar_is_stable_and_has_a_response(
    volume: float, tone: float, cable: float, recorded_cable: float, recorded_into: float
) -> None:
    bare = load_stage("fuzz-silicon").variant().circuit
    guitar = Guitar(PICKUP, volume, tone, cable, recorded_cable, recorded_into)
    model = network_model(with_guitar(bare, guitar))
    poles = small_signal(model, settle(model)).poles()
    assert poles.real.max() < 1e-6 * np.abs(poles).max()
    assert np.isfinite(response(with_guitar(bare, guitar), [100.0, 5e3])).all()


OWN = """
format = 1
input = { node = "in", series = "10k" }
output = { node = "out", load = "1M" }
supply = { node = "pickup", volts = 9 }
[parts]
cable = { resistor = "1k", pins = ["in", "out"] }
R1 = { resistor = "1k", pins = ["take", "pickup"] }
R2 = { resistor = "1k", pins = ["take", "out"] }
[controls]
[mods.battery]
at = "yes"
[mods.battery.positions.yes]
[mods.battery.positions.no]
R1 = "2k"
"""


def test_a_stages_own_names_come_first(tmp_path: Path) -> None:
    path = tmp_path / "own.toml"
    path.write_text(OWN, encoding="utf-8")
    stage = load_stage(path)
    assert stage.variant(battery="no").settings["battery"] == "no"
    assert stage.variant(cable="2k").parts["cable"].value == 2e3
    variant = stage.variant(guitar="single coil", battery="no", cable="2k")
    assert len(set(variant.circuit.nodes())) == 6
    assert {"take'", "pickup", "take"} < set(variant.circuit.nodes())
    assert math.isfinite(abs(response(variant.circuit, [1e3])[0]))
    assert variant.words() == "battery no, guitar with single coil, cable 1 kΩ → 2 kΩ"
    path.write_text(OWN.replace("mods.battery", "mods.guitar"), encoding="utf-8")
    with pytest.raises(InputError, match="'guitar-tone' is no mod, control or part of this stage"):
        load_stage(path).variant({"guitar-tone": 0.5})
