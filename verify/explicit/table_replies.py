"""Responses of a flow table, which settles in one step, for the search over pairs."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from settled.models.environment import Environment
from settled.models.flow_table import FlowTable
from settled.models.states import Behaviour
from settled.verify.explicit.replies import Reply
from settled.verify.limits import Limits
from settled.verify.pairing import Schedule, schedules


class TableReplies:
    """A flow table as the original. Its states are those of its circuit: one node for each row."""

    def __init__(self, table: FlowTable, environment: Environment, outputs: Sequence[str], limits: Limits) -> None:
        self.table, self.outputs, self.limits = table, outputs, limits
        self.circuit = table.circuit
        self.behaviour = Behaviour(self.circuit, environment)
        self._schedules = schedules(environment.changes, self.behaviour.admits, limits)
        self._place = [table.outputs.index(z) for z in outputs]

    def starts(self) -> list[int]:
        """The stable total states in which runs may begin; an output that is not given agrees with any start value."""
        return [self.table.state(*at) for at in self.table.stable_states() if self.may_start(*at)]

    def may_start(self, row: str, vector: int) -> bool:
        """Whether runs may begin in a stable entry."""
        given = dict(zip(self.table.outputs, self.table.entries[row, vector].outputs, strict=True))
        given |= {x: vector >> i & 1 for i, x in enumerate(self.table.inputs)}
        wanted = self.behaviour.environment.start
        return self.behaviour.admits(vector) and all(given[s] in (None, v) for s, v in wanted.items())

    def prepare(self, changes: Iterable[tuple[int, Schedule]]) -> None:
        """Nothing is made ready: a table is looked up."""

    def evaluate(self, states: Iterable[int]) -> None:
        """Nothing is made ready."""

    def reply(self, state: int, schedule: Schedule) -> Reply:
        """The rows in which the response to a change can end."""
        row, vector = self.table.place(state)
        ends = self.table.respond(row, vector, schedule) or set()
        for instant in schedule:
            vector ^= instant
        return Reply(tuple(sorted(self.table.state(r, vector) for r in ends)), 0, 0)

    def hazards(self, state: int, schedule: Schedule) -> int:
        """A table has no transients to speak of."""
        return 0

    def bits(self, state: int) -> list[int | None]:
        """The compared outputs of a stable total state."""
        outputs = self.table.entries[self.table.place(state)].outputs
        return [outputs[i] for i in self._place]

    def value(self, state: int) -> int:
        """The packed values of the compared outputs."""
        return sum(1 << i for i, bit in enumerate(self.bits(state)) if bit)

    def care(self, state: int) -> int:
        """The packed set of compared outputs that are given."""
        return sum(1 << i for i, bit in enumerate(self.bits(state)) if bit is not None)

    def changes(self, states: Sequence[int]) -> Mapping[int, Sequence[Schedule]]:
        """The changes that guards and assumptions allow, but for those that meet an entry that is not specified."""
        return {state: tuple(s for s in self._allowed(state) if self.applies(state, s)) for state in states}

    def _allowed(self, state: int) -> tuple[Schedule, ...]:
        return self._schedules(state & self.circuit.input_mask, self.behaviour.allowed(state))

    def applies(self, state: int, schedule: Schedule) -> bool:
        """Whether every entry on the way is specified."""
        return self.table.respond(*self.table.place(state), schedule) is not None

    def run_to(self, state: int, schedule: Schedule, end: int) -> list[int]:
        """The shortest run of a response to one of its ends."""
        row, vector = self.table.place(state)
        target = self.table.place(end)
        parent = {(row, vector ^ schedule[0], schedule[1:]): (row, vector, schedule)}
        todo = list(parent)
        for at in todo:
            if at == (*target, ()):
                return self._trace(parent, at, (row, vector, schedule))
            for after in self._following(*at):
                if after not in parent:
                    parent[after] = at
                    todo.append(after)
        raise AssertionError("an end of a response has a run to it")

    def _following(self, row: str, vector: int, rest: Schedule) -> list[tuple[str, int, Schedule]]:
        after = self.table.entries[row, vector].after
        assert after is not None, "a change that meets an unspecified entry is not applied"
        moved = [(after, vector, rest)] if after != row else []
        return moved + [(r, vector ^ rest[0], rest[1:]) for r in dict.fromkeys((row, after)) if rest]

    def _trace(self, parent: Mapping[Doing, Doing], at: Doing, first: Doing) -> list[int]:
        path = [at]
        while path[-1] != first:
            path.append(parent[path[-1]])
        return [self.table.state(row, vector) for row, vector, _ in reversed(path)]

    def lasso(self, state: int, schedule: Schedule) -> tuple[list[int], int]:
        """Never asked: a table settles."""
        raise AssertionError("a flow table settles")


Doing = tuple[str, int, Schedule]
"""A row, a vector, and the instants of a change that are still to come."""
