"""A flow table as data (Huffman 1954): for every internal state and input vector the next internal state and outputs.

A flow table behaves like a circuit that settles in one step; `circuit` is that circuit. Entries that do not say where
to go stand for changes that are not applied, and output values that are not given agree with anything.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

from settled.models.circuit import Circuit
from settled.models.logic import Expr, and_, not_, or_, var

Bit = int | None


@dataclass(frozen=True)
class Entry:
    """Where one total state leads (None: not specified) and the outputs in it, in the table's order."""

    after: str | None
    outputs: tuple[Bit, ...]


class EssentialHazard(NamedTuple):
    """A stable total state and an input of which one and three changes end in different rows.

    `rows`: after one, two and three changes.
    """

    row: str
    vector: int
    input: str
    rows: tuple[str, str, str]


@dataclass(frozen=True, eq=False)
class FlowTable:
    """Rows are internal states; a column is an input vector, packed with the first input lowest.

    `entries` has every row under every vector. `notes`: sentences for the echo.
    """

    name: str
    inputs: tuple[str, ...]
    outputs: tuple[str, ...]
    rows: tuple[str, ...]
    entries: Mapping[tuple[str, int], Entry]
    notes: tuple[str, ...] = ()

    @cached_property
    def vectors(self) -> range:
        """All input vectors."""
        return range(1 << len(self.inputs))

    def is_stable(self, row: str, vector: int) -> bool:
        """Whether an entry leads to its own row."""
        return self.entries[row, vector].after == row

    def settle(self, row: str, vector: int) -> str | None:
        """The row in which the table comes to rest under a vector; None when an entry on the way is not specified."""
        for _ in self.rows:
            after = self.entries[row, vector].after
            if after is None or after == row:
                return after
            row = after
        raise ValueError(f"row `{row}` never comes to rest")

    def stable_states(self) -> Iterator[tuple[str, int]]:
        """The stable total states."""
        return ((row, v) for row in self.rows for v in self.vectors if self.is_stable(row, v))

    def reached(self, row: str) -> set[str]:
        """The rows that input changes can lead to from a row, itself included."""
        seen, todo = {row}, [row]
        while todo:
            here = todo.pop()
            after = {self.entries[here, v].after for v in self.vectors}
            fresh = {r for r in after if r is not None} - seen
            seen |= fresh
            todo += fresh
        return seen

    def essential_hazards(self) -> list[EssentialHazard]:
        """Where one change and three changes of an input lead to different rows.

        Unger 1959, "Hazards and delays in asynchronous sequential switching circuits" (recalled).
        """
        found = []
        for row, vector in self.stable_states():
            for i, x in enumerate(self.inputs):
                rows = self._toggled(row, vector, 1 << i)
                if rows is not None and rows[0] != rows[2]:
                    found.append(EssentialHazard(row, vector, x, rows))
        return found

    def _toggled(self, row: str, vector: int, bit: int) -> tuple[str, str, str] | None:
        one = self.settle(row, vector ^ bit)
        two = None if one is None else self.settle(one, vector)
        three = None if two is None else self.settle(two, vector ^ bit)
        return None if one is None or two is None or three is None else (one, two, three)

    def respond(self, row: str, vector: int, schedule: Sequence[int]) -> set[str] | None:
        """The rows in which the response to a change from a stable total state can end.

        `schedule`: the packed sets of inputs that change, one set an instant; the table may move between two instants
        or not. None when some entry on the way is not specified: such a change is not applied.
        """
        first = (row, vector ^ schedule[0], tuple(schedule[1:]))
        seen, todo, ends = {first}, [first], set()
        while todo:
            here, now, rest = todo.pop()
            after = self.entries[here, now].after
            if after is None:
                return None
            if not rest and after == here:
                ends.add(here)
            following = {(after, now, rest)}
            if rest:
                following |= {(r, now ^ rest[0], rest[1:]) for r in (here, after)}
            todo += following - seen
            seen |= following
        return ends

    def reordered(self, inputs: tuple[str, ...], name: str) -> FlowTable:
        """The same table with its inputs in another order, under another name."""
        place = [inputs.index(x) for x in self.inputs]
        entries = {(r, sum((v >> i & 1) << p for i, p in enumerate(place))): e for (r, v), e in self.entries.items()}
        return FlowTable(name, inputs, self.outputs, self.rows, entries, self.notes)

    # ---- the same as a circuit -----------------------------------------------------------------------------------

    @cached_property
    def circuit(self) -> Circuit:
        """The table as a circuit with a node for each row, of which exactly one is 1.

        A step of the table is one in which all excited nodes switch. An output that is not given is shown as that of
        the next entry for an entry on the move, and as 0 for a stable one.
        """
        column = {v: self._is_vector(v) for v in self.vectors}
        nodes = {row: f"row {row}" for row in self.rows}
        goes: dict[str, list[Expr]] = {row: [] for row in self.rows}
        ones: dict[str, list[Expr]] = {z: [] for z in self.outputs}
        for (row, v), entry in self.entries.items():
            here = and_(var(nodes[row]), column[v])
            goes[row if entry.after is None else entry.after].append(here)
            for z, value in zip(self.outputs, self.shown(row, v), strict=True):
                ones[z] += [here] if value else []
        return Circuit(
            name=self.name,
            inputs=self.inputs,
            nodes=tuple(nodes.values()),
            excitation={nodes[row]: or_(*goes[row]) for row in self.rows},
            outputs=self.outputs,
            defined={z: or_(*ones[z]) for z in self.outputs},
            delay="table",
            notes=self.notes,
        )

    def shown(self, row: str, vector: int) -> tuple[int, ...]:
        """The outputs of an entry with every value that is not given filled in."""
        entry = self.entries[row, vector]
        following = self.entries[row if entry.after is None else entry.after, vector]
        given = zip(entry.outputs, following.outputs, strict=True)
        return tuple((b if a is None else a) or 0 for a, b in given)

    def _is_vector(self, vector: int) -> Expr:
        return and_(*(var(x) if vector >> i & 1 else not_(var(x)) for i, x in enumerate(self.inputs)))

    def state(self, row: str, vector: int) -> int:
        """The packed total state of `circuit`."""
        return vector | 1 << (len(self.inputs) + self.rows.index(row))

    def place(self, state: int) -> tuple[str, int]:
        """Row and vector of a packed total state. Raises `ValueError` when not exactly one row is 1."""
        high = state >> len(self.inputs)
        if high.bit_count() != 1:
            raise ValueError("a state of the flow table is in no row, or in several")
        return self.rows[high.bit_length() - 1], state & (1 << len(self.inputs)) - 1
