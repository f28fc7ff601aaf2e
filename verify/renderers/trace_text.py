"""Runs as tables: a line a step, a column a signal, excited values with an asterisk.

Runs that begin alike share their beginning; each ending follows under its title. Of circuits too wide for the page
the nodes are left out that play no part, unless the page is to show the whole; what is still
too wide comes in several blocks, and what takes too many of them shows its nodes only as they switch.
"""

from __future__ import annotations

import re
from collections.abc import Sequence, Set
from dataclasses import dataclass
from functools import cached_property

from settled.models.circuit import Circuit
from settled.verify.properties import kinds
from settled.verify.renderers.page import Page, columns, pad, visible
from settled.verify.result import Result, Step, Trace

BLOCKS = 4
"""How many blocks a table may take before its nodes are left out."""

PIECE = 4
"""Columns that a piece of a broken name is filled up to."""


@dataclass(frozen=True)
class Row:
    """One line of a table: a step of a run, what switched on the way into it, and what is to be said of it."""

    number: int
    step: Step
    switched: str
    note: str


@dataclass(frozen=True)
class Section:
    """Rows under a title."""

    title: str
    rows: tuple[Row, ...]


@dataclass(frozen=True)
class Column:
    """A column of a table: its header and, for each row, its cell, as lines; and how many blanks stand before it."""

    header: tuple[str, ...]
    cells: tuple[tuple[str, ...], ...]
    gap: int = 2

    @cached_property
    def width(self) -> int:
        """Columns of the page that it takes."""
        return max(columns(line) for lines in (self.header, *self.cells) for line in lines)


def tables(result: Result, circuit: Circuit, page: Page, margin: str) -> list[str]:
    """The lines that show the runs of `result`; runs over the same signals share a table."""
    alike: dict[tuple[str, ...], list[Trace]] = {}
    for trace in result.traces:
        alike.setdefault((trace.circuit, *trace.steps[0].state), []).append(trace)
    lines: list[str] = []
    for number, group in enumerate(alike.values()):
        lines += [""] if number else []
        quiet = frozenset() if page.whole else idle(group, result, circuit)
        lines += table(sections(group, result, circuit), circuit, page, margin, quiet, until_failure(group, result))
    return lines


def until_failure(traces: Sequence[Trace], result: Result) -> int | None:
    """The step in which a hazard shows, of the run that shows it; None for other runs."""
    shows = "hazard" in result.facts and len(traces) == 1 and traces[0] is result.traces[-1]
    return result.facts["offending_step"] if shows else None


def idle(traces: Sequence[Trace], result: Result, circuit: Circuit) -> frozenset[str]:
    """The inner nodes that play no part in runs over the same signals; single states have none.

    They keep their value and are never excited or, in a run through a hazard, do not switch before it shows.
    """
    if all(len(trace.steps) == 1 for trace in traces):
        return frozenset()
    last = until_failure(traces, result)
    if last is None:
        active = {s for t in traces for step in t.steps for s in (*step.switched, *step.excited)}
    else:
        active = {s for step in traces[0].steps[: last + 1] for s in step.switched}
    return frozenset(s for s in traces[0].steps[0].state if s not in active and not _is_port(s, circuit))


def left_out(count: int, last: int | None) -> str:
    """What is said of so many idle nodes."""
    if last is not None:
        return f"{count} more {'node does' if count == 1 else 'nodes do'} not switch before the failure"
    return f"{count} more {'node keeps its' if count == 1 else 'nodes keep their'} value all along, never excited"


def sections(traces: Sequence[Trace], result: Result, circuit: Circuit) -> list[Section]:
    """The common beginning of several runs, then what is left of each under its title."""
    common = beginning(traces) if len(traces) > 1 else 0
    found = [Section("", rows(traces[0], result, circuit)[:common])] if common else []
    origin = f", from step {common - 1}" if common else ""
    return found + [Section(f"{t.title}{origin}", rows(t, result, circuit)[common:]) for t in traces]


def beginning(traces: Sequence[Trace]) -> int:
    """How many steps the runs have in common; each keeps a step of its own."""
    most = min(len(t.steps) for t in traces) - 1
    return next((i for i in range(most) if any(t.steps[i] != traces[0].steps[i] for t in traces)), most)


def rows(trace: Trace, result: Result, circuit: Circuit) -> tuple[Row, ...]:
    """The steps of a run and, of one that goes round, the return to the step at which the loop begins."""
    begin = "" if kinds()[result.check].anywhere else "start"
    found = []
    for i, step in enumerate(trace.steps):
        entered = events(step, step.switched) if i else begin
        found.append(Row(i, step, entered, _note(i, trace, result, circuit)))
    if trace.loop is not None:
        found.append(_return(trace, trace.loop, circuit))
    return tuple(found)


def events(step: Step, switched: Sequence[str]) -> str:
    """What switched on the way into a step, as the trade writes it: `a+/b-`."""
    return "/".join(f"{name}{'+' if step.state[name] else '-'}" for name in switched)


def _note(number: int, trace: Trace, result: Result, circuit: Circuit) -> str:
    facts, step = result.facts, trace.steps[number]
    hazard = "hazard" in facts and trace is result.traces[-1]
    decided = {id(t): place for t, place in zip(result.traces, facts.get("decided_at") or (), strict=False)}
    said = [
        _change(number, trace, result) if any(name in circuit.inputs for name in step.switched) else "",
        f"{facts['hazard']['signal']} changes again" if hazard and number == facts.get("offending_step") else "",
        "decided" if number == decided.get(id(trace)) else "",
        "stable" if step.stable else "",
    ]
    return ", ".join(filter(None, said))


def _change(number: int, trace: Trace, result: Result) -> str:
    """The runs of a comparison count their input changes, so that those of the other run are found beside them."""
    stops = result.facts.get("in_step", ())
    if len(stops) < 2:
        return "input change"
    side = [id(t) for t in result.traces].index(id(trace))
    return f"input change {sum(stop[side] < number for stop in stops)}"


def _return(trace: Trace, loop: int, circuit: Circuit) -> Row:
    last, first = trace.steps[-1], trace.steps[loop]
    moved = [s for s in circuit.signals if s in first.state and first.state[s] != last.state[s]]
    return Row(loop, first, events(first, moved), f"back to step {loop}")


# ---- the table ---------------------------------------------------------------------------------------------------


def table(
    parts: Sequence[Section], circuit: Circuit, page: Page, margin: str, quiet: Set[str], last: int | None
) -> list[str]:
    """Lines of one table, in as few blocks as the page needs; `quiet` nodes are left out where that helps."""
    shown = [row for part in parts for row in part.rows]
    room = page.width - len(margin) - _steps(shown).width
    everything = tuple(shown[0].step.state)
    active = tuple(s for s in everything if s not in quiet)
    for signals, broken in ((everything, False), (active, False), (active, True)):
        if len(signals) > room and not broken:
            continue
        values = [_values(s, shown, page, broken) for s in signals]
        found = blocks([_switched(shown, page), *values, _notes(shown)], room)
        if len(found) == 1:
            break
    else:
        found = blocks([_switched(shown, page), _notes(shown), *values], room)
    crowded = len(found) > BLOCKS and not page.whole
    if crowded:
        signals = tuple(s for s in active if _is_port(s, circuit))
        values = [_values(s, shown, page, True) for s in signals]
        found = blocks([_switched(shown, page), _notes(shown), *values], room)
    lines = page.wrap(f"{parts[0].title}:", margin) if len(parts) == 1 else []
    for number, block in enumerate(found):
        lines += [""] if number else []
        lines += _block([_steps(shown), *block], parts, page, margin)
    more = len(everything) - len(signals)
    if more:
        many = f"The values of {more} more nodes would take too many columns; --all-signals shows them."
        lines += page.wrap(many if crowded else f"{left_out(more, last)}.", margin)
    return lines


def blocks(found: Sequence[Column], room: int) -> list[list[Column]]:
    """The columns in groups that fit side by side into `room` columns of the page."""
    groups: list[list[Column]] = [[]]
    used = 0
    for column in found:
        need = column.gap + column.width
        if groups[-1] and used + need > room:
            groups.append([])
            used = 0
        groups[-1].append(column)
        used += need
    return groups


def _is_port(signal: str, circuit: Circuit) -> bool:
    """Whether a signal is no inner node; `circuit` may be the other one of a comparison."""
    return signal in circuit.inputs or signal in circuit.outputs or signal in circuit.defined


def _steps(shown: Sequence[Row]) -> Column:
    width = max(len("step"), *(len(str(row.number)) for row in shown))
    return Column(("step".rjust(width),), tuple((str(row.number).rjust(width),) for row in shown), gap=0)


def _switched(shown: Sequence[Row], page: Page) -> Column:
    lines = (_filled(row.switched, "/", page.width // 3, page.width // 3) for row in shown)
    return Column(("switched",), tuple(map(tuple, lines)))


def _values(signal: str, shown: Sequence[Row], page: Page, broken: bool) -> Column:
    header = tuple(_filled(signal, ".>", PIECE, page.width // 4)) if broken else (visible(signal),)
    marks = ("*" if signal in row.step.excited else "" for row in shown)
    cells = tuple((f"{row.step.state[signal]}{mark}",) for row, mark in zip(shown, marks, strict=True))
    return Column(header, cells, gap=1 if broken else 2)


def _notes(shown: Sequence[Row]) -> Column:
    return Column(("",), tuple((visible(row.note),) for row in shown))


def _filled(text: str, ends: str, most: int, longest: int) -> list[str]:
    """`text` in lines of at most `most` columns, broken after one of the characters in `ends`.

    A stretch without such a character may take up to `longest` columns and is broken after those.
    """
    pieces = re.findall(f"[^{ends}]*[{ends}]|[^{ends}]+", visible(text))
    lines = [""]
    for piece in (p[i : i + longest] for p in pieces for i in range(0, len(p), longest)):
        if lines[-1] and columns(lines[-1]) + columns(piece) > most:
            lines.append("")
        lines[-1] += piece
    return lines


def _block(found: Sequence[Column], parts: Sequence[Section], page: Page, margin: str) -> list[str]:
    height = max(len(c.header) for c in found)
    lines = _lines([("",) * (height - len(c.header)) + c.header for c in found], found, page, margin, "faint")
    number = 0
    for part in parts:
        lines += page.wrap(f"{part.title}:", margin) if part.title and len(parts) > 1 else []
        for _ in part.rows:
            lines += _lines([c.cells[number] for c in found], found, page, margin, "")
            number += 1
    return lines


def _lines(cells: Sequence[Sequence[str]], found: Sequence[Column], page: Page, margin: str, style: str) -> list[str]:
    """The lines of one row."""
    lines = []
    for i in range(max(map(len, cells))):
        texts = [
            " " * column.gap + pad(cell[i] if i < len(cell) else "", column.width)
            for cell, column in zip(cells, found, strict=True)
        ]
        line = (margin + "".join(texts)).rstrip()
        lines.append(page.paint(style, line) if style else _marked(line, page))
    return lines


def _marked(line: str, page: Page) -> str:
    return re.sub(r"(?<= )[01]\*", lambda m: page.paint("excited", m[0]), line) if page.color else line
