"""The transition table of a small circuit with its stable entries circled and runs drawn over it.

Each visited entry carries the numbers of the steps at its corner: those of the first run above, those of the second
below. Arrows run in tracks beside the entries: of the first run on the right, of the second, dashed, on the left.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from itertools import pairwise

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.verify.renderers.svg import add, canvas, number, to_text
from settled.verify.result import Trace
from settled.verify.transition_table import TransitionTable, transition_table

MOST_NODES, MOST_INPUTS, MOST_STEPS = 4, 3, 24
DIGIT, SMALL = 8.2, 6.4
"""Width of a digit of an entry and of a step number, in pixels."""

TRACK, ROUND, ROW = 6, 4, 17

Place = tuple[int, int]
"""Row and column of an entry."""

Point = tuple[float, float]


@dataclass(frozen=True)
class Drawing:
    """The table as SVG, its width in pixels, and the signals that the digits of its columns and rows stand for."""

    svg: str
    width: float
    across: tuple[str, ...]
    down: tuple[str, ...]
    forbidden: bool


@dataclass(frozen=True)
class Move:
    """One arrow: from entry to entry, of a run (0 or 1), in its own tracks beside a column and along a row."""

    here: Place
    after: Place
    run: int
    beside: int = 0
    along: int = 0

    @property
    def hops(self) -> bool:
        """It goes straight to the entry beside it."""
        return self.here[0] == self.after[0] and abs(self.here[1] - self.after[1]) == 1

    @property
    def below(self) -> bool:
        """It leaves its row on the lower side."""
        return self.after[0] > self.here[0] or (self.after[0] == self.here[0] and self.run == 0)


@dataclass
class Paths:
    """What the runs leave on the table: arrows, step numbers, and how many tracks are taken where."""

    moves: list[Move] = field(default_factory=list)
    visits: dict[tuple[Place, int], list[str]] = field(default_factory=dict)
    beside: Counter[tuple[int, int]] = field(default_factory=Counter)
    along: Counter[tuple[int, bool]] = field(default_factory=Counter)

    def follow(self, places: Sequence[Place], loop: int | None, run: int, shared: int) -> None:
        """Take a run along; its first `shared` places are those of the run before."""
        steps = [*pairwise(places), *([(places[-1], places[loop])] if loop is not None else [])]
        for i, (here, after) in enumerate(steps, 1):
            if i >= shared:
                self._move(Move(here, after, run))
        for i, place in enumerate(places):
            if i >= shared:
                self.visits.setdefault((place, run), []).append(str(i))

    def _move(self, move: Move) -> None:
        column, row = (move.after[1], move.run), (move.here[0], move.below)
        self.moves.append(replace(move, beside=self.beside[column], along=self.along[row]))
        self.beside[column] += move.here[0] != move.after[0]
        self.along[row] += move.here[1] != move.after[1] and not move.hops

    def numbers(self, column: int) -> float:
        """The room that step numbers need at a column."""
        lengths = [len(",".join(steps)) for (place, _), steps in self.visits.items() if place[1] == column]
        return max(lengths, default=0) * SMALL


def draw(circuit: Circuit, environment: Environment, traces: Sequence[Trace]) -> Drawing | None:
    """The table with at most two runs over it; None when the circuit or a run is too large for a drawing."""
    small = len(circuit.nodes) <= MOST_NODES and len(circuit.inputs) <= MOST_INPUTS
    if not small or not circuit.nodes or any(len(trace.steps) > MOST_STEPS for trace in traces):
        return None
    table, paths = transition_table(circuit, environment), Paths()
    for run, trace in enumerate(traces[:2]):
        paths.follow(list(_places(table, trace)), trace.loop, run, _shared(traces) if run else 0)
    forbidden = any(entry is None for row in table.entries for entry in row)
    sheet = _Sheet(table, paths)
    return Drawing(sheet.draw(), sheet.width, circuit.inputs, circuit.nodes, forbidden)


def _places(table: TransitionTable, trace: Trace) -> Iterator[Place]:
    for step in trace.steps:
        row = table.rows.index(tuple(step.state[n] for n in table.circuit.nodes))
        yield row, table.columns.index(tuple(step.state[x] for x in table.circuit.inputs))


def _shared(traces: Sequence[Trace]) -> int:
    """How many states two runs have in common at their beginning."""
    one, two = (trace.steps for trace in traces[:2])
    return next((i for i, (a, b) in enumerate(zip(one, two, strict=False)) if a != b), min(len(one), len(two)))


class _Sheet:
    """The table being drawn: first the room that everything needs, then what stands there."""

    def __init__(self, table: TransitionTable, paths: Paths) -> None:
        self.table, self.paths = table, paths
        self.half = len(table.circuit.nodes) * DIGIT / 2 + 7
        head = max(len(table.circuit.inputs) * DIGIT / 2, self.half)
        self.left = 2 * self.half + 6
        lefts = [9 + TRACK * paths.beside[c, 1] + head for c in range(len(table.columns))]
        rights = [head + paths.numbers(c) + TRACK * paths.beside[c, 0] + 6 for c in range(len(table.columns))]
        self.x, self.width = _middles(self.left, lefts, rights)
        tops = [ROW + TRACK * paths.along[r, False] for r in range(len(table.rows))]
        self.y, self.height = _middles(30, tops, [ROW + TRACK * paths.along[r, True] for r in range(len(table.rows))])
        self.tops = [y - top for y, top in zip(self.y, tops, strict=True)]

    def draw(self) -> str:
        """Heads, lines, entries, arrows and numbers."""
        what = "Transition table with the steps of the runs; the table of steps says them in words"
        self.svg = canvas(self.width, self.height + 2, what)
        for x, vector in zip(self.x, self.table.columns, strict=True):
            add(self.svg, "text", "head", _digits(vector) or "any", x=x, y=20)
        for row in range(len(self.table.rows)):
            self._row(row)
        for move in self.paths.moves:
            add(self.svg, "path", f"way run{move.run}", d=self._way(move), marker_end=f"url(#tip{move.run})")
        for ((row, column), run), steps in self.paths.visits.items():
            y = self.y[row] + (15 if run else -7)
            add(self.svg, "text", f"visit run{run}", ",".join(steps), x=self.x[column] + self.half + 1, y=y)
        return to_text(self.svg)

    def _row(self, row: int) -> None:
        y, top = self.y[row], self.tops[row]
        add(self.svg, "line", "grid", x1=0, x2=self.width, y1=top, y2=top)
        add(self.svg, "text", "head", _digits(self.table.rows[row]), x=self.left / 2, y=y + 4.5)
        for x, entry in zip(self.x, self.table.entries[row], strict=True):
            add(self.svg, "text", "entry", _digits(entry.after) if entry else "-", x=x, y=y + 4.5)
            if entry and entry.stable:
                add(self.svg, "rect", "stable", x=x - self.half, y=y - 10, width=2 * self.half, height=20, rx=10)

    def _way(self, move: Move) -> str:
        """The line of an arrow, along its tracks."""
        (row, column), (to_row, to_column) = move.here, move.after
        side = -1 if move.run else 1
        if move.hops:
            room = (self.half + 2) * (1 if to_column > column else -1)
            return _line([(self.x[column] + room, self.y[row]), (self.x[to_column] - room, self.y[row])])
        end = (self.x[to_column] + side * (self.half + 2), self.y[to_row] - 3)
        beside, along = self._beside(move), self._along(move)
        if column == to_column:
            start = (self.x[column] + side * (self.half + 2), self.y[row] + 3)
            return _line([start, (beside, start[1]), (beside, end[1]), end])
        start = (self.x[column], self.y[row] + (12 if move.below else -12))
        if row == to_row:
            return _line([start, (start[0], along), (self.x[to_column], along), (self.x[to_column], start[1])])
        return _line([start, (start[0], along), (beside, along), (beside, end[1]), end])

    def _beside(self, move: Move) -> float:
        """The middle of the arrow's own track beside the column of its target."""
        column = move.after[1]
        if move.run:
            return self.x[column] - self.half - 8 - TRACK * move.beside
        return self.x[column] + self.half + self.paths.numbers(column) + 6 + TRACK * move.beside

    def _along(self, move: Move) -> float:
        """The middle of the arrow's own track above or below the row that it leaves."""
        return self.y[move.here[0]] + (ROW + TRACK * move.along) * (1 if move.below else -1)


def _middles(start: float, before: Sequence[float], behind: Sequence[float]) -> tuple[list[float], float]:
    """Where the middles of stripes lie that need room before and behind it, and where the last one ends."""
    middles = []
    for room, rest in zip(before, behind, strict=True):
        middles.append(start + room)
        start += room + rest
    return middles, start


def _line(points: Sequence[Point]) -> str:
    """A line through points, with round corners."""
    path = f"M{_point(points[0])}"
    for before, corner, after in zip(points, points[1:], points[2:], strict=False):
        path += f"L{_point(_towards(corner, before))}Q{_point(corner)} {_point(_towards(corner, after))}"
    return f"{path}L{_point(points[-1])}"


def _towards(corner: Point, other: Point) -> Point:
    """The point at which the rounding of a corner begins."""
    x, y = other[0] - corner[0], other[1] - corner[1]
    length = max(abs(x), abs(y), 1e-9)
    part = min(ROUND, length / 2) / length
    return corner[0] + x * part, corner[1] + y * part


def _point(point: Point) -> str:
    return f"{number(point[0])} {number(point[1])}"


def _digits(values: Sequence[int]) -> str:
    return "".join(map(str, values))
