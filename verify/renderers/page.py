"""The page that text is set on: its width, its colours, and words wrapped to it."""

from __future__ import annotations

import os
import shutil
import unicodedata
from dataclasses import dataclass
from typing import TextIO

PIPED = 100
"""Columns of a page that is no terminal."""

NARROWEST = 40

_STYLES = {"good": "32", "bad": "1;31", "open": "33", "strong": "1", "faint": "2", "excited": "1;33"}


@dataclass(frozen=True)
class Page:
    """Columns to fill, and whether ANSI colours are wanted; `whole`: no signal is left out for want of room."""

    width: int = PIPED
    color: bool = False
    whole: bool = False

    @classmethod
    def of(cls, stream: TextIO) -> Page:
        """The page that a stream is: the terminal as wide as it is; anything else plain and 100 columns wide."""
        if not stream.isatty():
            return cls()
        color = not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"
        return cls(max(NARROWEST, shutil.get_terminal_size((PIPED, 24)).columns), color)

    def paint(self, style: str, text: str) -> str:
        """`text` in a style, if there are colours."""
        return f"\x1b[{_STYLES[style]}m{text}\x1b[0m" if self.color and style else text

    def wrap(self, text: str, first: str = "", rest: str | None = None) -> list[str]:
        """Lines of `text`: the first begins with `first`, the others with `rest` (blanks of the same width)."""
        rest = " " * columns(first) if rest is None else rest
        lines, line, empty = [], first, True
        for word in map(visible, text.split()):
            if not empty and columns(line) + 1 + columns(word) > self.width:
                lines.append(line)
                line, empty = rest, True
            line += word if empty else f" {word}"
            empty = False
        return [*lines, line.rstrip()]


def visible(text: str) -> str:
    """`text` with tabs as blanks and every character escaped that a terminal would not show as it is."""
    return "".join(c if c.isprintable() else "    " if c == "\t" else f"\\u{{{ord(c):x}}}" for c in text)


def columns(text: str) -> int:
    """How many columns of a terminal `text` takes (without colours)."""
    if text.isascii():
        return len(text)
    return sum(0 if unicodedata.combining(c) else 2 if unicodedata.east_asian_width(c) in "WF" else 1 for c in text)


def pad(text: str, width: int) -> str:
    """`text` filled up with blanks to `width` columns."""
    return text + " " * (width - columns(text))
