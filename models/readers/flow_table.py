"""Flow tables as the trade writes them, in comma-separated values (RFC 4180).

    x1 x2 / z, 00,    01,    11,    10
    a,         (a)/0, b,     -,     (a)/0
    b,         a,     (b)/1, (b)/1, -

The first cell names the inputs and, behind a slash, the outputs; the other cells of the first line are input vectors,
in any order. Each further line is an internal state: its name, then for every vector the next one, a stable entry in
parentheses, and behind a slash the outputs; `-` is not specified. Empty lines and lines that begin with # are passed
over.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from settled.models.flow_table import Bit, Entry, FlowTable
from settled.models.problems import InputError, Problem, nearest
from settled.models.source import Span, span_at
from settled.models.text_file import read_text

LIMIT = 10**6
MOST_INPUTS = 12

_CELL = re.compile(r'\s*(?:"(?P<quoted>[^"\n]*)"|(?P<plain>[^,\n]*?))\s*(?:,|$)')
_NAME = re.compile(r"\\\S+|[^\s/]+|/")
_ENTRY = re.compile(
    r"(?P<open>\()?\s*(?P<after>[^()/\s]+)\s*(?P<close>\))?\s*(?:/\s*(?P<outputs>[01\-\s]*?)\s*)?(?P<late>\))?\Z"
)

SpanOf = Callable[[int, int], Span]


@dataclass(frozen=True)
class Cell:
    """One cell of the text and where it stands."""

    text: str
    span: Span


def read(path: str | Path, named_at: Span | None = None) -> FlowTable:
    """The flow table in a file. Raises `InputError` with every problem of the file."""
    text = read_text(path, limit=LIMIT, named_at=named_at)
    return parse(text, Path(path).stem, lambda start, end: span_at(str(path), text, start, end))


def parse(text: str, name: str, span_of: SpanOf) -> FlowTable:
    """The flow table in a text; `span_of` gives the place of a stretch of it. Raises `InputError`."""
    reading = _Reading(list(_lines(text, span_of)), name)
    table = reading.table()
    if reading.problems or table is None:
        raise InputError(sorted(reading.problems, key=lambda p: (p.span.line, p.span.column) if p.span else (0, 0)))
    return table


def _lines(text: str, span_of: SpanOf) -> Iterator[list[Cell]]:
    start = 0
    for line in text.split("\n"):
        if line.strip() and not line.lstrip().startswith("#"):
            yield [_cell(m, start, span_of) for m in _CELL.finditer(line) if m.start() < len(line) or line[-1] == ","]
        start += len(line) + 1


def _cell(found: re.Match[str], line: int, span_of: SpanOf) -> Cell:
    kind = "plain" if found["quoted"] is None else "quoted"
    return Cell(found[kind], span_of(line + found.start(kind), line + max(found.end(kind), found.start(kind) + 1)))


@dataclass
class _Reading:
    """Turns cells into a table and notes what is wrong with them."""

    lines: list[list[Cell]]
    name: str
    problems: list[Problem] = field(default_factory=list)
    marked: bool = False

    def note(self, code: str, message: str, cell: Cell, spot: str = "", help: str = "") -> None:
        self.problems.append(Problem(code, message, cell.span, spot, help=help))

    def table(self) -> FlowTable | None:
        """The table, or None when the first line leaves nothing to read the others by."""
        if not self.lines:
            self.problems.append(Problem("empty-table", f"the flow table `{self.name}` has no lines"))
            return None
        head, *body = self.lines
        inputs, outputs = self._names(head[0])
        if not 0 < len(inputs) <= MOST_INPUTS:
            message = f"a flow table has 1 to {MOST_INPUTS} inputs, this one has {len(inputs)}"
            self.note("bad-table", message, head[0], "the inputs, a slash, the outputs")
            return None
        columns = self._columns(head, len(inputs))
        rows = self._row_names(body)
        self.marked = any("(" in cell.text for line in body for cell in line[1:])
        entries = {
            (line[0].text, vector): self._entry(line[0].text, cell, rows, len(outputs))
            for line in body
            if self._is_complete(line, columns)
            for vector, cell in zip(columns, line[1:], strict=True)
            if vector is not None
        }
        if self.problems:
            return None
        return self._checked(FlowTable(self.name, inputs, outputs, tuple(rows), entries), body)

    def _names(self, cell: Cell) -> tuple[tuple[str, ...], tuple[str, ...]]:
        words = [w.removeprefix("\\") if w != "/" else w for w in _NAME.findall(cell.text)]
        at = words.index("/") if "/" in words else len(words)
        inputs, outputs = tuple(words[:at]), tuple(words[at + 1 :])
        if "/" in outputs or len(set(inputs + outputs)) < len(inputs + outputs):
            self.note("bad-table", "the first cell names a signal twice, or has two slashes", cell)
        return inputs, outputs

    def _columns(self, head: Sequence[Cell], width: int) -> list[int | None]:
        found: list[int | None] = []
        for cell in head[1:]:
            fits = re.fullmatch(f"[01]{{{width}}}", cell.text) is not None
            vector = sum(1 << i for i, bit in enumerate(cell.text) if bit == "1") if fits else None
            if vector is None:
                self.note("bad-table", f"`{cell.text}` is no vector of {width} inputs", cell, "expected zeros and ones")
            elif vector in found:
                self.note("bad-table", f"the column {cell.text} stands twice", cell, "again")
            found.append(vector)
        missing = [v for v in range(1 << width) if v not in found]
        if missing:
            names = ", ".join("".join(str(v >> i & 1) for i in range(width)) for v in missing)
            help = "a column of `-` says that a vector never occurs"
            self.note("missing-column", f"there is no column for {names}", head[0], "columns are missing", help)
        return found

    def _row_names(self, body: Sequence[Sequence[Cell]]) -> list[str]:
        rows: list[str] = []
        for line in body:
            name = line[0].text
            if not re.fullmatch(r"[^()/\s]+", name) or name == "-":
                self.note("bad-table", f"`{name}` cannot name a row", line[0], "a word without ( ) / or white space")
            elif name in rows:
                self.note("bad-table", f"two rows are called `{name}`", line[0], "again")
            rows.append(name)
        if not rows:
            self.note("empty-table", f"the flow table `{self.name}` has no rows", self.lines[0][0])
        return rows

    def _is_complete(self, line: Sequence[Cell], columns: Sequence[int | None]) -> bool:
        if len(line) == len(columns) + 1:
            return True
        message = f"row `{line[0].text}` has {len(line) - 1} entries under {len(columns)} columns"
        self.note(
            "missing-entry",
            message,
            line[0],
            "entries are missing or left over",
            "write `-` where nothing is specified",
        )
        return False

    def _entry(self, row: str, cell: Cell, rows: Sequence[str], width: int) -> Entry:
        found = _ENTRY.match(cell.text)
        closed = found is not None and (found["open"] is None) == ((found["close"] or found["late"]) is None)
        if found is None or not closed or (found["close"] and found["late"]):
            self.note("bad-entry", f"`{cell.text}` is no entry", cell, "expected `a/0`, `(a)/0` or `-`")
            return Entry(None, (None,) * width)
        after, stable = found["after"], found["open"] is not None
        if after != "-" and after not in rows:
            self.note("unknown-row", f"there is no row `{after}`", cell, "not a row", nearest(after, rows))
        elif stable and after != row:
            message = f"row `{row}` has a stable entry that leads to `{after}`"
            self.note("unstable-entry", message, cell, "a stable entry leads to its own row")
        elif self.marked and after == row and not stable:
            message = f"the entry of row `{row}` leads to itself and is not marked as stable"
            self.note("unmarked-entry", message, cell, "stable", f"write `({row})`")
        return Entry(None if after == "-" else after, self._outputs(found["outputs"], width, cell))

    def _outputs(self, text: str | None, width: int, cell: Cell) -> tuple[Bit, ...]:
        bits = "".join((text or "").split())
        if bits in ("", "-"):
            return (None,) * width
        if len(bits) != width:
            message = f"`{cell.text}` gives {len(bits)} output values; the table has {width} outputs"
            self.note("bad-entry", message, cell, "one value for each output")
        return tuple(None if bit == "-" else int(bit) for bit in bits)

    def _checked(self, table: FlowTable, body: Sequence[Sequence[Cell]]) -> FlowTable:
        for line in body:
            for vector in table.vectors:
                try:
                    table.settle(line[0].text, vector)
                except ValueError as error:
                    help = "each entry must lead to a stable one, directly or through others"
                    self.note("endless-entry", f"{error} under {_text(table, vector)}", line[0], "goes round", help)
        first = table.rows[0]
        lost = [row for row in table.rows if row not in table.reached(first)]
        notes = (f"no input changes lead from row {first}, the first, to {', '.join(lost)}",) if lost else ()
        return FlowTable(table.name, table.inputs, table.outputs, table.rows, table.entries, notes)


def _text(table: FlowTable, vector: int) -> str:
    return "".join(str(vector >> i & 1) for i in range(len(table.inputs)))
