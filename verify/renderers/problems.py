"""Diagnostics for people and for programs: each problem with the user's own line and a caret below the spot."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from functools import lru_cache
from typing import Any

from settled.models.problems import Problem
from settled.verify.renderers.page import columns, visible

WIDTH = 110
"""Columns of the user's line that are shown; of a longer one, the part around the spot."""

LONGEST = 600
"""Characters of a sentence that are shown."""

_STYLES = {"error": "1;31", "message": "1", "frame": "34", "mark": "1;31", "help": "32"}

Paint = Callable[[str, str], str]


def render(problems: Iterable[Problem], *, color: bool, sources: Callable[[str], str | None]) -> str:
    """All problems as text, an empty line between two, without a final newline.

    `sources(file)` is the text of a file or `None`; `color` adds ANSI colours. Control characters come out escaped.
    """

    def paint(style: str, text: str) -> str:
        return f"\x1b[{_STYLES[style]}m{text}\x1b[0m" if color and text else text

    lines = lru_cache(lambda file: (sources(file) or "").split("\n"))
    return "\n\n".join("\n".join(_paragraph(problem, lines, paint)) for problem in problems)


def as_json(problems: Iterable[Problem]) -> list[dict[str, Any]]:
    """The `errors` of the result document; what a problem does not have is `None`."""
    return [
        {
            "file": problem.span.file if problem.span else None,
            "line": problem.span.line if problem.span else None,
            "column": problem.span.column if problem.span else None,
            "code": problem.code,
            "message": problem.message,
            "help": problem.help or None,
        }
        for problem in problems
    ]


def _paragraph(problem: Problem, lines: Callable[[str], list[str]], paint: Paint) -> list[str]:
    """The lines of one problem."""
    span = problem.span
    shown = [f"{paint('error', f'error[{problem.code}]')}: {paint('message', _shown(problem.message))}"]
    margin = " " * len(str(span.line)) if span else " "
    if span is not None:
        shown.append(f"{margin}{paint('frame', '-->')} {_shown(span.file)}:{span.line}:{span.column}")
        source = lines(span.file)
        if span.line <= len(source) and any(source):
            shown += _excerpt(problem, source[span.line - 1], margin, paint)
    sign = paint("frame", "=")
    shown += [f"{margin} {sign} note: {_shown(note)}" for note in problem.notes]
    shown += [f"{margin} {sign} {paint('help', 'help')}: {_shown(problem.help)}"] if problem.help else []
    return shown


def _shown(text: str) -> str:
    """A sentence; of a very long one, both ends."""
    return visible(text if len(text) <= LONGEST else f"{text[: LONGEST - 100]} ... {text[-95:]}")


def _excerpt(problem: Problem, line: str, margin: str, paint: Paint) -> list[str]:
    assert problem.span is not None
    start = problem.span.column - 1
    text, before, marked = _window(line.rstrip("\r"), start, start + problem.span.length)
    carets = paint("mark", "^" * marked + (f" {visible(problem.spot)}" if problem.spot else ""))
    bar = paint("frame", "|")
    number = paint("frame", str(problem.span.line))
    return [f"{margin} {bar}", f"{number} {bar} {text}".rstrip(), f"{margin} {bar} {' ' * before}{carets}"]


def _window(line: str, start: int, end: int) -> tuple[str, int, int]:
    """What is shown of `line`, the columns before the caret, and the number of carets (at least 1)."""
    first = max(0, start - WIDTH // 2) if len(line) > WIDTH else 0
    last = min(len(line), first + WIDTH)
    head, marked, tail = line[first:start], line[start : min(end, last)], line[min(max(start, end), last) : last]
    lead = "..." if first else ""
    shown = lead + visible(head + marked + tail) + ("..." if last < len(line) else "")
    return shown, len(lead) + columns(visible(head)), max(1, columns(visible(marked)))
