"""Where each key and value of a TOML 1.0 text stands, which `tomllib` does not tell.

One pass without recursion. It trusts `tomllib` to refuse what is not TOML and stops quietly where it cannot follow;
two things that `tomllib` bears badly it finds itself: nesting beyond `LEVELS` and keys that are given twice.
"""

from __future__ import annotations

import re
from contextlib import suppress
from dataclasses import dataclass, field
from typing import NamedTuple

LEVELS = 32
"""How deep arrays, inline tables and dotted keys may nest in one file."""

Path = tuple[str | int, ...]
Stretch = tuple[int, int]


class Place(NamedTuple):
    """Offsets of the key that names a value, and of the value; a table of its own stands where its header does."""

    key: Stretch
    value: Stretch


@dataclass
class Positions:
    """`places` by path; `repeated`: pairs of places of one key; `too_deep`: where the nesting limit is passed."""

    places: dict[Path, Place] = field(default_factory=dict)
    repeated: list[tuple[Place, Place]] = field(default_factory=list)
    too_deep: int | None = None


_BLANK = re.compile(r"(?:[ \t\n]++|#[^\n]*+)*+")
_BLANK_COMMA = re.compile(r"(?:[ \t\n,]++|#[^\n]*+)*+")
_BARE = re.compile(r"[A-Za-z0-9_-]+")
_STRING = re.compile(
    r'"""(?:[^"\\]++|\\[\s\S]|"{1,2}(?!"))*+"{3,5}'
    r"|'''(?:[^']++|'{1,2}(?!'))*+'{3,5}"
    r'|"(?!"")(?:[^"\\\n]++|\\.)*+"'
    r"|'(?!'')[^'\n]*+'"
)
_SCALAR = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2} [0-9][^\s,\]}#]*|[^\s,\]}#]+")
_ESCAPE = re.compile(r"\\u[0-9A-Fa-f]{4}|\\U[0-9A-Fa-f]{8}|\\x[0-9A-Fa-f]{2}|\\[ \t]*\n[ \t\n]*|\\.|[\s\S]")


class _Stop(Exception):
    """The text cannot be followed further."""


class _Open(NamedTuple):
    """An array or inline table whose closing bracket has not been seen."""

    path: Path
    key: Stretch
    start: int


def scan(text: str) -> Positions:
    """Positions in `text`, whose lines end in `\\n`; as far as they go when `text` is not TOML."""
    scanner = _Scanner(text)
    with suppress(_Stop, IndexError):
        scanner.statements()
    return scanner.found


def string_offsets(token: str) -> list[int]:
    """For each character of the string that the TOML `token` (with its quotes) stands for, its offset in `token`.

    One more entry says where the string ends. `token` must be a valid TOML string.
    """
    quotes = 3 if token[:3] in ('"""', "'''") else 1
    start, end = quotes, len(token) - quotes
    if quotes == 3 and token[3:4] == "\n":
        start += 1
    if token[0] == "'":
        return list(range(start, end + 1))
    pieces = _ESCAPE.finditer(token, start, end)
    return [m.start() for m in pieces if not (m[0][0] == "\\" and "\n" in m[0])] + [end]


class _Scanner:
    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0
        self.found = Positions()
        self.explicit: set[Path] = set()
        self.count: dict[Path, int] = {}

    def statements(self) -> None:
        table: Path = ()
        while self.skip() < len(self.text):
            if self.text[self.at] == "[":
                table = self.header()
            else:
                self.value(*self.member(table))

    def skip(self, pattern: re.Pattern[str] = _BLANK) -> int:
        """Go past blanks and comments (and commas, if so asked); where that ends."""
        self.at = self.take(pattern)[1]
        return self.at

    def take(self, pattern: re.Pattern[str]) -> Stretch:
        match = pattern.match(self.text, self.at)
        if match is None:
            raise _Stop
        return match.span()

    def expect(self, sign: str) -> None:
        self.skip()
        if not self.text.startswith(sign, self.at):
            raise _Stop
        self.at += len(sign)

    def key(self) -> list[tuple[str, Stretch]]:
        """The parts of a dotted key, each with its place."""
        parts: list[tuple[str, Stretch]] = []
        while True:
            self.skip()
            quoted = self.text[self.at] in "\"'"
            start, end = self.take(_STRING if quoted else _BARE)
            self.at = end
            self.check_depth(len(parts), start)
            parts.append((_decoded(self.text[start:end]) if quoted else self.text[start:end], (start, end)))
            self.skip()
            if self.text[self.at] != ".":
                return parts
            self.at += 1

    def check_depth(self, levels: int, at: int) -> None:
        if levels >= LEVELS:
            self.found.too_deep = at
            raise _Stop

    def header(self) -> Path:
        """Read `[a.b]` or `[[a.b]]`; the path of the table that it opens."""
        start = self.at
        double = self.text.startswith("[[", start)
        self.at += 1 + double
        parts = self.key()
        self.expect("]]" if double else "]")
        whole = (start, self.at)
        path: Path = ()
        for i, (name, place) in enumerate(parts):
            path += (name,)
            last = i == len(parts) - 1
            if last and double:
                self.record(path, place, whole, once=False)
                self.count[path] = self.count.get(path, -1) + 1
            elif last:
                self.record(path, place, whole)
            else:
                self.record(path, place, place, once=False)
            if path in self.count:
                path += (self.count[path],)
        self.found.places.setdefault(path, Place(parts[-1][1], whole))
        return path

    def member(self, table: Path) -> tuple[Path, Stretch]:
        """Read `key =`; the path and the place of the key."""
        parts = self.key()
        self.expect("=")
        for name, place in parts[:-1]:
            table += (name,)
            self.record(table, place, place, once=False)
        return (*table, parts[-1][0]), parts[-1][1]

    def value(self, path: Path, key: Stretch) -> None:
        """Read one value with everything inside it."""
        boxes: list[_Open] = []
        members: list[int] = []
        while True:
            start = self.skip()
            self.check_depth(len(boxes), start)
            if self.text[start] in "[{":
                boxes.append(_Open(path, key, start))
                members.append(0)
                self.at += 1
            else:
                self.at = self.take(_STRING if self.text[start] in "\"'" else _SCALAR)[1]
                self.record(path, key, (start, self.at))
            while boxes and self.text[self.skip(_BLANK_COMMA)] in "]}":
                self.at += 1
                box = boxes.pop()
                members.pop()
                self.record(box.path, box.key, (box.start, self.at))
            if not boxes:
                return
            if self.text[boxes[-1].start] == "{":
                path, key = self.member(boxes[-1].path)
            else:
                path, key = (*boxes[-1].path, members[-1]), boxes[-1].key
                members[-1] += 1

    def record(self, path: Path, key: Stretch, value: Stretch, once: bool = True) -> None:
        place = Place(key, value)
        if once and path in self.explicit:
            self.found.repeated.append((self.found.places[path], place))
        elif once:
            self.explicit.add(path)
            self.found.places[path] = place
        else:
            self.found.places.setdefault(path, place)


def _decoded(token: str) -> str:
    import tomllib

    try:
        return str(tomllib.loads(f"key = {token}")["key"])
    except tomllib.TOMLDecodeError:
        raise _Stop from None
