"""Stage files for the tests, with models in place or from a parts folder of the tests' own."""

from __future__ import annotations

from pathlib import Path

from tackbench.parts import load_parts, parse_toml
from tackbench.stage import Stage, read_stage

PARTS = """
format = 1
["T-SIL"]
family = "diode"
saturation_current = "2.52n"
ideality = 1.75
source = "test"
["T-GER"]
family = "diode"
saturation_current = "1u"
ideality = 1.5
material = "germanium"
from_memory = true
["T-AMP"]
family = "opamp"
gain_bandwidth = "3 MHz"
slew_rate = "13 V/us"
open_loop_gain = "200k"
swing_high = 1.5
swing_low = 1.5
output_ohms = 75
max_supply = 36
["T-LOW"]
family = "opamp"
gain_bandwidth = "2.2 MHz"
slew_rate = "3.6 V/us"
open_loop_gain = "35k"
swing_high = 0.1
swing_low = 0.1
output_ohms = 75
max_supply = 16
["T-NPN"]
family = "bipolar"
polarity = "n"
saturation_current = 1e-14
forward_gain = 300
reverse_gain = 4
["T-PNP"]
family = "bipolar"
polarity = "p"
saturation_current = 1e-14
forward_gain = 100
reverse_gain = 4
["T-NJ"]
family = "jfet"
polarity = "n"
drain_current = "1m"
pinch_off_volts = -1
["T-PJ"]
family = "jfet"
polarity = "p"
drain_current = "1m"
pinch_off_volts = 1
["T-NM"]
family = "mosfet"
polarity = "n"
threshold_volts = 2
transconductance = "100 mA/V2"
["T-PM"]
family = "mosfet"
polarity = "p"
threshold_volts = -2
transconductance = "100 mA/V2"
"""

FULL = """
format = 1
title  = "Test stage"
about  = "Everything that the format has."

[input]
node   = "in"
series = "10k"

[output]
node   = "out"
load   = "1M"

[supply]
node   = "vcc"
volts  = 9.0
try    = [9.0, "12 V", "18"]
ohms   = "1R5"
rails  = { vee = -1.0 }

[parts]
C1  = { capacitor = "100n", pins = ["in", "a"], rated = "25V", tolerance = "10%" }
R1  = { resistor = "2M2", pins = ["a", "bias"] }
R2  = { resistor = "0", pins = ["bias", "half"] }
BT1 = { volts = "4.5", pins = ["half", "0"] }
U1  = { opamp = "T-AMP", plus = "a", minus = "m", out = "o", power = ["vcc", "vee"] }
VR1 = { pot = "500k", taper = "audio", pins = ["m", "o", "o"], control = "gain" }
VR3 = { pot = "100k", pins = ["o", "wiper", "open end"], at = "30%" }
R3  = { resistor = "1k", pins = ["m", "g"] }
C2  = { capacitor = 1e-6, pins = ["g", "0"] }
L1  = { inductor = "2.2H", pins = ["o", "x"], ohms = "5k6" }
D1  = { diode = "T-SIL", anode = "x", cathode = "0", count = 2 }
D2  = { diode = { saturation_current = 2.52e-9, ideality = 1.75, series_ohms = 0.6 }, anode = "0", cathode = "x" }
C5  = { capacitor = "10u", pins = ["vcc", "0"], rated = "16V" }
VR2 = { pot = "100k", taper = "reverse audio", pins = ["x", "out", "0"], control = "level" }

[controls]
gain  = { label = "Gain", at = 0.7 }
level = {}

[mods.low-cut]
label = "Low cut"
at    = "full"
[mods.low-cut.positions.full]
[mods.low-cut.positions.tight]
C1 = "10n"

[mods.clip]
at    = "silicon"
[mods.clip.positions.silicon]
[mods.clip.positions.off]
lift  = ["D1", "D2"]
[mods.clip.positions.germanium]
label = "two germanium"
about = "Softer."
D1    = "T-GER"
D2    = "t-ger"
[mods.clip.positions.one-sided]
D1    = { diode = "T-GER" }
D2    = { saturation_current = 1e-9, ideality = 2 }
link  = [["x", "y"]]
fit.D3 = { diode = "T-GER", anode = "y", cathode = "0" }
fit.R9 = { resistor = "1k", pins = ["y", "0"] }

[mods.third]
at = "as is"
[mods.third.positions."as is"]
[mods.third.positions.silicon]
D3 = "T-SIL"
"""


def library(tmp_path: Path):
    """The parts library with the tests' own parts in it."""
    folder = tmp_path / "own-parts"
    folder.mkdir(exist_ok=True)
    (folder / "test.toml").write_text(PARTS, encoding="utf-8")
    return load_parts(folder)


def stage_from(text: str, tmp_path: Path) -> Stage:
    """The stage that ``text`` describes, as if it stood in ``my.toml``."""
    return read_stage(parse_toml(text.encode(), "stage file", "my.toml"), "my", Path("my.toml"), library(tmp_path))
