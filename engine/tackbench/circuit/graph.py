"""Two small tools over a circuit's nodes: groups that grow together, and potentials along ideal connections."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from tackbench.circuit.netlist import GROUND, Circuit, Part


class Groups:
    """Nodes in disjoint groups; joining two nodes merges their groups."""

    def __init__(self) -> None:
        self._parent: dict[str, str] = {}

    def of(self, node: str) -> str:
        """The node that stands for the group of ``node``."""
        root = node
        while self._parent.get(root, root) != root:
            root = self._parent[root]
        while self._parent.get(node, node) != root:  # shorten the way for the next question
            self._parent[node], node = root, self._parent.get(node, node)
        return root

    def join(self, a: str, b: str) -> bool:
        """Merge the groups of two nodes; False when they were one already."""
        root_a, root_b = self.of(a), self.of(b)
        self._parent[root_a] = root_b
        return root_a != root_b

    def same(self, a: str, b: str) -> bool:
        """True when the two nodes are in one group."""
        return self.of(a) == self.of(b)


def is_short(part: Part) -> bool:
    """True for a wire and for a resistor of zero ohms."""
    return part.kind == "wire" or (part.kind == "resistor" and part.value == 0.0)


def is_short_at_dc(part: Part) -> bool:
    """True for what has no volts across it at direct current: shorts and inductors without winding resistance."""
    return is_short(part) or (part.kind == "inductor" and part.series_ohms == 0.0)


def ideal_sources(circuit: Circuit) -> Iterator[tuple[str, str, str, float]]:
    """Every ideal voltage source with volts that are known: (name, plus, minus, volts). The supply counts although
    it may have a resistance: these are nominal volts."""
    if circuit.supply is not None:
        yield "supply", circuit.supply.node, GROUND, circuit.supply.volts
        for node, ratio in circuit.supply.rails:
            yield f"supply rail {node}", node, GROUND, ratio * circuit.supply.volts
    for part in circuit.parts:
        if part.kind == "source":
            yield part.ref, part.pin("plus"), part.pin("minus"), part.value or 0.0


def nominal_volts(circuit: Circuit) -> dict[str, float]:
    """Volts of each node that is tied to ground through sources, wires and zero-ohm parts alone, with no current
    drawn from the supply: what is certain before anything is solved."""
    neighbours: dict[str, list[tuple[str, float]]] = {}
    for a, b, rise in _ties(circuit):
        neighbours.setdefault(a, []).append((b, -rise))
        neighbours.setdefault(b, []).append((a, rise))
    volts = {GROUND: 0.0}
    waiting = [GROUND]
    while waiting:
        node = waiting.pop()
        for other, rise in neighbours.get(node, ()):
            if other not in volts:
                volts[other] = volts[node] + rise
                waiting.append(other)
    return volts


def _ties(circuit: Circuit) -> Iterable[tuple[str, str, float]]:
    """(a, b, volts of a above b) for every connection whose volts are known at direct current."""
    for _, plus, minus, volts in ideal_sources(circuit):
        yield plus, minus, volts
    for part in circuit.parts:
        if is_short_at_dc(part):
            yield part.pins[0], part.pins[1], 0.0
