"""Operating points, responses and renders against closed forms and tabulated worked values, one device at a time.

Formulas are the textbooks', from memory, where no source is named. Worked tables were computed apart from this
program to the digits that are printed.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import mpmath
import numpy as np
import pytest
from scipy.special import lambertw

from tackbench.circuit import Circuit, Part, Supply
from tackbench.devices.schema import fill_defaults
from tackbench.network import operating_point, response
from tackbench.render.prepared import prepare

RATE = 48000
VT = 1.380649e-23 * 298.15 / 1.602176634e-19  # exact SI constants, 25 °C
LEAK = 1e-12
OHMS, CURRENT, SCALE = 2200.0, 2.52e-9, 0.0453
TEXTBOOK = fill_defaults("diode", {"saturation_current": CURRENT, "ideality": SCALE / VT})


def resistor(name: str, one: str, other: str, ohms: float) -> Part:
    return Part(name, "resistor", (one, other), ohms)


def capacitor(name: str, one: str, other: str, farads: float) -> Part:
    return Part(name, "capacitor", (one, other), farads)


def source(name: str, node: str, volts: float) -> Part:
    return Part(name, "source", (node, "0"), volts)


def device(name: str, family: str, pins: Sequence[str], polarity: int = 1, **given: Any) -> Part:
    return Part(name, family, tuple(pins), polarity=polarity, parameters=fill_defaults(family, given))


def circuit(*parts: Part, supply: Supply | None = None, load: float | None = None) -> Circuit:
    return Circuit("closed form", (*parts, resistor("RIN", "in", "0", 1e6)), "in", 0.0, "out", load, supply)


def resting(*parts: Part, node: str = "out", supply: Supply | None = None) -> float:
    return operating_point(circuit(*parts, supply=supply)).node_volts[node]


def rendered(one: Circuit, volts: np.ndarray, quality: str = "standard") -> np.ndarray:
    stream = prepare(one, RATE, quality).stream(1)
    return np.concatenate([stream.process(volts[:, None]), stream.finish()])[:, 0]


# ---------------------------------------------------------------- diodes


def textbook_diode(name: str, pins: tuple[str, str]) -> Part:
    return Part(name, "diode", pins, parameters=TEXTBOOK)


@pytest.mark.parametrize("volts", [0.1, 0.5, 1.0, 4.5, 9.0])
def test_a_diode_behind_a_resistor_by_lambert_w(volts: float) -> None:
    """v = V + IS R - nVt W(IS R / nVt exp((V + IS R) / nVt)); the leak across it makes V and R their Thevenin's."""
    got = resting(source("V1", "top", volts), resistor("R1", "top", "out", OHMS), textbook_diode("D1", ("out", "0")))
    open_volts, ohms = volts / (1 + OHMS * LEAK), OHMS / (1 + OHMS * LEAK)
    with mpmath.workdps(30):
        inside = CURRENT * ohms / SCALE * mpmath.exp((open_volts + CURRENT * ohms) / SCALE)
        expected = open_volts + CURRENT * ohms - SCALE * mpmath.lambertw(inside)
    assert got == pytest.approx(float(expected), abs=1e-10)
    if volts < 5:
        small = CURRENT * OHMS / SCALE * np.exp((volts + CURRENT * OHMS) / SCALE)
        assert got == pytest.approx(volts + CURRENT * OHMS - SCALE * lambertw(small).real, abs=1e-8)


@pytest.mark.parametrize(
    ("volts", "expected"),
    [
        *[(0.1, 0.099950254), (0.25, 0.248658102), (0.5, 0.428654543), (1.0, 0.515436430), (2.0, 0.564629058)],
        *[(4.5, 0.609794905), (9.0, 0.644425263), (10.0, 0.649521448)],
    ],
)
def test_a_static_antiparallel_pair(volts: float, expected: float) -> None:
    """Worked table: R = 2.2 kilohm, IS = 2.52 nA, nVt = 45.3 mV."""
    pair = textbook_diode("D1", ("out", "0")), textbook_diode("D2", ("0", "out"))
    got = resting(source("V1", "top", volts), resistor("R1", "top", "out", OHMS), *pair)
    assert got == pytest.approx(expected, abs=2e-9)


@pytest.mark.parametrize(
    ("peak", "hertz", "harmonics", "degrees", "highest"),
    [
        (0.1, 1000.0, (0.099017, 0.000006), -7.867, 0.099011),
        (1.0, 1000.0, (0.600130, 0.105643, 0.023377, 0.004549, 0.004581), -6.331, 0.515430),
        (4.5, 1000.0, (0.751362, 0.210262, 0.108943, 0.066198, 0.042846), -4.493, 0.609795),
        (4.5, 100.0, (0.753090, 0.214448, 0.114871, 0.073246, 0.050457), -0.541, 0.609795),
        (4.5, 5000.0, (0.741080, 0.189143), -14.805, 0.609793),
    ],
)
def test_the_textbook_dynamic_clipper(
    peak: float, hertz: float, harmonics: tuple[float, ...], degrees: float, highest: float
) -> None:
    """Worked table (Radau at 1e-11, periodic steady state): the same pair with 10 nF; harmonics in volts."""
    one = circuit(
        resistor("R1", "in", "out", OHMS),
        capacitor("C1", "out", "0", 1e-8),
        textbook_diode("D1", ("out", "0")),
        textbook_diode("D2", ("0", "out")),
    )
    t = np.arange(4800) / RATE
    out = rendered(one, peak * np.sin(2 * np.pi * hertz * t), "best")[-2400 - 480 : -480]
    spectrum = 2 * np.fft.rfft(out) / len(out)
    step = round(hertz * len(out) / RATE)
    for order, expected in zip(range(1, 10, 2), harmonics, strict=False):
        assert abs(spectrum[order * step]) == pytest.approx(expected, abs=2e-6)
    assert np.degrees(np.angle(1j * spectrum[step])) == pytest.approx(degrees, abs=1e-3)
    if hertz < 2000:  # at 5 kHz the band ends before the crest is whole
        assert np.max(out) == pytest.approx(highest, abs=0.02)


def test_a_string_of_diodes_shares_its_voltage() -> None:
    one = textbook_diode("D1", ("out", "0"))
    string = Part("D1", "diode", ("out", "0"), parameters=TEXTBOOK, count=3)
    single = resting(source("V1", "top", 3.0), resistor("R1", "top", "out", 1e3), one)
    three = resting(source("V1", "top", 9.0), resistor("R1", "top", "out", 3e3), string)
    assert three == pytest.approx(3 * single, abs=1e-9)


def test_zeners_back_to_back_hold_breakdown_plus_a_forward_drop() -> None:
    """The middle node hangs on the junctions alone; both laws inverted by hand at the current that results."""
    given = {"saturation_current": 1e-14, "ideality": 1.0, "series_ohms": 0.0}
    given.update(breakdown_volts=5.1, breakdown_current=1e-3, breakdown_ideality=2.0)
    one = device("D1", "diode", ("out", "mid"), **given)
    other = device("D2", "diode", ("0", "mid"), **given)
    got = resting(source("V1", "top", 12.0), resistor("R1", "top", "out", 1e3), one, other)
    current = (12.0 - got) / 1e3
    forward = VT * np.log(current / 1e-14 + 1)
    breakdown = 5.1 + 2 * VT * np.log(current / 1e-3)
    assert got == pytest.approx(forward + breakdown, abs=1e-6)


@pytest.mark.parametrize("celsius", [-10.0, 25.0, 60.0])
def test_saturation_current_follows_temperature(celsius: float) -> None:
    """IS(T) = IS (T/T0)^(XTI/n) exp((EG/n)(q/k)(1/T0 - 1/T)), solved by mpmath."""
    kelvin, ideality = celsius + 273.15, 1.75
    parts = (
        source("V1", "top", 5.0),
        resistor("R1", "top", "out", 1e4),
        device("D1", "diode", ("out", "0"), saturation_current=2.52e-9, ideality=ideality),
    )
    one = Circuit("heat", (*parts, resistor("RIN", "in", "0", 1e6)), "in", 0.0, "out", None, None, kelvin)
    got = operating_point(one).node_volts["out"]
    with mpmath.workdps(30):
        k_over_q = mpmath.mpf("1.380649e-23") / mpmath.mpf("1.602176634e-19")
        ratio = mpmath.mpf(kelvin) / mpmath.mpf("298.15")
        heat = mpmath.mpf("1.11") / ideality / k_over_q * (1 / mpmath.mpf("298.15") - 1 / mpmath.mpf(kelvin))
        current = mpmath.mpf("2.52e-9") * ratio ** (3 / ideality) * mpmath.exp(heat)
        scale = ideality * k_over_q * kelvin
        expected = mpmath.findroot(lambda v: (5 - v) / 1e4 - current * mpmath.expm1(v / scale) - LEAK * v, 0.6)
    assert got == pytest.approx(float(expected), abs=1e-9)


# ---------------------------------------------------------------- transistors


def test_a_biased_transistor_by_mpmath() -> None:
    """Four equations of the transport form, base divider, collector and emitter resistor, solved at 30 digits."""
    given = {"saturation_current": 7e-15, "forward_gain": 300.0, "reverse_gain": 4.0, "early_volts": 80.0}
    given["leakage_current"] = 1e-8
    parts = (
        resistor("R1", "vcc", "b", 47e3),
        resistor("R2", "b", "0", 10e3),
        resistor("R3", "vcc", "out", 4700.0),
        resistor("R4", "e", "0", 1e3),
        device("Q1", "bipolar", ("out", "b", "e"), **given),
    )
    point = operating_point(circuit(*parts, supply=Supply("vcc", 9.0, 0.0)))

    def balance(vb: Any, vc: Any, ve: Any) -> list[Any]:
        forward, backward = mpmath.exp((vb - ve) / VT), mpmath.exp((vb - vc) / VT)
        across = mpmath.mpf("7e-15") * (forward - backward) * (1 - (vb - vc) / 80)
        ibe = mpmath.mpf("7e-15") / 300 * (forward - 1) + LEAK * (vb - ve)
        ibc = mpmath.mpf("7e-15") / 4 * (backward - 1) + 1e-8 * mpmath.tanh((vb - vc) / (2 * VT)) + LEAK * (vb - vc)
        return [
            (9 - vb) / 47e3 - vb / 10e3 - ibe - ibc,
            (9 - vc) / 4700 - across + ibc,
            across + ibe - ve / 1e3,
        ]

    with mpmath.workdps(30):
        vb, vc, ve = mpmath.findroot(balance, (1.5, 5.0, 0.9))
    for name, expected in (("b", vb), ("out", vc), ("e", ve)):
        assert point.node_volts[name] == pytest.approx(float(expected), abs=1e-7)


@pytest.mark.parametrize("celsius", [25.0, 35.0, 55.0])
def test_leakage_with_the_base_nearly_open(celsius: float) -> None:
    """ICEO = (BF + 1) ICBO, ICBO doubling every 10 K (common practice, no source); IS, so small, adds nothing."""
    leakage, gain = 4e-6, 60.0
    given = {"saturation_current": 1e-12, "forward_gain": gain, "reverse_gain": 5.0, "leakage_current": leakage}
    parts = (
        source("V1", "top", 6.0),
        resistor("R1", "top", "out", 1e3),
        resistor("R2", "b", "0", 1e12),
        device("Q1", "bipolar", ("out", "b", "0"), **given, band_gap=0.67),
        resistor("RIN", "in", "0", 1e6),
    )
    point = operating_point(Circuit("leakage", parts, "in", 0.0, "out", None, None, celsius + 273.15))
    expected = (gain + 1) * leakage * 2 ** ((celsius - 25.0) / 10.0)
    assert (6.0 - point.node_volts["out"]) / 1e3 == pytest.approx(expected, rel=1e-4)


def test_a_pnp_is_the_npn_upside_down() -> None:
    given = {"saturation_current": 1e-14, "forward_gain": 100.0, "reverse_gain": 2.0, "early_volts": 50.0}

    def stage(polarity: int) -> dict[str, float]:
        parts = (
            resistor("R1", "vcc", "b", 100e3),
            resistor("R2", "b", "0", 22e3),
            resistor("R3", "vcc", "out", 4700.0),
            resistor("R4", "e", "0", 1e3),
            device("Q1", "bipolar", ("out", "b", "e"), polarity, **given),
        )
        return dict(operating_point(circuit(*parts, supply=Supply("vcc", polarity * 9.0, 0.0))).node_volts)

    npn, pnp = stage(1), stage(-1)
    for name in ("b", "out", "e"):
        assert pnp[name] == pytest.approx(-npn[name], abs=1e-9)


@pytest.mark.parametrize("source_ohms", [220.0, 1000.0, 4700.0])
def test_a_jfet_with_a_source_resistor_by_the_quadratic(source_ohms: float) -> None:
    """Saturated, no channel modulation: IDSS (1 + I RS / VP)² = I, the smaller root."""
    idss, pinch_off = 4e-3, -2.0
    parts = (
        resistor("R1", "g", "0", 1.0),
        resistor("R2", "s", "0", source_ohms),
        resistor("R3", "vcc", "out", 100.0),
        device("Q1", "jfet", ("out", "g", "s"), drain_current=idss, pinch_off_volts=pinch_off),
    )
    got = resting(*parts, node="s", supply=Supply("vcc", 12.0, 0.0))
    a = idss * source_ohms**2 / pinch_off**2
    b = 2 * idss * source_ohms / pinch_off - 1
    current = (-b - np.sqrt(b * b - 4 * a * idss)) / (2 * a)
    assert got == pytest.approx(current * source_ohms, rel=1e-6)


def test_a_mosfet_with_a_source_resistor_by_the_quadratic() -> None:
    """K/2 (VG - I RS - VTH)² = I."""
    K, threshold, ohms, gate = 0.1, 2.0, 1e3, 4.0
    parts = (
        source("V1", "g", gate),
        resistor("R2", "s", "0", ohms),
        resistor("R3", "vcc", "out", 100.0),
        device("Q1", "mosfet", ("out", "g", "s"), threshold_volts=threshold, transconductance=K),
    )
    got = resting(*parts, node="s", supply=Supply("vcc", 12.0, 0.0))
    drive = gate - threshold
    current = (1 + K * ohms * drive - np.sqrt(1 + 2 * K * ohms * drive)) / (K * ohms**2)
    assert got == pytest.approx(current * ohms, rel=1e-6)


# ---------------------------------------------------------------- op-amps and supplies

AMP = {"gain_bandwidth": 1e6, "slew_rate": 5e5, "open_loop_gain": 2e5, "swing_high": 1.5, "swing_low": 1.5}
AMP["output_ohms"] = 75.0


def amplifier(gain: float, volts: float, **more: float) -> Circuit:
    return circuit(
        resistor("R1", "m", "0", 1e3),
        resistor("R2", "out", "m", 1e3 * (gain - 1)),
        Part("U1", "opamp", ("in", "m", "out", "vcc", "vee"), parameters=fill_defaults("opamp", {**AMP, **more})),
        supply=Supply("vcc", volts, 0.0, (("vee", -1.0),)),
    )


def test_gain_bandwidth_product() -> None:
    """Worked value: one pole, A0 = 2e5, GBW 1 MHz, gain 101 at 20 kHz: |H| = 44.805; -3 dB near GBW / gain."""
    one = amplifier(101.0, 15.0, output_ohms=1e-3)
    gains = np.abs(response(one, [1.0, 20e3, 1e6 / 101]))
    assert gains[1] == pytest.approx(44.805, abs=0.001)
    assert gains[0] == pytest.approx(101 / (1 + 101 / 2e5), rel=1e-5)
    assert gains[2] == pytest.approx(gains[0] / np.sqrt(2), rel=2e-3)


def test_a_slewing_triangle() -> None:
    """A 1 kHz square of 8 V through 0.05 V/us: straight flanks of SR (behind 75 ohm into 2 kilohm), then flat."""
    one = amplifier(2.0, 15.0, slew_rate=5e4)
    t = np.arange(960) / RATE
    out = rendered(one, 4.0 * np.tanh(20 * np.sin(2 * np.pi * 1000 * t)), "best")
    for sign in (1.0, -1.0):
        start = next(k for k in range(300, 700) if sign * out[k] < -5.0 <= sign * out[k + 1])
        flank = out[start + 1 : start + 9]
        assert RATE * np.polyfit(np.arange(8.0), flank, 1)[0] == pytest.approx(sign * 5e4 * 2000 / 2075, rel=0.005)
    assert np.median(out[300:700][out[300:700] > 7.5]) == pytest.approx(8.0, abs=0.06)


def test_full_power_bandwidth() -> None:
    """f = SR / (2 pi Vp), worked value 7.96 kHz at 10 V and 0.5 V/us: well below it the sine is whole, well above
    it is a triangle of SR / (4 f)."""
    one = amplifier(2.0, 20.0)
    t = np.arange(2400) / RATE
    peaks = {}
    for hertz in (2000.0, 16000.0):
        fade = np.minimum(1.0, t / 0.005)
        out = rendered(one, 5.0 * fade * np.sin(2 * np.pi * hertz * t))
        spectrum = 2 * np.abs(np.fft.rfft(out[1200:2160])) / 960
        peaks[hertz] = spectrum[round(hertz * 960 / RATE)]
    assert peaks[2000.0] == pytest.approx(10.0, rel=0.01)
    triangle = 5e5 / (4 * 16000.0)
    assert peaks[16000.0] == pytest.approx(8 / np.pi**2 * triangle, rel=0.05)


@pytest.mark.parametrize("volts", [6.0, 9.0, 15.0])
def test_rails_stop_the_output(volts: float) -> None:
    """At full overdrive the output reaches the rail less the swing: SR = SR exp((w - Vhi) / s) at w = Vhi."""
    one = amplifier(100.0, volts)
    t = np.arange(1440) / RATE
    out = rendered(one, 2.0 * np.sin(2 * np.pi * 50 * t))
    load = 100e3 / (100e3 + 75.0)
    assert np.max(out) == pytest.approx((volts - 1.5) * load, abs=0.02)
    assert np.min(out) == pytest.approx(-(volts - 1.5) * load, abs=0.02)


def test_an_output_current_limit() -> None:
    """Imax tanh(…) into 100 ohm: no more than Imax · 100 ohm."""
    limited = fill_defaults("opamp", {**AMP, "output_current": 0.02})
    one = circuit(
        Part("U1", "opamp", ("in", "out", "out", "vcc", "vee"), parameters=limited),
        resistor("RL", "out", "0", 100.0),
        supply=Supply("vcc", 12.0, 0.0, (("vee", -1.0),)),
    )
    t = np.arange(1440) / RATE
    out = rendered(one, 6.0 * np.sin(2 * np.pi * 100 * t))
    assert np.max(out) == pytest.approx(2.0, abs=0.01)


def test_an_output_current_limit_bends_as_the_table_says() -> None:
    """tanh(2 sin x), worked table of its harmonics: an open loop of gain 100, bent by nothing else, into 1 milliohm.
    The limit's voltage is 20 mA times 75 ohm, so 30 mV of take are twice that at w."""
    given = {"gain_bandwidth": 1e9, "slew_rate": 1e13, "open_loop_gain": 100.0, "output_current": 0.02}
    given.update(swing_high=1.0, swing_low=1.0, output_ohms=75.0)
    one = circuit(
        Part("U1", "opamp", ("in", "0", "out", "vcc", "vee"), parameters=fill_defaults("opamp", given)),
        resistor("RL", "out", "0", 1e-3),
        supply=Supply("vcc", 20.0, 0.0, (("vee", -1.0),)),
    )
    t = np.arange(2400) / RATE
    out = rendered(one, 0.03 * np.sin(2 * np.pi * 200.0 * t), "best")[960:1920] / (0.02 * 1e-3)
    harmonics = 2 * np.abs(np.fft.rfft(out)) / len(out)
    assert harmonics[[4, 12, 20, 28]] == pytest.approx([1.117942, 0.188742, 0.043005, 0.010107], abs=3e-5)


@pytest.mark.parametrize("ohms", [1.7, 300.0])
def test_a_battery_sags_under_its_load(ohms: float) -> None:
    """Volts less internal resistance times current; 1.7 ohm is an alkaline 9 V battery's (maker's sheet, MN1604)."""
    one = circuit(
        resistor("R1", "vcc", "out", 2e3),
        resistor("R2", "out", "0", 1e3),
        supply=Supply("vcc", 9.0, ohms),
    )
    point = operating_point(one)
    assert point.supply_current == pytest.approx(9.0 / (3000.0 + ohms), rel=1e-9)
    assert point.node_volts["vcc"] == pytest.approx(9.0 * 3000.0 / (3000.0 + ohms), rel=1e-9)


def test_a_battery_sags_in_time_with_what_the_op_amp_delivers() -> None:
    """A follower sends V/RL into its load; what is positive comes out of the supply, with the quiescent current and
    a corner of 10 uA. The output that is recorded here is the supply itself."""
    ohms, load, quiescent, peak = 200.0, 1e3, 1.4e-3, 2.0
    given = {"gain_bandwidth": 1e9, "slew_rate": 1e12, "open_loop_gain": 1e6, "output_ohms": 1.0}
    given.update(swing_high=1.0, swing_low=1.0, supply_current=quiescent)
    one = Circuit(
        "sag",
        (
            source("V1", "vee", -9.0),
            Part("U1", "opamp", ("in", "amp", "amp", "vcc", "vee"), parameters=fill_defaults("opamp", given)),
            resistor("RL", "amp", "0", load),
        ),
        *("in", 0.0, "vcc", None, Supply("vcc", 9.0, ohms)),
    )
    t = np.arange(1920) / RATE
    out = rendered(one, peak * np.sin(2 * np.pi * 100.0 * t), "best")[480:1440]
    amperes = peak * np.sin(2 * np.pi * 100.0 * t[480:1440]) / load
    expected = 9.0 - ohms * (quiescent + 0.5 * (amperes + np.sqrt(amperes**2 + 1e-10)))
    assert np.abs(np.fft.rfft(out - expected)[:101]).max() / 480 < 2e-6  # to 5 kHz: above that the band ends


def test_a_converter_rail_takes_its_load_from_the_supply() -> None:
    """vee = -live supply; its load's power comes out of the supply: currents add at a ratio of one."""
    one = circuit(
        resistor("R1", "vee", "0", 1e3),
        resistor("R2", "vcc", "out", 1e3),
        resistor("R3", "out", "0", 1e3),
        supply=Supply("vcc", 9.0, 100.0, (("vee", -1.0),)),
    )
    point = operating_point(one)
    volts = 9.0 / (1 + 100.0 * (1 / 1e3 + 1 / 2e3))
    assert point.node_volts["vcc"] == pytest.approx(volts, rel=1e-9)
    assert point.node_volts["vee"] == pytest.approx(-volts, rel=1e-9)


# ---------------------------------------------------------------- linear parts


@pytest.mark.parametrize(
    ("ohms", "farads", "corner"),
    [(1e6, 1e-8, 15.915), (1e6, 2.2e-8, 7.234), (10e3, 1e-8, 1591.55), (2200.0, 1e-8, 7234.3)],
)
def test_corners_of_resistor_and_capacitor(ohms: float, farads: float, corner: float) -> None:
    """Worked table of 1 / (2 pi R C): -3.01 dB and -45 degrees there."""
    one = circuit(resistor("R1", "in", "out", ohms), capacitor("C1", "out", "0", farads))
    (gain,) = response(one, [corner])
    assert abs(gain) == pytest.approx(np.sqrt(0.5), rel=1e-4)
    assert np.degrees(np.angle(gain)) == pytest.approx(-45.0, abs=0.01)


def test_a_bias_divider_with_its_capacitor() -> None:
    """Worked value: 10k + 10k on 9 V with 47 uF: 4.5 V, Thevenin 5k, corner 0.677 Hz."""
    one = circuit(
        resistor("R1", "vcc", "out", 1e4),
        resistor("R2", "out", "0", 1e4),
        capacitor("C1", "out", "0", 47e-6),
        resistor("R3", "in", "out", 1e9),
        supply=Supply("vcc", 9.0, 0.0),
    )
    assert operating_point(one).node_volts["out"] == pytest.approx(4.5, rel=1e-5)
    low, corner = np.abs(response(one, [1e-4, 0.67726]))
    assert corner / low == pytest.approx(np.sqrt(0.5), rel=1e-3)


def test_a_pickup_against_its_transfer_function() -> None:
    """Coil L with R behind it, winding capacitance, volume pot, cable: the ladder's impedances by hand."""
    coil, ohms, winding, pot, cable = 2.8, 6500.0, 110e-12, 500e3, 700e-12
    one = circuit(
        Part("L1", "inductor", ("in", "out"), coil, series_ohms=ohms),
        capacitor("C1", "out", "0", winding + cable),
        resistor("R1", "out", "0", pot),
        load=1e6,
    )
    hertz = np.geomspace(20, 20e3, 60)
    s = 2j * np.pi * hertz
    admittance = s * (winding + cable) + 1 / pot + 1e-6
    expected = 1 / (1 + (ohms + s * coil) * admittance)
    got = response(one, hertz)
    assert np.max(np.abs(20 * np.log10(np.abs(got / expected)))) < 1e-6
    assert np.max(np.abs(np.degrees(np.angle(got / expected)))) < 1e-5


@pytest.mark.parametrize(("quality", "limit"), [("standard", -88.0), ("best", -105.0)])
@pytest.mark.parametrize("hertz", [100.0, 3000.0, 15000.0])
def test_a_render_is_aligned_with_its_take(hertz: float, quality: str, limit: float) -> None:
    """1 / (1 + s RC) of a sine, sample by sample: no gain, no delay of the render's own."""
    one = circuit(resistor("R1", "in", "out", 1e4), capacitor("C1", "out", "0", 4.7e-9))
    t = np.arange(2880) / RATE
    out = rendered(one, np.sin(2 * np.pi * hertz * t), quality)[960:1920]
    expected = np.imag(np.exp(2j * np.pi * hertz * t[960:1920]) / (1 + 2j * np.pi * hertz * 4.7e-5))
    assert 20 * np.log10(np.std(out - expected) / np.std(expected)) < limit
