"""Random runs of a transition system, many at once: what a guess about reachable states must not contradict.

Runs lie side by side in the bits of numpy words. Sub-expressions of one depth and shape are evaluated together, so a
step of a large regular circuit is a few operations on large arrays.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from settled.encodings.system import System
from settled.models.logic import TRUE, Expr, topological
from settled.verify.symbolic.formula import Progress

Words = npt.NDArray[np.uint64]
Places = npt.NDArray[np.int64]
Bits = npt.NDArray[np.bool_]

FULL = np.uint64(0xFFFF_FFFF_FFFF_FFFF)
FEWEST = 128
STEPS = 5_000
KEPT = 64


class Evaluator:
    """Values of expressions over the rows of an array: row i of `values` belongs to the i-th name."""

    def __init__(self, roots: Sequence[Expr], names: Sequence[str]) -> None:
        self._row: dict[Expr, int] = {}
        known = {name: i for i, name in enumerate(names)}
        depth: dict[Expr, int] = {}
        groups: dict[tuple[int, str, int], list[Expr]] = defaultdict(list)
        self._constants: list[tuple[int, bool]] = []
        self.rows = len(known)
        for e in topological(roots):
            if e.op == "var":
                self._row[e], depth[e] = known[e.name], 0
                continue
            self._row[e], self.rows = self.rows, self.rows + 1
            depth[e] = 1 + max((depth[a] for a in e.args), default=0)
            if e.op == "const":
                self._constants.append((self._row[e], e is TRUE))
            else:
                groups[depth[e], e.op, len(e.args)].append(e)
        self._groups = [(op, *self._places(found)) for (_, op, _), found in sorted(groups.items())]
        self.roots = np.array([self._row[r] for r in roots], np.int64)

    def _places(self, found: list[Expr]) -> tuple[Places, Places]:
        operands = np.array([[self._row[a] for a in e.args] for e in found], np.int64)
        return np.array([self._row[e] for e in found], np.int64), operands.T

    def run(self, values: Words) -> Words:
        """Fill in the rows of all sub-expressions; the rows of the roots."""
        for row, one in self._constants:
            values[row] = FULL if one else 0
        for op, out, operands in self._groups:
            values[out] = _combined(op, values, operands)
        found: Words = values[self.roots]
        return found


def _combined(op: str, values: Words, operands: Places) -> Any:
    if op == "not":
        return ~values[operands[0]]
    if op == "ite":
        condition = values[operands[0]]
        return (condition & values[operands[1]]) | (~condition & values[operands[2]])
    if operands.shape[1] == 1:
        reduce = {"and": np.bitwise_and, "or": np.bitwise_or, "xor": np.bitwise_xor}[op].reduce
        return np.asarray(reduce(values[operands[:, 0]], axis=0))[None]
    total = values[operands[0]]
    for row in operands[1:]:
        word = values[row]
        total = total & word if op == "and" else total | word if op == "or" else total ^ word
    return total


class Simulation:
    """Random runs side by side. `state` has a row for each variable; every bit of a row is one run."""

    def __init__(self, made: System, starts: Words, progress: Progress, seed: int = 1) -> None:
        self.progress = progress
        self.state = starts
        self._rng = np.random.default_rng(seed)
        names = [*made.variables, *made.selectors]
        self._chosen = slice(len(made.variables), len(names))
        self._step = Evaluator([e for v in made.variables for e in made.one_copy[v]], names)
        self._taken = 0

    def step(self) -> None:
        """Every run takes a step; in a third of the runs, taking turns, all move that may."""
        self.progress.tick()
        count, width = self.state.shape
        values = np.empty((self._step.rows, width), np.uint64)
        values[:count] = self.state
        values[self._chosen] = self._bits(self._chosen.stop - count, width)
        may = self._step.run(values)
        self.state = may[1::2] & (~may[0::2] | self._movers(count, width))
        self._taken += 1

    def explore(self, alike: Places) -> list[Words]:
        """Step until no variable takes a value it has not had, for as long again as it took so far; some of the states.

        `alike`: a number for each variable; a value that one of those with the same number has had is not new.
        """
        kept, last = [self.state], 0
        had = np.zeros((2, int(alike.max()) + 1), bool)
        while self._taken < min(max(FEWEST, 2 * last), STEPS):
            self.step()
            now = had.copy()
            np.logical_or.at(now[0], alike, (~self.state).any(axis=1))
            np.logical_or.at(now[1], alike, self.state.any(axis=1))
            if (now != had).any():
                had, last = now, self._taken
            kept.append(self.state)
            if len(kept) > 2 * KEPT:
                kept = kept[::2]
        return kept

    def spread(self, width: int) -> None:
        """Continue every run several times over, so that there are `width` words of them."""
        times = -(-width // self.state.shape[1])
        self.state = np.tile(self.state, (1, times))

    def sample(self, count: int, apart: int = 3) -> Words:
        """States of all runs at `count` moments, side by side."""
        found = []
        for _ in range(count):
            for _ in range(apart):
                self.step()
            found.append(self.state)
        return np.concatenate(found, axis=1)

    def _bits(self, count: int, width: int) -> Words:
        return self._rng.integers(0, 1 << 64, (count, width), np.uint64)

    def _movers(self, count: int, width: int) -> Words:
        style = (np.arange(width) + self._taken // 64) % 3
        bits = self._bits(count, width)
        return np.where(style == 0, FULL, np.where(style == 1, bits | self._bits(count, width), bits))
