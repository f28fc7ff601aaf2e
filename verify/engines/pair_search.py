"""Equivalence by exhaustive search over pairs of stable total states: exact for every circuit that fits."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from settled.encodings.packed import Packed, TooWide
from settled.models.circuit import Circuit
from settled.models.states import Behaviour, Run, value
from settled.verify.engines import Engine
from settled.verify.engines.exhaustive import AuditFailed
from settled.verify.explicit.pairs import Found, Pair, PairSearch, Row
from settled.verify.explicit.replies import Replies
from settled.verify.explicit.starts import starts
from settled.verify.limits import LimitReached
from settled.verify.pairing import (
    Schedule,
    both_need_partners,
    by_vector,
    ends_one_by_one,
    environment_of_other,
    schedules,
)
from settled.verify.questions import Answer, Differs, Task

NAME = "exhaustive search over pairs of stable states"
SAMPLE = 200
LISTED = 10_000
WAYS = 32


class Original(Replies):
    """The circuit that the environment looks at: its guards say which inputs may change."""

    def __init__(self, task: Task, question: Differs) -> None:
        super().__init__(task.circuit, question.outputs, task.limits, question.transients)
        self._guards = Packed(task.circuit, task.environment)
        admits = Behaviour(task.circuit, task.environment).admits
        self._schedules = schedules(task.environment.changes, admits, task.limits)
        self._care = (1 << len(question.outputs)) - 1

    def care(self, _: int) -> int:
        """Every output matters in every state."""
        return self._care

    def changes(self, states: Sequence[int]) -> Mapping[int, Sequence[Schedule]]:
        """For each stable total state the changes that guards and assumptions allow."""
        allowed = self._guards.allowed(np.array(states, np.uint64)).tolist()
        mask = self.circuit.input_mask
        return {s: self._schedules(s & mask, a) for s, a in zip(states, allowed, strict=True)}


def differs(task: Task, question: Differs) -> Answer:
    """Look for a start state without a good partner."""
    try:
        original = Original(task, question)
        other = Replies(question.other, question.outputs, task.limits, question.transients)
        rows = start_rows(task, question)
    except TooWide as wide:
        raise LimitReached(str(wide)) from None
    search = PairSearch(original, other, task.limits, question.transients)
    found = search.run(rows)
    if found is not None:
        runs, facts = Refutation(search, original, other).of(found)
        return Answer("refuted", NAME, runs=runs, ranged=_ranged(search), facts=facts)
    relation = search.good()
    _audit(task, question, relation)
    exercised = any(search.lawful[a] for row in rows for a, _ in row.pairs)
    certificate = _certificate(task.circuit, question.other, relation)
    return Answer("proved", NAME, ranged=_ranged(search), exercised=exercised, certificate=certificate)


def start_rows(task: Task, question: Differs) -> list[Row]:
    """The start states that need a partner, each with its pairs."""
    mask = task.circuit.input_mask
    environment = environment_of_other(task.environment, question)
    sides = [(task.circuit, task.environment), (question.other, environment)]
    lefts, rights = (by_vector(starts(Packed(*side), task.limits).tolist(), mask) for side in sides)
    pairs = sum(len(states) * len(rights.get(v, ())) for v, states in lefts.items())
    task.limits.tick(pairs, 0)
    rows = [Row(0, a, tuple((a, b) for b in rights.get(v, ()))) for v, states in lefts.items() for a in states]
    if both_need_partners(task.environment, question):
        rows += [Row(1, b, tuple((a, b) for a in lefts.get(v, ()))) for v, states in rights.items() for b in states]
    return rows


def _ranged(search: PairSearch) -> dict[str, int]:
    return {"pairs_of_stable_states": len(search.seen), "input_changes": search.changes}


class Refutation:
    """The two runs, in step with each other, from the best pair of a start state to the failure."""

    def __init__(self, search: PairSearch, original: Original, other: Replies) -> None:
        self.search, self.sides = search, (original, other)
        self.paths: tuple[list[int], list[int]] = ([], [])
        self.loops: list[int | None] = [None, None]
        self.in_step: list[list[int]] = []
        self.facts: dict[str, Any] = {}

    def of(self, found: Found) -> tuple[tuple[Run, ...], dict[str, Any]]:
        """The runs and the facts of a refutation."""
        titles = ("the original", "the other circuit")
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
                states, signal, step = side.flicker(pair[i], schedule, self.search.new_hazards(pair, schedule))
                self.facts |= {"signal": signal, "offending_step": len(self.paths[i]) - 1 + step}
            else:
                states = min((side.run_to(pair[i], schedule, end) for end in ends), key=len)
            self.paths[i].extend(states[1:])


def _audit(task: Task, question: Differs, relation: Sequence[Pair]) -> None:
    """Check by the executable meaning that changes do not lead out of the relation; a sample of a large one."""
    environment = environment_of_other(task.environment, question)
    left, right = Behaviour(task.circuit, task.environment), Behaviour(question.other, environment)
    lawful = schedules(task.environment.changes, left.admits, task.limits)
    known = set(relation)
    for a, b in relation[:: max(1, len(relation) // SAMPLE)]:
        signals = [[c.signal(s) for s in question.outputs] for c in (task.circuit, question.other)]
        if value(task.circuit, signals[0], a) != value(question.other, signals[1], b):
            raise AuditFailed(f"the outputs of the pair {a:#x}, {b:#x} differ")
        for schedule in lawful(a & task.circuit.input_mask, left.allowed(a)):
            ends = [ends_one_by_one(left, a, schedule), ends_one_by_one(right, b, schedule)]
            if any((p, q) not in known for p in ends[0] or () for q in ends[1] or ()):
                raise AuditFailed(f"a change leads from the pair {a:#x}, {b:#x} out of the relation")


def _certificate(original: Circuit, other: Circuit, relation: Sequence[Pair]) -> dict[str, Any]:
    """The relation, written out when it is not too long: values in the order of the signals of each side."""
    certificate: dict[str, Any] = {"kind": "relation of stable total states", "pairs": len(relation)}
    if len(relation) <= LISTED:
        listed = [[_bits(c, state) for c, state in zip((original, other), pair, strict=True)] for pair in relation]
        certificate |= {"signals": [list(original.signals), list(other.signals)], "relation": listed}
    return certificate


def _bits(circuit: Circuit, state: int) -> str:
    return "".join(str(state >> i & 1) for i in range(len(circuit.signals)))


ENGINE = Engine(NAME, rank=10, answers={Differs: differs})
