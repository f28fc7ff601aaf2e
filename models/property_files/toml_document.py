"""A TOML file as data in which every key and value has a place, and problems can be noted until all are known."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Callable, Collection, Iterator
from dataclasses import dataclass, field
from functools import cached_property
from itertools import accumulate
from typing import Any, TypeVar

from settled.models.problems import InputError, Problem, nearest
from settled.models.property_files.toml_positions import Path, Place, Positions, scan, string_offsets
from settled.models.source import Span

T = TypeVar("T")

PROBLEM_LIMIT = 100
"""How many problems of one file are listed."""

_KINDS = {str: "a string", bool: "a boolean", int: "an integer", float: "a float", list: "an array", dict: "a table"}


@dataclass
class Document:
    """A property file: its text, its data, where everything stands, and the problems found so far."""

    file: str
    text: str
    data: dict[str, Any] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)
    _strings: dict[int, list[int]] = field(default_factory=dict)

    @cached_property
    def positions(self) -> Positions:
        """Where everything stands."""
        return scan(self.text)

    @cached_property
    def line_starts(self) -> list[int]:
        """Offset of the first character of each line, and of a line after the last."""
        return [0, *accumulate(len(line) + 1 for line in self.text.split("\n"))]

    @property
    def root(self) -> Spot:
        return Spot(self, (), self.data)

    def span(self, start: int, end: int) -> Span:
        """The span of `text[start:end]`, cut at the end of its first line."""
        line = bisect_right(self.line_starts, start, hi=len(self.line_starts) - 1)
        first = self.line_starts[line - 1]
        length = min(end, self.line_starts[line] - 1) - start
        return Span(self.file, line, start - first + 1, max(1, length))

    def string_offsets(self, first: int, last: int) -> list[int]:
        """Offset of each character that the string at `text[first:last]` stands for, and of its end."""
        if first not in self._strings:
            self._strings[first] = [first + offset for offset in string_offsets(self.text[first:last])]
        return self._strings[first]

    def note(self, *problems: Problem) -> None:
        """Note problems; too many of them end the reading."""
        self.problems.extend(problems)
        if len(self.problems) >= PROBLEM_LIMIT:
            last = f"there are more than {PROBLEM_LIMIT} problems; the rest of the file has not been looked at"
            self.problems.append(Problem("too-many-problems", last))
            self.finish()

    def finish(self) -> None:
        """Raise all problems noted, in the order of the file, those of other files last."""
        if not self.problems:
            return

        def order(problem: Problem) -> tuple[bool, str, int, int]:
            at = problem.span
            return (at.file != self.file, at.file, at.line, at.column) if at else (True, "\U0010ffff", 0, 0)

        raise InputError(sorted(dict.fromkeys(self.problems), key=order))


@dataclass(frozen=True)
class Spot:
    """One value of a document."""

    document: Document
    path: Path
    value: Any

    @property
    def name(self) -> str:
        """The last key on the way here, for messages."""
        return next((part for part in reversed(self.path) if isinstance(part, str)), self.document.file)

    @property
    def place(self) -> Place:
        """Where the key and the value stand; those of the nearest table around when the file does not say."""
        places, path = self.document.positions.places, self.path
        while path and path not in places:
            path = path[:-1]
        return places.get(path, Place((0, 1), (0, 1)))

    @property
    def span(self) -> Span:
        return self.document.span(*self.place.value)

    @property
    def key_span(self) -> Span:
        return self.document.span(*self.place.key)

    def inside(self, start: int, end: int) -> Span:
        """The span of `value[start:end]` of a string value, through quotes and escapes."""
        offsets = self.document.string_offsets(*self.place.value)
        return self.document.span(*(offsets[min(i, len(offsets) - 1)] for i in (start, end)))

    def child(self, key: str | int) -> Spot:
        return Spot(self.document, (*self.path, key), self.value[key])

    def members(self) -> Iterator[Spot]:
        """The members of an array or a table."""
        keys: Collection[str | int] = self.value if isinstance(self.value, dict) else range(len(self.value))
        return (self.child(key) for key in keys)

    def problem(
        self,
        code: str,
        message: str,
        spot: str,
        *,
        span: Span | None = None,
        at_key: bool = False,
        note: str = "",
        help: str = "",
    ) -> None:
        """Note a problem with this value, at its key if `at_key`, or at `span`."""
        place = span or (self.key_span if at_key else self.span)
        self.document.note(Problem(code, message, place, spot, (note,) if note else (), help))

    def wrong_type(self, wanted: str, help: str = "") -> None:
        kind = _KINDS.get(type(self.value), "a date or time")
        self.problem("wrong-type", f"expected {wanted} for `{self.name}`, found {kind}", kind, help=help)

    def has(self, key: str) -> bool:
        return key in self.value

    def take(self, key: str, reader: Callable[[Spot], T | None]) -> T | None:
        """What `reader` makes of the member `key`; `None` when there is none."""
        return reader(self.child(key)) if key in self.value else None

    def only(self, known: Collection[str], of: str) -> None:
        """Note every key that is not among `known` ones; `of` says of what."""
        for member in self.members():
            if member.name not in known:
                help = nearest(member.name, known) or f"the keys are {listed(known)}"
                message = f"unknown key `{member.name}` in {of}"
                member.problem("unknown-key", message, "not a key here", at_key=True, help=help)

    def missing(self, key: str, of: str, help: str = "") -> None:
        self.problem("missing-key", f"{of} needs `{key}`", f"no `{key}` here", help=help)


def where(span: Span) -> str:
    """A place of the same file, for a note."""
    return f"line {span.line}, column {span.column}"


def listed(names: Collection[str]) -> str:
    """`a`, `b` and `c`."""
    quoted = [f"`{name}`" for name in names]
    return " and ".join([", ".join(quoted[:-1]), quoted[-1]] if len(quoted) > 1 else quoted)
