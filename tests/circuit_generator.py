"""Random legal circuits, 3 to 25 parts, of every kind and of the shapes that break solvers, from a seed.

A chain of blocks carries the take from the input to the output: plain parts, clippers, transistor and op-amp stages.
Then parts are thrown between nodes that exist, so that no topology is safe. Illegal ones are thrown away.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from tackbench.circuit import Circuit, Part, Supply
from tackbench.circuit.checks import first_fault
from tackbench.devices.schema import fill_defaults

MOST_PARTS = 25


class Bench:
    """A circuit while it is put together."""

    def __init__(self, seed: int) -> None:
        self.rng = np.random.default_rng(seed)
        self.parts: list[Part] = []
        self.count = 0
        volts = float(self.rng.choice([9.0, 9.0, 18.0, 24.0, -9.0, 5.0]))
        ohms = float(self.rng.choice([0.0, 0.0, 10.0, 300.0]))
        rails = (("vee", float(self.rng.choice([-1.0, -1.0, 2.0]))),) if self.rng.random() < 0.3 else ()
        self.supply: Supply | None = Supply("vcc", volts, ohms, rails) if self.rng.random() < 0.8 else None

    @property
    def positive(self) -> bool:
        return self.supply is not None and self.supply.volts > 0

    def pick(self, *choices: Any) -> Any:
        return choices[int(self.rng.integers(len(choices)))]

    def node(self) -> str:
        self.count += 1
        return f"n{self.count}"

    def any_node(self) -> str:
        names = sorted({pin for part in self.parts for pin in part.pins} | {"in", "0"})
        return str(self.pick(*names))

    def log(self, low: float, high: float) -> float:
        return float(np.exp(self.rng.uniform(np.log(low), np.log(high))))

    def add(self, kind: str, *pins: str, **more: Any) -> None:
        self.parts.append(Part(f"X{len(self.parts) + 1}", kind, pins, **more))

    # ------------------------------------------------------------ plain parts

    def resistor(self, a: str, b: str, low: float = 100.0, high: float = 1e6) -> None:
        self.add("resistor", a, b, value=0.0 if self.rng.random() < 0.03 else self.log(low, high))

    def capacitor(self, a: str, b: str, low: float = 1e-10, high: float = 1e-5) -> None:
        self.add("capacitor", a, b, value=self.log(low, high))

    def inductor(self, a: str, b: str) -> None:
        ohms = self.log(10.0, 1e4) if self.rng.random() < 0.7 else 0.0
        self.add("inductor", a, b, value=self.log(1e-3, 4.0), series_ohms=ohms)

    def pot(self, a: str, wiper: str, b: str) -> None:
        ohms, at = self.log(1e4, 1e6), float(self.pick(0.0, 1.0, 0.5, self.rng.random()))
        ref = f"X{len(self.parts) + 1}"
        for section, ends, share in (("first", (a, wiper), at), ("second", (wiper, b), 1 - at)):
            self.parts.append(Part(ref, "resistor", ends, max(1.0, share * ohms), section))

    def diode(self, a: str, b: str) -> None:
        silicon = {"saturation_current": self.log(1e-12, 5e-9), "ideality": self.rng.uniform(1.0, 2.0)}
        germanium = {"saturation_current": self.log(1e-7, 3e-6), "ideality": 1.4, "material": "germanium"}
        given = dict(self.pick(silicon, silicon, germanium))
        given["series_ohms"] = float(self.pick(0.0, 0.6, 12.0))
        given["junction_capacitance"] = float(self.pick(0.0, 4e-12, 1e-10))
        if self.rng.random() < 0.25:
            given.update(breakdown_volts=self.rng.uniform(2.5, 12.0), breakdown_current=1e-3, breakdown_ideality=1.5)
        self.add("diode", a, b, parameters=fill_defaults("diode", given), count=int(self.pick(1, 1, 1, 2, 3)))

    # ------------------------------------------------------------ blocks of the chain

    def series(self, here: str) -> str:
        there = self.node()
        self.pick(self.resistor, self.capacitor, self.inductor, self.resistor)(here, there)
        if self.rng.random() < 0.7:
            self.resistor(there, "0", 1e3, 1e6)
        return there

    def floating(self, here: str) -> str:
        middle, there = self.node(), self.node()
        self.capacitor(here, middle)
        self.capacitor(middle, there)
        if self.rng.random() < 0.5:
            self.capacitor(middle, "0")
        self.resistor(there, "0", 1e3, 1e6)
        return there

    def capacitor_loop(self, here: str) -> str:
        there = self.node()
        self.resistor(here, there, 100.0, 1e5)
        self.capacitor(there, "0")
        self.capacitor(here, there)
        self.capacitor(here, "0")
        return there

    def coil(self, here: str) -> str:
        there = self.node()
        self.inductor(here, there)
        if self.rng.random() < 0.5:
            self.inductor(here, there)
        self.resistor(there, "0", 1e3, 1e5)
        return there

    def inductor_cutset(self, here: str) -> str:
        middle, there = self.node(), self.node()
        self.resistor(here, there, 1e3, 1e5)
        self.inductor(there, middle)
        self.inductor(middle, "0")
        if self.rng.random() < 0.5:
            self.inductor(middle, there)
        return there

    def volume(self, here: str) -> str:
        there = self.node()
        self.pot("0", there, here)
        return there

    def clipper(self, here: str) -> str:
        there = self.node()
        self.resistor(here, there, 500.0, 2e4)
        self.diode(there, "0")
        if self.rng.random() < 0.8:
            self.diode("0", there)
        if self.rng.random() < 0.6:
            self.capacitor(there, "0", 1e-10, 1e-7)
        return there

    def back_to_back(self, here: str) -> str:
        there, middle = self.node(), self.node()
        self.resistor(here, there, 500.0, 2e4)
        if self.rng.random() < 0.5:
            for one in (there, "0"):
                given = {
                    "saturation_current": 1e-14,
                    "ideality": 1.0,
                    "breakdown_volts": 3.9,
                    "breakdown_current": 1e-3,
                }
                self.add("diode", one, middle, parameters=fill_defaults("diode", given))
        else:
            for one in (there, "0"):
                given = {"polarity": "n", "threshold_volts": 1.8, "transconductance": 0.08}
                self.add("mosfet", one, one, middle, parameters=fill_defaults("mosfet", given))
        return there

    def transistor(self, here: str) -> str:
        if self.supply is None:
            return self.clipper(here)
        base, collector, emitter, there = self.node(), self.node(), self.node(), self.node()
        self.capacitor(here, base, 1e-9, 1e-6)
        polarity = 1 if self.positive else -1
        high, low = "vcc", "0"
        if self.rng.random() < 0.25:  # the other kind, upside down between the same two nodes
            polarity, high, low = -polarity, low, high
        self.resistor(high, base, 1e5, 5e5)
        self.resistor(base, low, 2e4, 1e5)
        self.resistor(high, collector, 2e3, 1e4)
        self.resistor(emitter, low, 200.0, 3e3)
        if self.rng.random() < 0.6:
            self.capacitor(emitter, low, 1e-6, 4e-5)
        silicon = {"saturation_current": self.log(1e-15, 1e-13), "material": "silicon"}
        germanium = {"saturation_current": self.log(5e-7, 3e-6), "leakage_current": 3e-6, "material": "germanium"}
        given = dict(self.pick(silicon, silicon, germanium))
        given.update(forward_gain=self.rng.uniform(40, 400), reverse_gain=self.rng.uniform(1, 10))
        if self.rng.random() < 0.7:
            given["early_volts"] = self.rng.uniform(30, 100)
        if self.rng.random() < 0.6:
            given.update(base_emitter_capacitance=1e-11, base_collector_capacitance=3e-12)
        parameters = fill_defaults("bipolar", {"polarity": "n" if polarity > 0 else "p", **given})
        self.add("bipolar", collector, base, emitter, parameters=parameters, polarity=polarity)
        if self.rng.random() < 0.3:
            return collector  # direct coupling
        self.capacitor(collector, there, 1e-9, 1e-6)
        self.resistor(there, "0", 1e4, 1e6)
        return there

    def field_effect(self, here: str) -> str:
        if self.supply is None:
            return self.volume(here)
        gate, drain, source, there = self.node(), self.node(), self.node(), self.node()
        polarity = 1 if self.positive else -1
        self.capacitor(here, gate, 1e-9, 1e-6)
        self.resistor("vcc", drain, 1e3, 1e4)
        self.resistor(source, "0", 200.0, 3e3)
        if self.rng.random() < 0.5:
            self.capacitor(source, "0", 1e-6, 4e-5)
        if self.rng.random() < 0.5:
            self.resistor(gate, "0", 1e5, 2e6)
            given = {"drain_current": self.log(1e-3, 1e-2), "pinch_off_volts": -polarity * self.rng.uniform(0.8, 4.0)}
            kind = "jfet"
        else:
            self.resistor("vcc", gate, 2e5, 2e6)
            self.resistor(gate, "0", 2e5, 2e6)
            given = {
                "transconductance": self.log(0.01, 0.2),
                "threshold_volts": polarity * self.rng.uniform(0.8, 2.5),
            }
            kind = "mosfet"
        if self.rng.random() < 0.6:
            given.update(channel_modulation=0.02, gate_source_capacitance=5e-12, gate_drain_capacitance=2e-12)
        parameters = fill_defaults(kind, {"polarity": "n" if polarity > 0 else "p", **given})
        self.add(kind, drain, gate, source, parameters=parameters, polarity=polarity)
        self.capacitor(drain, there, 1e-9, 1e-6)
        self.resistor(there, "0", 1e4, 1e6)
        return there

    def amplifier(self, here: str) -> str:
        if self.supply is None or not self.positive or self.supply.volts < 9.0:
            return self.clipper(here)
        plus, minus, out, leg = self.node(), self.node(), self.node(), self.node()
        given: dict[str, Any] = {"gain_bandwidth": self.log(5e5, 1e7), "slew_rate": self.log(3e5, 1.5e7)}
        given.update(
            open_loop_gain=2e5, swing_high=1.0, swing_low=1.0, output_ohms=float(self.pick(50.0, 200.0, 0.01))
        )
        if self.rng.random() < 0.3:
            given["output_current"] = 0.02
        if self.rng.random() < 0.3:
            given["input_ohms"] = 1e6
        if self.rng.random() < 0.5:
            given["supply_current"] = 1e-3
        mirrored = dict(self.supply.rails).get("vee") == -1.0
        middle = "0" if mirrored else self.node()
        if not mirrored:
            self.resistor("vcc", middle, 1e4, 1e5)
            self.resistor(middle, "0", 1e4, 1e5)
            self.capacitor(middle, "0", 1e-6, 4e-5)
        self.capacitor(here, plus, 1e-9, 1e-6)
        self.resistor(plus, middle, 1e5, 1e6)
        self.resistor(out, minus, 1e3, 2e5)
        self.resistor(minus, leg, 300.0, 2e4)
        self.capacitor(leg, "0", 1e-8, 1e-5)
        if self.rng.random() < 0.5:
            self.diode(minus, out)
            self.diode(out, minus)
        power = ("vcc", "vee" if mirrored else "0")
        self.add("opamp", plus, minus, out, *power, parameters=fill_defaults("opamp", given))
        if self.rng.random() < 0.2:
            self.resistor(out, plus, 1e5, 1e7)  # positive feedback
        there = self.node()
        self.capacitor(out, there, 1e-8, 1e-5)
        self.resistor(there, "0", 1e4, 1e6)
        return there

    def source(self, here: str) -> str:
        there, held = self.node(), self.node()
        self.add("source", held, "0", value=float(self.rng.uniform(-5, 5)))
        self.resistor(held, there, 1e3, 1e5)
        self.capacitor(here, there, 1e-9, 1e-6)
        if self.rng.random() < 0.5:
            self.capacitor(held, "0")  # across an ideal source
        return there

    def extra(self) -> None:
        """A part between nodes that exist."""
        one, other = self.any_node(), self.any_node()
        if one != other:
            self.pick(self.resistor, self.capacitor, self.resistor, self.diode, self.capacitor)(one, other)


def random_circuit(seed: int) -> Circuit:
    """The legal circuit of this seed."""
    for attempt in range(1000):
        found = _attempt(seed * 1000 + attempt)
        if found is not None and first_fault(found) is None:
            return found
    raise RuntimeError(f"no legal circuit came out of seed {seed}")


def _attempt(seed: int) -> Circuit | None:
    bench = Bench(seed)
    blocks: list[Callable[[str], str]] = [
        *(bench.series, bench.floating, bench.capacitor_loop, bench.coil, bench.inductor_cutset, bench.volume),
        *(bench.clipper, bench.clipper, bench.back_to_back, bench.transistor, bench.transistor, bench.field_effect),
        *(bench.amplifier, bench.amplifier, bench.source),
    ]
    here = "in"
    for _ in range(int(bench.rng.integers(1, 4))):
        here = bench.pick(*blocks)(here)
    for _ in range(int(bench.rng.integers(0, 3))):
        bench.extra()
    if not 3 <= len(bench.parts) <= MOST_PARTS:
        return None
    used = {pin for part in bench.parts for pin in part.pins}
    rails = bench.supply.rails if bench.supply is not None else ()
    if bench.supply is not None and ("vcc" not in used or any(name not in used for name, _ in rails)):
        if "vcc" not in used:
            bench.supply = None
            if any(name in used for name, _ in rails):
                return None
        else:
            kept = tuple((name, ratio) for name, ratio in rails if name in used)
            bench.supply = Supply("vcc", bench.supply.volts, bench.supply.ohms, kept)
    series = float(bench.pick(0.0, 1e3, 1e4))
    load = bench.pick(1e6, 1e5, None)
    kelvin = float(bench.pick(298.15, 298.15, 283.15, 313.15))
    return Circuit(f"random {seed}", tuple(bench.parts), "in", series, here, load, bench.supply, kelvin)


def listing(circuit: Circuit) -> str:
    """The circuit in lines, for a failing test to print."""
    lines = [f"in behind {circuit.input_ohms:g} ohm, out {circuit.output_node} into {circuit.output_load_ohms}"]
    lines.append(f"supply {circuit.supply}, {circuit.temperature:g} K")
    for part in circuit.parts:
        value = "" if part.value is None else f"{part.value:.4g}"
        lines.append(
            f"{part.ref}{part.section} {part.kind} {part.pins} {value} x{part.count} {dict(part.parameters)}"
        )
    return "\n".join(lines)
