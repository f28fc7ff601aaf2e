"""Where something was written: a place in one of the user's files."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Span:
    """A stretch of one line. `line` and `column` count from 1, columns in characters; `length` is at least 1."""

    file: str
    line: int
    column: int
    length: int = 1


def span_at(file: str, text: str, start: int, end: int | None = None) -> Span:
    """The span of `text[start:end]`, cut at the end of its first line."""
    start = max(0, min(start, len(text)))
    line_start = text.rfind("\n", 0, start) + 1
    stop = text.find("\n", start)
    stop = len(text) if stop < 0 else stop
    length = max(1, min(stop, start + 1 if end is None else end) - start)
    return Span(file, text.count("\n", 0, start) + 1, start - line_start + 1, length)
