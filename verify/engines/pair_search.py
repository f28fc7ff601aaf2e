"""Equivalence by exhaustive search over pairs of stable total states: exact for every circuit that fits."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from settled.encodings.packed import Packed, TooWide
from settled.models.circuit import Circuit
from settled.models.states import Behaviour, value
from settled.verify.engines import Engine
from settled.verify.engines.exhaustive import AuditFailed
from settled.verify.explicit.pairs import Pair, PairSearch, Row, rows
from settled.verify.explicit.refutations import Refutation
from settled.verify.explicit.replies import Replies
from settled.verify.explicit.starts import starts
from settled.verify.limits import LimitReached
from settled.verify.pairing import (
    Schedule,
    both_need_partners,
    ends_one_by_one,
    environment_of_other,
    schedules,
)
from settled.verify.questions import Answer, Differs, Task

NAME = "exhaustive search over pairs of stable states"
SAMPLE, AUDITED = 200, 200
"""Pairs, and total states of one response, that are looked at once more by the executable meaning."""

LISTED = 10_000


class Original(Replies):
    """The circuit that the environment looks at: its guards say which inputs may change."""

    def __init__(self, task: Task, question: Differs) -> None:
        super().__init__(task.circuit, question.outputs, task.limits, question.transients)
        self.guards = Packed(task.circuit, task.environment)
        admits = Behaviour(task.circuit, task.environment).admits
        self._schedules = schedules(task.environment.changes, admits, task.limits)
        self._care = (1 << len(question.outputs)) - 1

    def care(self, _: int) -> int:
        """Every output matters in every state."""
        return self._care

    def changes(self, states: Sequence[int]) -> Mapping[int, Sequence[Schedule]]:
        """For each stable total state the changes that guards and assumptions allow."""
        allowed = self.guards.allowed(np.array(states, np.uint64)).tolist()
        mask = self.circuit.input_mask
        return {s: self._schedules(s & mask, a) for s, a in zip(states, allowed, strict=True)}


def differs(task: Task, question: Differs) -> Answer:
    """Look for a start state without a good partner."""
    try:
        original = Original(task, question)
        other = Replies(question.other, question.outputs, task.limits, question.transients)
        begin = start_rows(task, question)
    except TooWide as wide:
        raise LimitReached(str(wide)) from None
    search = PairSearch(original, other, task.limits, question.transients)
    found = search.run(begin)
    if found is not None:
        runs, facts = Refutation(search, ("the original", "the other circuit")).of(found)
        return Answer("refuted", NAME, runs=runs, ranged=ranged(search), facts=facts)
    relation = search.good()
    _audit(task, question, relation)
    exercised = any(search.lawful[a] for row in begin for a, _ in row.pairs)
    certificate = certificate_of(task.circuit, question.other, relation)
    return Answer("proved", NAME, ranged=ranged(search), exercised=exercised, certificate=certificate)


def start_rows(task: Task, question: Differs) -> list[Row]:
    """The start states that need a partner, each with its pairs."""
    environment = environment_of_other(task.environment, question)
    sides = [(task.circuit, task.environment), (question.other, environment)]
    lefts, rights = (starts(Packed(*side), task.limits).tolist() for side in sides)
    both = both_need_partners(task.environment, question)
    return rows(lefts, rights, task.circuit.input_mask, (True, both), task.limits)


def ranged(search: PairSearch) -> dict[str, int]:
    """What the search covered."""
    return {"pairs_of_stable_states": len(search.seen), "input_changes": search.changes}


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
            ends = [ends_one_by_one(left, a, schedule, AUDITED), ends_one_by_one(right, b, schedule, AUDITED)]
            if any((p, q) not in known for p in ends[0] or () for q in ends[1] or ()):
                raise AuditFailed(f"a change leads from the pair {a:#x}, {b:#x} out of the relation")


def certificate_of(original: Circuit, other: Circuit, relation: Sequence[Pair]) -> dict[str, Any]:
    """The relation, written out when it is not too long: values in the order of the signals of each side."""
    certificate: dict[str, Any] = {"kind": "relation of stable total states", "pairs": len(relation)}
    if len(relation) <= LISTED:
        listed = [[_bits(c, state) for c, state in zip((original, other), pair, strict=True)] for pair in relation]
        certificate |= {"signals": [list(original.signals), list(other.signals)], "relation": listed}
    return certificate


def _bits(circuit: Circuit, state: int) -> str:
    return "".join(str(state >> i & 1) for i in range(len(circuit.signals)))


ENGINE = Engine(NAME, rank=10, answers={Differs: differs})
