"""The runs of a refutation: two sides in step with each other, from a pair of start states to the failure."""

from __future__ import annotations

from typing import Any

from settled.models.states import Run
from settled.verify.explicit.pairs import Facing, Found, Pair, PairSearch
from settled.verify.explicit.replies import Replies
from settled.verify.pairing import Schedule

WAYS = 32
"""How many ways on the shortest sequence of changes are compared for the fewest steps, at each change."""


class Refutation:
    """The two runs, in step with each other, from the best pair of a start state to the failure."""

    def __init__(self, search: PairSearch, titles: tuple[str, str]) -> None:
        self.search, self.titles = search, titles
        self.sides: tuple[Facing, Facing] = search.original, search.other
        self.paths: tuple[list[int], list[int]] = ([], [])
        self.loops: list[int | None] = [None, None]
        self.in_step: list[list[int]] = []
        self.facts: dict[str, Any] = {}

    def of(self, found: Found) -> tuple[tuple[Run, ...], dict[str, Any]]:
        """The runs and the facts of a refutation."""
        titles = self.titles
        if found.pair is None:
            side = found.row.side
            run = Run(f"{titles[side]}: a start state without a partner", (found.row.state,), None, self._name(side))
            return (run,), {"fewest_changes": 0}
        self._follow(found.pair, found.changes)
        runs = [Run(titles[i], tuple(self.paths[i]), self.loops[i], self._name(i)) for i in (0, 1)]
        facts = {"fewest_changes": found.changes, "in_step": self.in_step, "partners": len(found.row.pairs)}
        return tuple(runs), facts | self.facts

    def _name(self, side: int) -> str:
        return self.sides[side].circuit.name

    def _follow(self, pair: Pair, changes: int) -> None:
        for path, state in zip(self.paths, pair, strict=True):
            path.append(state)
        while changes:
            self.in_step.append([len(path) - 1 for path in self.paths])
            fault = self.search.faults.get(pair)
            if fault is not None:
                self._fail(pair, fault.schedule, fault.what)
                return
            schedule, after = self._nearest(pair, changes - 1)
            self._note_races(pair, schedule)
            for i, side in enumerate(self.sides):
                self.paths[i].extend(side.run_to(pair[i], schedule, after[i])[1:])
            pair, changes = after, changes - 1

    def _nearest(self, pair: Pair, level: int) -> tuple[Schedule, Pair]:
        """A change and ends of both responses that are bad after one change fewer; few steps first."""
        search = self.search
        ways = [(s, q) for s in search.lawful[pair[0]] for q in search.ends(pair, s) if search.level.get(q) == level]

        def steps(way: tuple[Schedule, Pair]) -> int:
            return sum(len(side.run_to(pair[i], way[0], way[1][i])) for i, side in enumerate(self.sides))

        return min(ways[:WAYS], key=steps)

    def _note_races(self, pair: Pair, schedule: Schedule) -> None:
        for i, side in enumerate(self.sides):
            if len(side.reply(pair[i], schedule).ends or ()) > 1:
                self.facts.setdefault("races", []).append({"circuit": self._name(i), "change": len(self.in_step)})

    def _fail(self, pair: Pair, schedule: Schedule, what: str) -> None:
        for i, side in enumerate(self.sides):
            ends = side.reply(pair[i], schedule).ends
            if ends is None:
                states, loop = side.lasso(pair[i], schedule)
                self.loops[i] = len(self.paths[i]) - 1 + loop
            elif what == "hazard" and i == 1:
                assert isinstance(side, Replies), "only full responses show transients"
                states, signal, step = side.flicker(pair[i], schedule, self.search.new_hazards(pair, schedule))
                self.facts |= {"signal": signal, "offending_step": len(self.paths[i]) - 1 + step}
            else:
                states = min([side.run_to(pair[i], schedule, end) for end in ends], key=len)
            self.paths[i].extend(states[1:])
