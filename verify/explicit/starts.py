"""The start states as packed words: by SAT where few, else by evaluation from the inputs and a cut of the loops."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from settled.encodings.packed import Bits, Packed, Words
from settled.models.circuit import Circuit
from settled.models.components import components
from settled.models.logic import Expr, Program, support
from settled.verify.limits import Limits

NARROW, OPEN = 12, 22
"""Inputs and nodes of a cut up to which evaluation is quicker than SAT, and up to which it is possible."""

FEW = 256


def starts(packed: Packed, limits: Limits) -> Words:
    """All start states, in increasing order."""
    circuit = packed.circuit
    cut = some_cut(circuit.excitation) if packed.fundamental else circuit.nodes
    free = [s for s in (*circuit.inputs, *cut) if s not in packed.environment.start]
    if len(free) > NARROW:
        found = _by_sat(packed, limits, FEW if len(free) <= OPEN else None)
        if found is not None:
            return found
    words = _all_values(packed, cut)
    return np.unique(words[_may_start(packed, words)])


def _all_values(packed: Packed, cut: Sequence[str]) -> Words:
    """Words with all values of inputs and of a cut of the loops that `start` allows; the other nodes follow."""
    circuit, given = packed.circuit, packed.environment.start
    names = (*circuit.inputs, *cut)
    words = np.full(1, sum(1 << circuit.place[n] for n in names if given.get(n)), np.uint64)
    for name in names:
        if name not in given:
            words = np.concatenate([words, words | np.uint64(1 << circuit.place[name])])
    for name in order_without(circuit, cut):
        program = Program([circuit.excitation[name]])
        value = packed.mask(packed.values(program, words), words, circuit.place[name])
        words = words | value
    return words


def _may_start(packed: Packed, words: Words) -> Bits:
    good = packed.admits(words)
    for name, wanted in packed.environment.start.items():
        good &= packed.holds([packed.circuit.signal(name)], words) == bool(wanted)
    return good & (packed.excited(words) == 0) if packed.fundamental else good


def _by_sat(packed: Packed, limits: Limits, most: int | None) -> Words | None:
    """All start states; None when they are more than `most`."""
    from settled.verify.stable_states import start_states

    found: list[int] = []
    for state in start_states(packed.circuit, packed.environment):
        if len(found) == most:
            return None
        found.append(state)
        limits.tick(len(found), 0)
    return np.array(sorted(found), np.uint64)


def some_cut(excitation: Mapping[str, Expr]) -> list[str]:
    """Nodes that lie on every loop, few but not always the fewest: the busiest node of each loop, again and again."""
    reads = {n: {r for r in support(e) if r in excitation} for n, e in excitation.items()}
    cut = [n for n in reads if n in reads[n]]
    while True:
        rest = {n: reads[n] - set(cut) for n in reads if n not in cut}
        whole = [part for part in components(rest) if len(part) > 1]
        if not whole:
            return cut
        for part in whole:
            inside = {n: rest[n] & set(part) for n in part}
            fans = {n: sum(n in r for r in inside.values()) for n in part}
            cut.append(max(part, key=lambda n: (len(inside[n]) * fans[n], n)))


def order_without(circuit: Circuit, cut: Sequence[str]) -> list[str]:
    """The nodes outside a cut, each after those that it reads."""
    open_ = set(cut)
    rest = {n: [r for r in support(circuit.excitation[n]) if r not in open_] for n in circuit.nodes if n not in open_}
    return [n for part in components(rest) for n in part]
