"""The report as one HTML file for a review: it needs no network, works from disk and on paper.

What stands on the page is put together here; how it looks is in `report.html.jinja`, `report.css` and `report.js`.
"""

from __future__ import annotations

from base64 import b64encode
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from hashlib import sha256
from importlib.metadata import version
from importlib.resources import files as resources
from typing import Any

from settled.models.circuit import Circuit
from settled.models.logic import support
from settled.verify.questions import Reaches
from settled.verify.renderers import cause_text, table_drawing, text
from settled.verify.renderers.bench_checks import shows
from settled.verify.renderers.file_names import numbered, pieces, stems
from settled.verify.renderers.page import visible
from settled.verify.renderers.timing_diagram import Lanes, Stretch
from settled.verify.renderers.timing_diagram import pieces as drawings
from settled.verify.renderers.trace_text import Row, beginning, idle, left_out, rows, until_failure
from settled.verify.result import FileReport, Result, Step, Trace, circuits

WIDE, NARROW = 16, 7
"""Steps in one piece of a timing diagram, on a wide page and on a narrow one."""

UNFOLDED = 16
"""Up to so many signals are all shown; of more, those that play no part are folded away."""

SIGNS = {"proved": "\N{CHECK MARK}", "refuted": "\N{BALLOT X}", "undecided": "?"}


@dataclass(frozen=True)
class Bit:
    """The value of one signal in one step."""

    name: str
    value: int
    excited: bool
    moved: bool


@dataclass(frozen=True)
class Line:
    """One row of a table of steps. `runs`: numbers of the runs it belongs to; `again`: the return of a loop."""

    number: int
    runs: str
    events: tuple[str, ...]
    bits: tuple[Bit, ...]
    note: str
    again: bool
    said: str


@dataclass(frozen=True)
class Panel:
    """A stretch of one or more runs.

    * `run`: the number of the run that its controls step through, if it has any; `length`: its steps; `parting`: the
      last step that it has in common with others.
    * `wide`, `narrow`: the pieces of its diagram; `narrow` is empty when they fit anywhere.
    * `room`: the width that its table would like, in pixels.
    """

    title: str
    run: int | None
    length: int
    parting: int | None
    wide: list[str]
    narrow: list[str]
    lines: list[Line]
    note: str
    room: int


@dataclass(frozen=True)
class Group:
    """Runs over the same signals: where they begin alike that is one panel, and each ending is one."""

    circuit: str
    shared: Panel | None
    panels: list[Panel]
    idle: list[Bit]
    left_out: str
    table: table_drawing.Drawing | None


@dataclass(frozen=True)
class Evidence:
    """The runs of a refutation, or of one cause of it: heading and claim of the cause, its fault, files beside it."""

    heading: str
    claim: str
    faults: list[str]
    groups: list[Group]
    waveforms: list[str]
    bench: str | None


@dataclass(frozen=True)
class Item:
    """One property on the page."""

    anchor: str
    result: Result
    sign: str
    basis: str
    remarks: list[str]
    evidence: list[Evidence]


@dataclass(frozen=True)
class Sheet:
    """One file on the page."""

    anchor: str
    report: FileReport
    items: list[Item]


def to_html(reports: Sequence[FileReport]) -> str:
    """The whole page."""
    import jinja2

    folder = resources("settled.verify.renderers")
    page, style, script = (folder.joinpath(f"report.{end}").read_text("utf-8") for end in ("html.jinja", "css", "js"))
    undefined = jinja2.StrictUndefined
    environment = jinja2.Environment(autoescape=True, undefined=undefined, trim_blocks=True, lstrip_blocks=True)
    environment.filters["visible"] = visible
    sheets = _sheets(reports)
    found = [item.result for sheet in sheets for item in sheet.items]
    return environment.from_string(page).render(
        sheets=sheets,
        title=reports[0].title or reports[0].file if len(reports) == 1 else f"Report on {len(reports)} files",
        tally=_tally(found),
        version=version("settled"),
        style=style,
        script=script,
        script_hash=b64encode(sha256(script.encode()).digest()).decode(),
    )


def _tally(found: Sequence[Result]) -> list[tuple[int, str, str]]:
    counts = [(sum(r.verdict == word for r in found), word, SIGNS[word]) for word in text.VERDICTS]
    return [entry for entry in counts if entry[0]]


def _sheets(reports: Sequence[FileReport]) -> list[Sheet]:
    items: dict[int, list[Item]] = {id(report): [] for report in reports}
    for report, result, stem in stems(reports):
        number = len(items[id(report)]) + 1
        where = [id(r) for r in reports].index(id(report)) + 1
        items[id(report)].append(_item(report, result, stem, f"file-{where}-property-{number}"))
    return [Sheet(f"file-{i}", report, items[id(report)]) for i, report in enumerate(reports, 1)]


def _item(report: FileReport, result: Result, stem: str, anchor: str) -> Item:
    given = cause_text.faults(result)
    return Item(
        anchor=anchor,
        result=result,
        sign=SIGNS[result.verdict],
        basis=text.basis(result, report.circuit),
        remarks=[remark for remark in text.remarks(result, report.circuit) if remark not in given],
        evidence=list(_evidence(report, result, stem)) if result.traces else [],
    )


def _evidence(report: FileReport, result: Result, stem: str) -> Iterator[Evidence]:
    number = 0
    for own, heading, found in pieces(result, stem):
        claim = found.claim if found.claim != result.claim else ""
        names = [f"{name}.vcd" for name in numbered(own, len(found.traces))]
        bench = f"{own}.v" if shows(found) else None
        yield Evidence(heading, claim, cause_text.faults(found), _groups(report, found, number), names, bench)
        number += len(found.traces)


def _groups(report: FileReport, result: Result, first: int) -> list[Group]:
    """The runs of a result by circuit; `first`: the number of the first run among all of the property."""
    known = circuits(report, result)
    alike: dict[tuple[str, ...], list[int]] = {}
    for number, trace in enumerate(result.traces):
        alike.setdefault((trace.circuit, *trace.steps[0].state), []).append(number)
    return [_group(report, result, known[key[0]], numbers, first) for key, numbers in alike.items()]


def _group(report: FileReport, result: Result, circuit: Circuit, places: Sequence[int], first: int) -> Group:
    traces = [result.traces[place] for place in places]
    numbers = [first + place for place in places]
    common = beginning(traces) if len(traces) > 1 else 0
    names = list(traces[0].steps[0].state)
    quiet = idle(traces, result, circuit) if len(names) > UNFOLDED else frozenset()
    shown = [name for name in names if name not in quiet]
    view = _View(result, circuit, shown)
    shared = view.panel(traces[0], "Common beginning", (0, common), numbers, None) if common else None
    panels = [
        view.panel(trace, trace.title, (max(0, common - 1), len(trace.steps)), [n], common)
        for n, trace in zip(numbers, traces, strict=True)
    ]
    table = table_drawing.draw(circuit, report.environment, traces)
    still = [Bit(name, traces[0].steps[0].state[name], False, False) for name in names if name in quiet]
    said = left_out(len(still), until_failure(traces, result))
    return Group(circuit.name, shared, panels, still, said, table)


class _View:
    """Panels of the runs of one result that share their signals."""

    def __init__(self, result: Result, circuit: Circuit, shown: Sequence[str]) -> None:
        self.result, self.circuit, self.shown = result, circuit, shown
        inputs = tuple(n for n in shown if n in circuit.inputs)
        nodes = tuple(n for n in shown if n in circuit.excitation)
        others = tuple(n for n in shown if n not in circuit.place)
        named = (("inputs", inputs), ("nodes", nodes), ("without delay", others))
        self.groups = tuple(Lanes(caption, signals) for caption, signals in named if signals)

    def panel(
        self, trace: Trace, title: str, bounds: tuple[int, int], runs: Sequence[int], common: int | None
    ) -> Panel:
        """The steps within `bounds`; an ending repeats the last common step in its diagram, not in its table."""
        first, last = bounds
        names = " ".join(map(str, runs))
        marks = frozenset(_marks(self.result, trace, self.circuit)) if common is not None else frozenset()
        inputs = frozenset(self.circuit.inputs)
        stretch = Stretch(trace, first, last, self.groups, inputs, names, marks)
        found = list(rows(trace, self.result, self.circuit))
        taken = found[common:] if common is not None else found[first:last]
        note = f"From step {first} on" if common else ""
        return Panel(
            title=title[0].upper() + title[1:],
            run=runs[0] if common is not None else None,
            length=len(trace.steps),
            parting=common - 1 if common else None,
            wide=drawings(stretch, WIDE),
            narrow=drawings(stretch, NARROW) if last - first > NARROW else [],
            lines=[
                self._line(trace, row, i, names)
                for i, row in enumerate(taken, len(found[:common]) if common else first)
            ],
            note=note,
            room=round(180 + 8.2 * sum(len(name) + 3 for name in self.shown)),
        )

    def _line(self, trace: Trace, row: Row, place: int, runs: str) -> Line:
        again = place == len(trace.steps)
        before = trace.steps[place - 1] if place else row.step
        bits = tuple(
            Bit(n, row.step.state[n], n in row.step.excited, row.step.state[n] != before.state[n]) for n in self.shown
        )
        return Line(row.number, runs, tuple(row.switched.split("/")), bits, row.note, again, _said(row, trace, again))


def _said(row: Row, trace: Trace, again: bool) -> str:
    """A step in words, for the controls."""
    step: Step = row.step
    parts = [f"Step {row.number} of {len(trace.steps) - 1}"]
    parts += [row.switched] if row.switched and not again else []
    parts.append(f"excited: {', '.join(step.excited)}" if step.excited else "stable")
    return "; ".join(parts)


def _marks(result: Result, trace: Trace, circuit: Circuit) -> list[tuple[int, str]]:
    """Where the failure shows in a run: steps and signals."""
    last = len(trace.steps) - 1
    if "hazard" in result.facts:
        return (
            [(result.facts["offending_step"], result.facts["hazard"]["signal"])] if trace is result.traces[-1] else []
        )
    if "withdrawn" in result.facts:
        return [(last, name) for name in result.facts["withdrawn"]]
    if "difference" in result.facts:
        return [(last, name) for name in result.facts["difference"] if name in trace.steps[last].state]
    if isinstance(result.question, Reaches):
        return [(last, name) for name in support(result.question.bad) if name in trace.steps[last].state]
    if len(result.traces) == 2 and trace.loop is None:
        one, two = (t.steps[-1].state for t in result.traces)
        return [(last, name) for name in circuit.nodes if name in one and name in two and one[name] != two[name]]
    return []


def files(reports: Sequence[FileReport], _: Mapping[str, Any]) -> dict[str, str]:
    """The one file."""
    return {"report.html": to_html(reports)}


FILES = files
