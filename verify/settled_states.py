"""Stable total states as expressions over the inputs and a cut of the loops: the other nodes follow without delay."""

from __future__ import annotations

from collections.abc import Sequence
from functools import cached_property

from settled.models.circuit import Circuit
from settled.models.logic import FALSE, TRUE, Expr, not_, rename, substitute, var, xor
from settled.verify.explicit.starts import order_without, some_cut


class Settled:
    """A circuit with no delay outside `cut`, which must lie on every loop (default: a small cut).

    `value`: each input and node as an expression over inputs and cut. `follows`: what a node of the cut is excited to.
    """

    def __init__(self, circuit: Circuit, cut: Sequence[str] | None = None) -> None:
        self.circuit = circuit
        self.cut = tuple(some_cut(circuit.excitation) if cut is None else cut)
        self.order = order_without(circuit, self.cut)
        self.value: dict[str, Expr] = {s: var(s) for s in (*circuit.inputs, *self.cut)}
        for n in self.order:
            self.value[n] = self._without_delay(circuit.excitation[n])
        self.follows = {k: self._without_delay(circuit.excitation[k]) for k in self.cut}

    def _without_delay(self, e: Expr) -> Expr:
        return rename([e], self.value)[0]

    def in_rest(self, e: Expr) -> Expr:
        """An expression over any signals (definitions, `stable`, `excited` allowed), as it is in stable states."""
        leaves = {"stable": TRUE, "excited": FALSE}
        (plain,) = self.circuit.resolve(*substitute([e], lambda leaf: leaves.get(leaf.op, leaf)))
        return self._without_delay(plain)

    @cached_property
    def conditions(self) -> list[Expr]:
        """What is true of inputs and cut in exactly the stable total states."""
        return [not_(xor(var(k), e)) for k, e in self.follows.items()]
