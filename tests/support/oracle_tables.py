"""The naive oracle for `realises`: a flow table as the original, by throwing out bad pairs until none is left."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

from oracle import Verdict
from oracle_world import Schedule, State, Unaskable, World, reach

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.flow_table import FlowTable
from settled.models.logic import Expr, topological

Row = tuple[str, State]
"""A row and the inputs that are 1."""

Pair = tuple[Row, State]


def realises(table: FlowTable, circuit: Circuit, environment: Environment) -> Verdict:
    """Whether a circuit does what a table says; `fewest_changes` in the facts of a refutation."""
    shared = {s: v for s, v in environment.start.items() if s in (*table.inputs, *table.outputs)}
    rules = World(circuit, replace(environment, guards={}))
    sides = Sides(table, rules, replace(environment, start=shared))
    bad = sides.bad_pairs()
    lefts, rights = sides.table_starts(), sides.circuit_starts()
    rows = [[p for p in sides.pairs if p[1] == b and p[0] in lefts] for b in rights]
    if len(shared) == len(environment.start):
        rows += [[p for p in sides.pairs if p[0] == a and p[1] in rights] for a in lefts]
    best = [max((bad.get(p, 10**6) for p in row), default=0) for row in rows]
    failing = [changes for changes in best if changes < 10**6]
    vacuous = not failing and not any(sides.schedules(p[0]) for row in rows for p in row)
    return Verdict("refuted" if failing else "proved", vacuous, {"fewest_changes": min(failing)} if failing else {})


class Sides:
    """A table and a circuit beside each other."""

    def __init__(self, table: FlowTable, world: World, rules: Environment) -> None:
        self.table, self.world, self.rules = table, world, rules
        self.entries = {(row, self.names(v)): entry for (row, v), entry in table.entries.items()}
        self.lefts = [(row, v) for row, v in self.entries if self.entries[row, v].after == row and world.admits(v)]
        self.pairs = [
            (a, b)
            for a in self.lefts
            for b in world.completions(a[1])
            if world.stable(b) and self.world.inputs(b) == a[1]
        ]

    def names(self, vector: int) -> State:
        return frozenset(x for i, x in enumerate(self.table.inputs) if vector >> i & 1)

    def given(self, row: Row) -> dict[str, int | None]:
        return dict(zip(self.table.outputs, self.entries[row].outputs, strict=True))

    def table_starts(self) -> list[Row]:
        """Stable entries whose inputs and outputs fit the start values; outputs that are not given fit."""
        found = []
        for row in self.lefts:
            values: dict[str, int | None] = {x: int(x in row[1]) for x in self.table.inputs}
            values |= self.given(row)
            if all(values[s] in (None, v) for s, v in self.rules.start.items()):
                found.append(row)
        return found

    def circuit_starts(self) -> set[State]:
        try:
            return self.world.starts()
        except Unaskable:
            return set()

    def value(self, e: Expr, row: Row) -> bool:
        """A guard on the table; an output that is not given counts as 0."""
        values = {x: x in row[1] for x in self.table.inputs} | {z: bool(v) for z, v in self.given(row).items()}
        circuit = Circuit("guard", tuple(values), (), {})
        assert all(leaf.name in values for leaf in topological([e]) if leaf.op == "var")
        return World(circuit, Environment()).value(e, frozenset(s for s, v in values.items() if v))

    def schedules(self, row: Row) -> set[Schedule]:
        """The changes that guards and assumptions allow and that meet no unspecified entry."""
        free = World(Circuit("inputs", self.table.inputs, (), {}), replace(self.rules, start={}, guards={}))
        guards = {x: self.rules.guard(x) for x in self.table.inputs}
        willing = {x for x, g in guards.items() if self.value(g.falls if x in row[1] else g.rises, row)}
        found = {s for s in free.schedules(row[1]) if frozenset().union(*s) <= willing}
        return {s for s in found if self.table_ends(row, s) is not None}

    def table_ends(self, row: Row, schedule: Schedule) -> set[Row] | None:
        """The rows in which the table can come to rest; None when an unspecified entry is met."""
        seen = reach([(row[0], row[1] ^ schedule[0], schedule[1:])], self._after)
        if any(self.entries[r, v].after is None for r, v, _ in seen):
            return None
        return {(r, v) for r, v, rest in seen if not rest and self.entries[r, v].after == r}

    def _after(self, at: tuple[str, State, Schedule]) -> Iterator[tuple[str, State, Schedule]]:
        row, vector, rest = at
        after = self.entries[row, vector].after
        if after is not None:
            yield after, vector, rest
            if rest:
                yield after, vector ^ rest[0], rest[1:]
        if rest:
            yield row, vector ^ rest[0], rest[1:]

    def circuit_ends(self, state: State, schedule: Schedule) -> set[State] | None:
        response = self.world.response(state, [schedule])
        if self.world.oscillations(at.state for at in response if not at.waiting):
            return None
        return {at.state for at in response if self.world.ended(at)}

    def bad_pairs(self) -> dict[Pair, int]:
        """Every pair that is not good, with the fewest changes to the difference."""
        bad = {p: 0 for p in self.pairs if self.apart(*p)}
        for changes in range(1, len(self.pairs) + 2):
            more = [p for p in self.pairs if p not in bad and self.fails(*p, bad)]
            bad |= dict.fromkeys(more, changes)
            if not more:
                break
        return bad

    def apart(self, row: Row, state: State) -> bool:
        return any(v is not None and self.world.signal(z, state) != bool(v) for z, v in self.given(row).items())

    def fails(self, row: Row, state: State, bad: dict[Pair, int]) -> bool:
        for schedule in self.schedules(row):
            lefts, rights = self.table_ends(row, schedule), self.circuit_ends(state, schedule)
            if rights is None or any((p, q) in bad for p in lefts or () for q in rights):
                return True
        return False
