"""Every rule of the stage file broken once: the error names file, part and key, and what would be right."""

from __future__ import annotations

from pathlib import Path

import pytest

from stage_examples import FULL, stage_from
from tackbench.errors import InputError

# What stands in the well-formed file => what is put there; indented: what the error says after the file's name.
BROKEN = """
format = 1 =>
    format: the format number is missing; a stage file begins with: format = 1
format = 1 => format = 2
    format: format 2 is unknown to this version; it reads format = 1
format = 1 => format = "1"
    format: format '1' is unknown to this version; it reads format = 1
title  = => titel  =
    titel: 'titel' is no key here; did you mean 'title'?
title  = "Test stage" => title = 3
    title: 3 is no text; write title = "…"
[input] => [inptu]
    inptu: 'inptu' is no key here; did you mean 'input'?
node   = "in" => nod = "in"
    input, nod: 'nod' is no key here; did you mean 'node'?
node   = "in" => node = "0"
    input, node: the node is ground; name the node that is not ground
node   = "in" => node = "inn"
    input, node: no part meets the input node 'inn'; did you mean 'in'?
node   = "in" => node = 3
    input, node: the node 3 is a number; write it as text: "3"
series = "10k" => series = "10 nF"
    input, series: '10 nF' is in farads, which does not fit here; expected ohms, for example 4k7, 4.7k or 4700
series = "10k" => series = -1
    input, series: -1 is not allowed; expected ohms zero or above, for example 4k7, 4.7k or 4700
series = "10k" => series = "none"
    input, series: 'none' cannot be read as ohms; expected ohms, for example 4k7, 4.7k or 4700
load   = "1M" => load = 0
    output, load: 0 is not allowed; expected ohms above zero, for example 4k7, 4.7k or 4700
load   = "1M" => load = "open"
    output, load: 'open' cannot be read as ohms; expected ohms, for example 4k7, 4.7k or 4700
node   = "out" => node = "ot"
    output, node: no part meets the output node 'ot'; did you mean 'out'?
node   = "vcc" => node = "vdd"
    supply, node: the supply node 'vdd' feeds nothing; known: a, bias, g, half, in, m, o, open end, out, vcc, vee,
volts  = 9.0 =>
    supply, volts: the supply voltage is missing; write volts = 9.0
volts  = 9.0 => volts = 0
    supply, volts: 0 is not allowed; expected volts other than zero, for example 9, 9V or 4V5
volts  = 9.0 => volts = "9 mA"
    supply, volts: '9 mA' is in amperes, which does not fit here; expected volts, for example 9, 9V or 4V5
try    = [9.0, "12 V", "18"] => try = 9
    supply, try: 9 is no list of voltages; write try = [9.0, 18.0]
try    = [9.0, "12 V", "18"] => try = [-9]
    supply, try: -9 would feed the stage backwards; its supply lies above ground
try    = [9.0, "12 V", "18"] => try = []
    supply, try: [] is no list of voltages; write try = [9.0, 18.0]
ohms   = "1R5" => ohms = -1
    supply, ohms: -1 is not allowed; expected ohms zero or above, for example 4k7, 4.7k or 4700
rails  = { vee = -1.0 } => rails = -1
    supply, rails: -1 is no table; write rails = { vee = -1.0 }
rails  = { vee = -1.0 } => rails = { vee = 0 }
    supply, rails.vee: 0 is not allowed; expected a number other than zero, for example 1.75
rails  = { vee = -1.0 } => rails = { vcc = -1.0 }
    supply, rails.vcc: a rail cannot be the supply node itself; name it anew
rails  = { vee = -1.0 } => rails = { "0" = -1.0 }
    supply, rails.0: a rail cannot be ground; name it anew
rails  = { vee = -1.0 } => rails = { vee = -1.0, up = 2 }
    supply, rails.up: the supply node 'up' feeds nothing; known: a, bias, g, half, in, m, o, open end, out, vcc,
"T-AMP", plus => "T-AMPP", plus
    U1, opamp: the parts library has no opamp 'T-AMPP'; did you mean 'T-AMP'?
opamp = "T-AMP" => opamp = "T-SIL"
    U1, opamp: T-SIL is of kind diode, not opamp; write diode = …
capacitor = "100n" => capacitor = "100k"
    C1, capacitor: '100k' would be an absurd capacitor: M is mega; write u for micro, n or p
capacitor = "100n" => capacitor = "100 nH"
    C1, capacitor: '100 nH' is in henries, which does not fit here; expected farads, for example 100n, 100 nF or 0u1
capacitor = "100n" => capacitor = "0"
    C1, capacitor: a capacitor of '0' is not allowed; give a value above zero, or leave the part out
capacitor = "100n" => capacitor = -1e-9
    C1, capacitor: -1e-09 is not allowed; expected farads above zero, for example 100n, 100 nF or 0u1
capacitor = "100n" => capacitor = "100nJ"
    C1, capacitor: '100nJ' looks like a value with a tolerance letter; give the tolerance under its own key
capacitor = "100n" => capacitor = "0,1u"
    C1, capacitor: '0,1u' has a decimal comma; write a point or a letter code
capacitor = "100n" => capcitor = "100n"
    C1, capcitor: 'capcitor' is no kind of part; did you mean 'capacitor'?
rated = "25V", tol => rated = "25 A", tol
    C1, rated: '25 A' is in amperes, which does not fit here; expected volts, for example 9, 9V or 4V5
tolerance = "10%" => tolerance = "10"
    C1, tolerance: '10' cannot be read as a tolerance; write a percentage such as "10%" or a letter such as "K"
tolerance = "10%" => tolerance = "X"
    C1, tolerance: 'X' cannot be read as a tolerance; write a percentage such as "10%" or a letter such as "K"
tolerance = "10%" => tolernace = "10%"
    C1, tolernace: 'tolernace' is no key of a capacitor; did you mean 'tolerance'?
pins = ["in", "a"] => pins = ["in"]
    C1, pins: 1 node stands here; list 2 nodes
pins = ["in", "a"] => pins = ["in", "a", "b"]
    C1, pins: 3 nodes stand here; list 2 nodes
pins = ["in", "a"] => pins = "in"
    C1, pins: 'in' is no list of nodes; list 2 nodes
pins = ["in", "a"] => pins = ["in", 0]
    C1, pins: the node 0 is a number; write it as text: "0"
, pins = ["in", "a"] =>
    C1, pins: a capacitor needs the key pins; write pins = ["a", "b"]
pins = ["in", "a"] => pins = ["in", "aa"]
    C1, pins: the pin is unconnected: nothing else meets the node 'aa'; did you mean 'a'?
R1  = { resistor = "2M2" => R1  = { resistor = "2M2", capacitor = "1n"
    R1: it has two kinds, resistor and capacitor; one part has one kind
R1  = { resistor = "2M2", pins = ["a", "bias"] } => R1 = "2M2"
    R1: '2M2' is no part; write a table such as { resistor = "1k", pins = ["a", "b"] }
R1  = { resistor = "2M2", pins = ["a", "bias"] } =>
    R2, pins: the pin is unconnected: nothing else meets the node 'bias'; known: 0, a, g, half, in, m, o, open end,
R1  = => "R 1=" =
    R 1=: the part name 'R 1=' holds '='; use letters, digits and dashes
R1  = => lift  =
    lift: 'lift' is a reserved word and cannot name a part; give the part another designator
R1  = => supply  =
    supply: 'supply' already names the supply; give a part another name
R1  = => temperature  =
    temperature: 'temperature' already names the temperature; give a part another name
R1  = => gain  =
    gain: 'gain' already names a control; give a part another name
R1  = => clip  =
    clip: 'clip' already names a mod; give a part another name
R1  = => "R+1"  =
    R+1: the part name 'R+1' holds '+'; use letters, digits and dashes
taper = "audio" => taper = "A"
    VR1, taper: the letter 'A' on a pot means different tapers in different regions; name the taper: 'linear',
taper = "audio" => taper = "b"
    VR1, taper: the letter 'b' on a pot means different tapers in different regions; name the taper: 'linear',
taper = "audio" => taper = "log"
    VR1, taper: 'log' is no known taper; known: audio, linear, reverse audio
taper = "audio" => taper = 1
    VR1, taper: 1 is no known taper; known: 'linear', 'audio', 'reverse audio'
control = "gain" => control = "gian"
    VR1, control: there is no control 'gian'; did you mean 'gain'?
control = "gain" => control = "gain", at = 0.3
    VR1, at: the pot has both a control and a position of its own; put at into [controls.gain]
at = "30%" => at = "130%"
    VR3, at: '130%' is outside 0 to 1; write 0 to 1, a percentage such as 70%, or 7/10
at = "30%" => at = "3k"
    VR3, at: '3k' cannot be read as a position; write 0 to 1, a percentage such as 70%, or 7/10
level = {} => level = 3
    controls.level: 3 is no table; write level = { label = "…", at = 0.5 }
level = {} => level = { pos = 3 }
    controls.level, pos: 'pos' is no key here; known: at, label
level = {} =>
    VR2, control: there is no control 'level'; known: gain
gain  = { label = "Gain", at = 0.7 } => gain = { at = 2 }
    controls.gain, at: 2 is outside 0 to 1; write 0 to 1, a percentage such as 70%, or 7/10
count = 2 => count = 0
    D1, count: 0 is no count; write 1 to 1000
count = 2 => count = 1.5
    D1, count: 1.5 is no count; write how many stand in series, 1 or more
count = 2 => count = "two"
    D1, count: 'two' is no count; write how many stand in series, 1 or more
anode = "x", cathode = "0", count = 2 => anode = "x", count = 2
    D1, cathode: a diode needs the key cathode; write cathode = "a"
anode = "x", cathode = "0", count => anod = "x", cathode = "0", count
    D1, anod: 'anod' is no key of a diode; did you mean 'anode'?
ideality = 1.75, series_ohms = 0.6 => ideality = 1.75, series_ohm = 0.6
    D2 diode, series_ohm: 'series_ohm' is no parameter of this model; did you mean 'series_ohms'?
saturation_current = 2.52e-9, ideality = 1.75 => ideality = 1.75
    D2 diode, saturation_current: this parameter is missing; give saturation_current, a number above zero
saturation_current = 2.52e-9 => saturation_current = "2.52 V"
    D2 diode, saturation_current: '2.52 V' is in volts, which does not fit here; expected amperes, for example
saturation_current = 2.52e-9 => saturation_current = nan
    D2 diode, saturation_current: nan is not a finite number; expected amperes, for example 2.5n, 2.5 nA or 2.5e-9
ohms = "5k6" => ohms = "-5"
    L1, ohms: '-5' is not allowed; expected ohms zero or above, for example 4k7, 4.7k or 4700
at    = "full" =>
    mods.low-cut, at: the position of the circuit as built is missing; write at = "full"
at    = "full" => at = "fall"
    mods.low-cut, at: 'fall' is no position of this mod; did you mean 'full'?
at    = "full" => at = 1
    mods.low-cut, at: 1 is no position of this mod; known: full, tight
label = "Low cut" => lable = "Low cut"
    mods.low-cut, lable: 'lable' is no key here; did you mean 'label'?
lift  = ["D1", "D2"] => lift = ["D1", "D9"]
    mods.clip.positions.off, lift: there is no part 'D9' to lift; known: BT1, C1, C2, C5, D1, D2, L1, R1, R2, R3,
lift  = ["D1", "D2"] => lift = "D1"
    mods.clip.positions.off, lift: 'D1' is no list of parts; write lift = ["D1"]
lift  = ["D1", "D2"] => lift = ["D1", "D1"]
    mods.clip.positions.off, lift: a part is lifted twice; name each part once
link  = [["x", "y"]] => link = [["x", "x"]]
    mods.clip.positions.one-sided, link: the link joins node 'x' with itself; name two nodes
link  = [["x", "y"]] => link = ["x", "y"]
    mods.clip.positions.one-sided, link: ['x', 'y'] is no list of node pairs; write link = [["a", "b"]]
link  = [["x", "y"]] => link = [["x", "z"]]
    mods.clip.positions.one-sided, link: no part meets the node 'z' of the link; known: 0, a, bias, g, half, in, m,
link  = [["x", "y"]] => link = [["vcc", "0"]]
    mods.clip.positions.one-sided, link: joining 'vcc' and '0' shorts the supply; a link may not short a source
link  = [["x", "y"]] => link = [["vcc", "x"],["x","0"]]
    mods.clip.positions.one-sided, link: joining 'x' and '0' shorts the supply; a link may not short a source
link  = [["x", "y"]] => link = [["half", "0"]]
    mods.clip.positions.one-sided, link: joining 'half' and '0' shorts the source BT1; a link may not short a source
fit.D3 = { diode = "T-GER", anode = "y", cathode = "0" } => fit.D1 = { diode = "T-GER", anode = "y", cathode = "0" }
    mods.clip.positions.one-sided, D1: the position both changes and fits D1; do one
fit.D3 = { => fit.link = {
    mods.clip.positions.one-sided fit.link: 'link' is a reserved word and cannot name a part; give the part another
fit.D3 = { diode = "T-GER", anode = "y" => fit.D3 = { diode = "T-GER", anode = "yy"
    mods.clip.positions.one-sided fit.D3, anode: the pin is unconnected: nothing else meets the node 'yy'; did you
D3 = "T-SIL" => D7 = "T-SIL"
    mods.third.positions.silicon, D7: there is no part 'D7' to change; known: BT1, C1, C2, C5, D1, D2, D3, L1, R1,
D3 = "T-SIL" => C1 = "T-SIL"
    mods.third.positions.silicon, C1: 'T-SIL' cannot be read as farads; expected farads, for example 100n, 100 nF
D3 = "T-SIL" => C1 = {}
    mods.third.positions.silicon, C1: the table for C1, a capacitor, has no kind key; write capacitor = "…" in it
D3 = "T-SIL" => D1 = { count = 2 }
    mods.third.positions.silicon, count: count is no parameter of a model; write the kind key too: diode = "…",
D3 = "T-SIL" => D1 = 3
    mods.third.positions.silicon, D1: 3 is no model for D1, a diode; name one of the parts library
[mods.clip.positions.off] => [mods.clip.positions."o,ff"]
    mods.clip.positions.o,ff: the position name 'o,ff' holds ','; use letters, digits and dashes
BT1 = { volts = "4.5", pins = ["half", "0"] } => BT1 = { volts = "4.5", pins = ["vcc", "0"] }
    R2, pins: the pin is unconnected: nothing else meets the node 'half'; known: 0, a, bias, g, in, m, o, open end,
BT1 = { volts = "4.5", pins = ["half", "0"] } => BT1 = { volts = "4.5", pins = ["half", "half"] }
    BT1: both its ends are on one node: it is shorted; leave something between its ends
R1  = { resistor = "2M2", pins = ["a", "bias"] } => R1  = { capacitor = "1n", pins = ["a", "bias"] }
    U1, plus: the node 'a' has no direct-current path to ground: it needs a bias path; add a resistor from it to
pot = "500k" => pot = "A500k"
    VR1, pot: the letter 'A' on a pot means different tapers in different regions; write pot = "500k" and name the
pot = "500k" => pot = "500k C"
    VR1, pot: the letter 'C' on a pot means different tapers in different regions; write pot = "500k" and name the
pot = "500k" => pot = "0"
    VR1, pot: a pot of '0' is not allowed; give a value above zero, or leave the part out
"100k", taper = "reverse audio" => "B100K", taper = "reverse audio"
    VR2, pot: the letter 'B' on a pot means different tapers in different regions; write pot = "100K" and name the
R2  = { resistor = "0" => R2  = { resistor = "-0.1"
    R2, resistor: '-0.1' is not allowed; expected ohms zero or above, for example 4k7, 4.7k or 4700
"""

WHOLE_LINES: list[tuple[list[tuple[str, str]], str]] = [
    (
        [("level = {}", "level = {}\nspare = {}")],
        'controls.spare: no pot names this control; write control = "spare" in the pot that it turns',
    ),
    (
        [('[mods.low-cut.positions.tight]\nC1 = "10n"', "")],
        "mods.low-cut, positions: a mod has two positions or more; write tables headed [mods.low-cut.position",
    ),
    (
        [('lift  = ["D1", "D2"]', 'lift = ["D1", "D2"]\nD1 = "T-GER"')],
        "mods.clip.positions.off, D1: the position both changes and lifts D1; do one",
    ),
    (
        [('lift  = ["D1", "D2"]', 'lift = ["D1", "D2"]\nlyft = ["D1"]')],
        "mods.clip.positions.off, lyft: there is no part 'lyft' to change; did you mean 'lift'?",
    ),
    (
        [
            ("[mods.low-cut]\n", "[mods.gain]\n"),
            ("[mods.low-cut.positions.full]", "[mods.gain.positions.full]"),
            ("[mods.low-cut.positions.tight]", "[mods.gain.positions.tight]"),
        ],
        "mods, gain: 'gain' already names a control; give a mod another name",
    ),
    (
        [("volts  = 9.0", "volts = 0.5"), ("vee = -1.0", "vee = -0.9")],
        "U1, power: its rails are 0.95 V apart (positive less negative); a T-AMP stays 3 V inside them and ne",
    ),
]


def cases() -> list[tuple[list[tuple[str, str]], str]]:
    """The edits of each case and how its error begins."""
    lines = BROKEN.strip().splitlines()
    found = []
    for edit, sentence in zip(lines[::2], lines[1::2], strict=True):
        old, _, new = edit.partition(" =>")
        found.append(([(old, new.removeprefix(" "))], sentence.strip()))
    return found + WHOLE_LINES


def changed(edits: list[tuple[str, str]]) -> str:
    """The well-formed file after each edit, made at the first place where its old text stands."""
    text = FULL
    for old, new in edits:
        assert old in text, old
        text = text.replace(old, new, 1)
    return text


@pytest.mark.parametrize(("edits", "sentence"), cases(), ids=[sentence for _, sentence in cases()])
def test_each_broken_rule_is_named_with_its_place_and_what_would_be_right(
    tmp_path: Path, edits: list[tuple[str, str]], sentence: str
) -> None:
    with pytest.raises(InputError) as caught:
        stage_from(changed(edits), tmp_path)
    assert str(caught.value).startswith(f"my.toml, {sentence}")
    assert str(caught.value).isprintable()
    assert caught.value.expected
    assert caught.value.exit_status == 2
