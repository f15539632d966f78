"""The flat netlist and what can be said about it without any equation."""

from tackbench.circuit.netlist import GROUND, PIN_ORDER, Circuit, Part, Supply

__all__ = ["GROUND", "PIN_ORDER", "Circuit", "Part", "Supply"]
