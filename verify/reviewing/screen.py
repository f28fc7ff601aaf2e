"""What a reviewer sees at one step of a run: the failure, the order of events, the state, why nodes are excited."""

from __future__ import annotations

import os
from collections.abc import Iterable

from settled.verify.renderers.cause_text import faults
from settled.verify.renderers.page import Page, columns, visible
from settled.verify.renderers.trace_text import Row, idle, left_out, rows, until_failure
from settled.verify.result import Step
from settled.verify.reviewing.reasons import Reasons
from settled.verify.reviewing.walk import Walk

KEYS = "arrows: step, home/end, p: runs part, r: other run, n/b: next/prior, q: quit"
LEAST = 4
"""Lines that the order of events has at least."""

UNFOLDED = 16
"""Up to so many nodes are all shown."""


def screen(walk: Walk, reasons: Reasons, page: Page, height: int) -> list[str]:
    """At most `height` lines; the order of events takes what the rest leaves and is scrolled to the present step."""
    head, state, due = _head(walk, page), _state(walk, page), _due(walk, reasons, page)
    foot = [page.paint("open", line) for line in page.wrap(walk.said)] if walk.said else [""]
    foot += [page.paint("faint", line) for line in page.wrap(KEYS)]
    room = height - len(state) - len(foot) - LEAST - 1
    head = _cut(head, room * 2 // 3, page)
    due = _cut(due, room - len(head), page)
    order = _order(walk, page, height - len(head) - len(state) - len(due) - len(foot) - 1)
    lines = [*head, *order, "", *state, *due]
    return [*lines, *[""] * (height - len(lines) - len(foot)), *foot][:height]


def _cut(lines: list[str], most: int, page: Page) -> list[str]:
    """`lines`, the last ones left out when there are more than `most`."""
    most = max(most, 1)
    return lines if len(lines) <= most else [*lines[: most - 1], page.paint("faint", "  ...")]


def _head(walk: Walk, page: Page) -> list[str]:
    here, result = walk.here, walk.here.result
    name = result.name if result.name == result.check else f"{result.name} ({result.check})"
    place = f"{walk.failure + 1}/{len(walk.failures)} refuted {name}"
    lines = [page.paint("strong", page.wrap(f"{os.path.basename(here.file.file)}: {here.file.title}")[0])]
    lines += [page.paint("bad", line) for line in page.wrap(f"{place}, {here.heading}" if here.heading else place)]
    for said in [result.claim, *faults(result)]:
        lines += page.wrap(said, "", "  ")
    return [*lines, ""]


def _order(walk: Walk, page: Page, height: int) -> list[str]:
    """A line for each step of the run, as many as fit around the present one."""
    found = rows(walk.trace, walk.here.result, walk.here.file.circuit)
    last = len(walk.trace.steps) - 1
    title = f"run {walk.run + 1} of {len(walk.traces)}, {walk.trace.title}: step {walk.step} of {last}"
    most = max(height - 1, 1)
    first = max(0, min(walk.step - most // 2, len(found) - most))
    width = max(columns(visible(row.switched)) for row in found)
    shown = [_line(walk, row, place, width, page) for place, row in enumerate(found)][first : first + most]
    return [*(page.paint("strong", line) for line in page.wrap(title)[:1]), *shown]


def _line(walk: Walk, row: Row, place: int, width: int, page: Page) -> str:
    mark = ">" if place == walk.step else " "
    width = min(width, page.width // 2)
    switched = visible(row.switched)
    switched = switched if columns(switched) <= width else f"{switched[: width - 3]}..."
    notes = ", ".join(filter(None, [row.note, "the runs part" if place == walk.parting else ""]))
    text = f"{mark} {row.number:>4}  {switched}{' ' * (width - columns(switched))}  {visible(notes)}".rstrip()
    text = text[: page.width]
    return page.paint("strong", text) if mark == ">" else text


def _state(walk: Walk, page: Page) -> list[str]:
    """The values in the present step; of many nodes those are only counted that play no part in the runs."""
    circuit, step = walk.here.file.circuit, walk.trace.steps[walk.step]
    inner = [s for s in step.state if s not in circuit.inputs]
    alike = [trace for trace in walk.traces if trace.circuit == walk.trace.circuit]
    quiet = idle(alike, walk.here.result, circuit) if len(inner) > UNFOLDED and not page.whole else frozenset()
    lines = page.wrap(_values(step, [s for s in step.state if s in circuit.inputs]), "inputs  ")
    shown = _values(step, [s for s in inner if s not in quiet])
    said = f" ({left_out(len(quiet), until_failure(alike, walk.here.result))})" if quiet else ""
    lines += page.wrap(shown + said, "nodes   ")
    return lines


def _values(step: Step, signals: Iterable[str]) -> str:
    return " ".join(f"{s}={step.state[s]}{'*' if s in step.excited else ''}" for s in signals)


def _due(walk: Walk, reasons: Reasons, page: Page) -> list[str]:
    """The excited nodes with the reason for each."""
    found = reasons.of(walk.trace, walk.step)
    lines = [] if found else ["stable: no node is excited"]
    for event, why in found:
        first, *rest = page.wrap(f"{event} {why}", "  ", "      ")
        lines += [first, *rest]
    if found and reasons.missing is not None:
        lines += page.wrap(f"no equations are shown: {reasons.missing}", "  ", "      ")
    return lines
