"""A commented stage file to start from: a small sound stage that shows every table of the format."""

from __future__ import annotations

from pathlib import Path

from tackbench.audio.place import written_beside
from tackbench.errors import InputError
from tackbench.workbench.fresh import fresh_place
from tackbench.workbench.part_file import quoted

_TEXT = """\
# A stage file. Change it into your circuit piece by piece, and ask `tackbench check --stage {file}` after each step.
# Values are written as on a schematic: 4k7, 100n, 2u2, 2.2 uF, 1M. A node is a point where parts meet: give each one
# a name of your own. "0" is ground. Every part has a line under its reference designator.
format = 1
title  = {title}
about  = "One or two sentences: what it is, what it is for."

[input]                        # the jack that the guitar's take drives
node   = "in"
series = "0"                   # resistance in series with the take; 0 for a take recorded into a buffered input

[output]                       # the jack that is recorded
node   = "out"
load   = "1M"                  # the next input's resistance, or "none"

[supply]                       # leave the table out in a passive stage
node   = "vcc"
volts  = 9.0                   # negative when ground is the battery's positive pole
try    = [9.0, 18.0]           # what a shootout offers by itself
ohms   = 0.0                   # the battery's or adapter's internal resistance: its sag
# rails = {{ vee = -1.0 }}       # further supply nodes that a converter makes: here a negative one of equal size

[parts]
# Half the supply for the op-amp's input: R1 and R2 divide, C2 keeps it still. What "rated" says is checked against
# the supply; "tolerance" is noted.
C5  = {{ capacitor = "47u", pins = ["vcc", "0"], rated = "35V", tolerance = "20%" }}
R1  = {{ resistor = "47k", pins = ["vcc", "half"], tolerance = "5%" }}
R2  = {{ resistor = "47k", pins = ["half", "0"], tolerance = "5%" }}
C2  = {{ capacitor = "10u", pins = ["half", "0"], rated = "25V" }}

# Input: C1 into R3 is a corner at 1 / (2 pi R3 C1) = 7 Hz.
C1  = {{ capacitor = "22n", pins = ["in", "plus"], rated = "63V" }}
R3  = {{ resistor = "1M", pins = ["plus", "half"] }}

# The op-amp: its model is an entry of the parts library (`tackbench parts opamp`), or a table in place.
U1  = {{ opamp = "TL072", plus = "plus", minus = "minus", out = "amp", power = ["vcc", "0"] }}

# A pot: end, wiper, other end. At 0 the wiper is at the first end. With the wiper tied to an end it is a variable
# resistor. Tapers: "linear", "audio", "reverse audio"; a letter printed on the pot means different ones in different
# regions, so name the taper.
VR1 = {{ pot = "100k", taper = "audio", pins = ["minus", "amp", "amp"], control = "gain" }}
R4  = {{ resistor = "1k", pins = ["minus", "leg"] }}
C3  = {{ capacitor = "1u", pins = ["leg", "0"], rated = "25V" }}

# Out through a capacitor and a resistor into a pair of diodes, then the level pot.
C4  = {{ capacitor = "1u", pins = ["amp", "send"], rated = "25V" }}
R5  = {{ resistor = "4k7", pins = ["send", "clip"] }}
D1  = {{ diode = "1N4148", anode = "clip", cathode = "0" }}
D2  = {{ diode = "1N4148", anode = "0", cathode = "clip" }}
VR2 = {{ pot = "100k", taper = "audio", pins = ["0", "out", "clip"], control = "level" }}

# Other kinds: inductor = "2.2H" (with ohms = "5k6"), volts = "4.5" (an ideal battery, + first), npn or pnp
# (collector, base, emitter), n-jfet, p-jfet, n-mosfet, p-mosfet (drain, gate, source); count = 2 for two diodes in
# series.

[controls]                     # one table for each name that a pot's "control" says; at: 0 to 1, unless chosen
gain  = {{ label = "Gain", at = 0.6 }}
level = {{ label = "Level", at = 0.8 }}

# A mod is a switch or a swap: two positions or more, "at" is how it is built.
[mods.clip]
label = "Clipping diodes"
at    = "silicon"
[mods.clip.positions.silicon]
[mods.clip.positions.germanium]
D1    = "1N270"                # a new model or value for a part
D2    = "1N270"
[mods.clip.positions.asymmetric]
fit.D3 = {{ diode = "1N4148", anode = "0", cathode = "join" }}   # a part added
D2     = {{ diode = "1N4148", anode = "join", cathode = "clip" }}
[mods.clip.positions.off]
lift  = ["D1", "D2"]           # parts taken out

[mods.bass]
label = "Bass"
at    = "full"
[mods.bass.positions.full]
[mods.bass.positions.tight]
C3    = "100n"                 # 1 / (2 pi R4 C3): 1.6 kHz instead of 160 Hz
[mods.bass.positions.open]
link  = [["leg", "half"]]      # a wire between two nodes
"""


def write_new_stage(name: str) -> Path:
    """Write the stage file ``name`` (``.toml`` is added), which must not be there. Raises InputError or WorkError."""
    if not name.strip() or not name.isprintable():
        raise InputError(f"{name!r} cannot name a stage file", expected="give a name such as my-boost")
    place = Path(name if name.endswith(".toml") else f"{name}.toml")
    if not place.name.removesuffix(".toml"):
        raise InputError(f"{name!r} cannot name a stage file", expected="give a name such as my-boost")
    fresh_place(place)
    title = place.name.removesuffix(".toml").replace("-", " ").replace("_", " ").strip().capitalize() or "My stage"
    text = _TEXT.format(title=quoted(title), file=place)
    with written_beside(place) as beside:
        beside.write_text(text, encoding="utf-8")
    return place
