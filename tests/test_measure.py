"""Measurements against transfer functions written by hand, closed forms and worked tables."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from scipy.signal import freqs

from tackbench import load_stage
from tackbench.circuit import Circuit, Part, Supply
from tackbench.cli.edge import run
from tackbench.devices.schema import fill_defaults
from tackbench.measure import impedances, measure_headroom, measure_sines, third_octaves
from tackbench.measure.sine import whole_cycles

VT = 1.380649e-23 * 298.15 / 1.602176634e-19
TEXTBOOK = fill_defaults("diode", {"saturation_current": 2.52e-9, "ideality": 0.0453 / VT})
AMP = fill_defaults(
    "opamp",
    {"gain_bandwidth": 1e8, "slew_rate": 1e9, "open_loop_gain": 1e6}
    | {"swing_high": 1.0, "swing_low": 1.0, "output_ohms": 1e-3},
)


def part(name: str, kind: str, *pins: str, value: float | None = None, **more: object) -> Part:
    return Part(name, kind, pins, value, **more)  # type: ignore[arg-type]


def clipper(farads: float = 1e-8) -> Circuit:
    return Circuit(
        "clipper",
        (
            part("R1", "resistor", "in", "out", value=2200.0),
            part("C1", "capacitor", "out", "0", value=farads),
            part("D1", "diode", "out", "0", parameters=TEXTBOOK),
            part("D2", "diode", "0", "out", parameters=TEXTBOOK),
        ),
        "in",
        0.0,
        "out",
        None,
    )


def amplifier(gain: float, volts: float = 9.0) -> Circuit:
    return Circuit(
        "amplifier",
        (
            part("R1", "resistor", "m", "0", value=1e3),
            part("R2", "resistor", "out", "m", value=1e3 * (gain - 1)),
            part("R3", "resistor", "in", "0", value=47e3),
            part("U1", "opamp", "in", "m", "out", "vcc", "vee", parameters=AMP),
        ),
        "in",
        0.0,
        "out",
        10e3,
        Supply("vcc", volts, 0.0, (("vee", -1.0),)),
    )


def lag(series: float = 10e3) -> Circuit:
    """Coupling capacitor, series resistor, shunt capacitor: a band-pass by hand."""
    parts = (
        part("C1", "capacitor", "in", "a", value=47e-9),
        part("R1", "resistor", "a", "out", value=series),
        part("R2", "resistor", "out", "0", value=100e3),
        part("C2", "capacitor", "out", "0", value=1e-9),
    )
    return Circuit("band", parts, "in", 0.0, "out", None)


def test_third_octaves_are_those_of_the_standard() -> None:
    bands = third_octaves(lag())
    nominal = [20, 25, 31.5, 40, 50, 63, 80, 100, 125, 160, 200, 250, 315, 400, 500, 630, 800, 1000]
    nominal += [1250, 1600, 2000, 2500, 3150, 4000, 5000, 6300, 8000, 10000, 12500, 16000, 20000]
    assert [band.nominal_hz for band in bands] == nominal
    assert bands[0].exact_hz == pytest.approx(19.9526, abs=1e-4)  # worked table of 1000 * 10^(n/10)
    assert bands[-1].exact_hz == pytest.approx(19952.62, abs=0.01)


def test_third_octaves_against_the_transfer_function() -> None:
    """Nodal equations by hand: H = s C1 R2 / ((1 + s C1 R1)(1 + s C2 R2) + s C1 R2)."""
    c1, r1, r2, c2 = 47e-9, 10e3, 100e3, 1e-9
    denominator = np.polyadd(np.polymul([c1 * r1, 1], [c2 * r2, 1]), [c1 * r2, 0])
    bands = third_octaves(lag())
    _, expected = freqs([c1 * r2, 0], denominator, worN=2 * np.pi * np.array([band.exact_hz for band in bands]))
    got = np.array([10 ** (band.gain_db / 20) * np.exp(1j * np.radians(band.phase_degrees)) for band in bands])
    assert np.max(np.abs(20 * np.log10(np.abs(got / expected)))) < 1e-6
    assert np.max(np.abs(np.degrees(np.angle(got / expected)))) < 1e-5


def test_impedances_of_a_ladder_by_hand() -> None:
    hertz = np.geomspace(20, 20e3, 12)
    s = 2j * np.pi * hertz
    shunt = 1 / (1e-5 + s * 1e-9)
    into, out = impedances(lag(), hertz)
    assert into == pytest.approx(1 / (s * 47e-9) + 10e3 + shunt, rel=1e-4)
    series = 10e3 + 1 / (s * 47e-9)
    assert out == pytest.approx(series * shunt / (series + shunt), rel=1e-4)


def test_impedances_leave_the_jacks_own_resistors_out_and_the_resting_volts_alone() -> None:
    hertz = np.array([100.0, 1000.0])
    parts = lag().parts
    loaded = Circuit("band", parts, "in", 4.7e3, "out", 1e6)
    s = 2j * np.pi * hertz
    shunt = 1 / (1e-5 + s * 1e-9 + 1e-6)
    into, out = impedances(loaded, hertz)
    assert into == pytest.approx(1 / (s * 47e-9) + 10e3 + shunt, rel=1e-4)
    bare = 1 / (1e-5 + s * 1e-9)
    series = 14.7e3 + 1 / (s * 47e-9)
    assert out == pytest.approx(series * bare / (series + bare), rel=1e-4)


@pytest.mark.parametrize(
    ("peak", "hertz", "harmonics", "distortion"),
    [
        (0.1, 1000.0, (0.099017, 0.000006), 0.006),
        (1.0, 1000.0, (0.600130, 0.105643, 0.023377, 0.004549, 0.004581), 18.070),
        (4.5, 1000.0, (0.751362, 0.210262, 0.108943, 0.066198, 0.042846), 33.624),
        (4.5, 5000.0, (0.741080, 0.189143, 0.083400, 0.040957, 0.021189), 28.683),
    ],
)
def test_the_tabulated_dynamic_clipper(
    peak: float, hertz: float, harmonics: tuple[float, ...], distortion: float
) -> None:
    """Worked table: Radau at 1e-11, periodic steady state; R 2.2 kilohm, C 10 nF, IS 2.52 nA, nVt 45.3 mV."""
    (sine,) = measure_sines(clipper(), hertz, [peak], "best")
    assert sine.settled
    for place, expected in enumerate(harmonics):
        assert sine.harmonics[2 * place] == pytest.approx(expected, abs=2e-6)
    assert 100 * sine.thd_of_fundamental == pytest.approx(distortion, abs=0.12)  # the table counts more harmonics
    assert sine.even < 1e-5
    assert sine.odd == pytest.approx(sine.thd_of_fundamental, rel=1e-6)


@pytest.mark.parametrize(
    ("drive_db", "b1", "b3", "thd_f", "thd_r"),
    [(3.0, 1.156960, 0.149519, 13.380, 13.261), (6.0, 1.217721, 0.275009, 23.237, 22.634)],
)
def test_a_sine_that_rails_cut_against_the_closed_form(
    drive_db: float, b1: float, b3: float, thd_f: float, thd_r: float
) -> None:
    """Worked table of the hard-clipped sine, harmonics re the clip level; the op-amp's rail is a soft corner of 50 mV
    in 100 V, so half a percent is asked."""
    clip = 99.0
    one = amplifier(10.0, 100.0)
    (sine,) = measure_sines(one, 100.0, [clip * 10 ** (drive_db / 20) / 10])
    level = np.max(sine.samples)
    assert sine.harmonics[0] / level == pytest.approx(b1, rel=0.005)
    assert sine.harmonics[2] / level == pytest.approx(b3, rel=0.02)
    assert 100 * sine.thd_of_fundamental == pytest.approx(thd_f, rel=0.02)
    assert 100 * sine.thd_of_total == pytest.approx(thd_r, rel=0.02)


def test_a_linear_stage_has_the_gain_of_its_formula_and_no_distortion() -> None:
    (sine,) = measure_sines(amplifier(11.0), 1000.0, [0.1])
    assert sine.gain_db == pytest.approx(20 * np.log10(11.0), abs=0.001)
    assert sine.thd_of_fundamental < 1e-6
    assert sine.vpp == pytest.approx(2.2, rel=1e-3)
    assert sine.rms == pytest.approx(1.1 / np.sqrt(2), rel=1e-3)
    assert sine.highest == pytest.approx(-sine.lowest, rel=1e-3)
    assert len(sine.samples) == len(sine.take) == len(sine.seconds)
    assert np.max(np.abs(sine.samples - 11 * sine.take)) < 0.05  # drawn in step with the take


def test_headroom_of_an_amplifier_ends_at_its_rails() -> None:
    """Gain 50, rails at 99 V: the gain has fallen by 1 dB where that of the hard-clipped sine has (closed form)."""
    found = measure_headroom(amplifier(50.0, 100.0), 1000.0)
    assert found.small_gain_db == pytest.approx(20 * np.log10(50.0), abs=0.01)
    assert found.largest_vpp == pytest.approx(198.0, rel=0.01)

    def gain(drive: float) -> float:
        theta = np.arcsin(1 / drive)
        return float((2 / np.pi) * (theta + np.sin(theta) * np.cos(theta)))

    drives = np.linspace(1.0001, 2.0, 20000)
    edge = drives[np.argmax(np.array([gain(x) for x in drives]) < 10 ** (-1 / 20))]
    assert found.one_decibel.take_volts == pytest.approx(edge * 99.0 / 50.0, rel=0.01)
    assert found.one_percent.take_volts is not None
    assert found.ten_percent.take_volts is not None
    assert 99.0 / 50 * 0.97 < found.one_percent.take_volts < found.ten_percent.take_volts < 99.0 / 50 * 1.3


def test_slew_rate_limits_the_large_signal_bandwidth() -> None:
    """Full-power bandwidth SR / (2 pi Vp): a 741 at 10 V bends above 8 kHz, not at 1 kHz."""
    slow = {**AMP, "slew_rate": 5e5, "gain_bandwidth": 1e6}
    base = amplifier(2.0, 20.0)
    parts = (*base.parts[:3], part("U1", "opamp", "in", "m", "out", "vcc", "vee", parameters=slow))
    one = Circuit("slow", parts, "in", 0.0, "out", 10e3, base.supply)
    low, high = (measure_sines(one, hertz, [5.0])[0].thd_of_fundamental for hertz in (1000.0, 12000.0))
    assert low < 0.005
    assert high > 0.05


def test_a_limit_that_is_not_reached_is_none() -> None:
    found = measure_headroom(lag(), 1000.0, "draft")
    assert found.one_percent.take_volts is None
    assert found.one_decibel.output_vpp is None


@pytest.mark.parametrize("hertz", [100.0, 440.0, 997.0, 1000.0, 5000.0, 19999.0])
def test_whole_cycles_fit(hertz: float) -> None:
    cycles, samples = whole_cycles(hertz)
    assert cycles * 192000 / samples == pytest.approx(hertz, rel=1e-3)


def test_the_figures_are_those_of_the_rendered_audio() -> None:
    """A sine through the renderer at 48 kHz gives the same fundamental and third harmonic."""
    from tackbench.render import prepare

    circuit = load_stage("two-voice").variant(clip="silicon").circuit
    (sine,) = measure_sines(circuit, 1000.0, [0.1])
    stream = prepare(circuit, 48000, "standard").stream(1)
    t = np.arange(48000) / 48000
    out = stream.process((0.1 * np.sin(2 * np.pi * 1000 * t))[:, None])[-4800:, 0]
    spectrum = 2 * np.abs(np.fft.rfft(out)) / len(out)
    assert spectrum[100] == pytest.approx(sine.harmonics[0], rel=1e-3)
    assert spectrum[300] == pytest.approx(sine.harmonics[2], rel=1e-3)


def test_the_command_prints_and_writes_its_figures(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    words = ["measure", "--stage", "jfet-booster", "--at", "0.05", "--json", "figures.json", "--quality", "draft"]
    assert run(words) == 0
    out = capsys.readouterr().out
    for said in ("-3 dB", "Impedance", "THD %", "Headroom", "by supply"):
        assert said in out
    assert max(len(line) for line in out.splitlines()) <= 100
    data = json.loads(Path("figures.json").read_text(encoding="utf-8"))
    assert (data["schema"], data["version"]) == ("tackbench.measure", 1)
    assert data["sines"][0]["take_volts"] == 0.05
    assert run(words) == 2
    assert "figures.json" in capsys.readouterr().err
    assert run(["measure", "--stage", "jfet-booster", "--at", "-1"]) == 2
    assert "--at" in capsys.readouterr().err
