"""Cells of a Liberty library: their pins, functions and storage, as far as Boolean behaviour goes.

The format is that of the Liberty reference manual (recalled): groups `name (arguments) { .. }`, attributes
`name : value ;` and `name (values) ;`. Timing, power and physical data are passed over. What a cell means is for
`library_cells` to say; a cell that cannot be understood is carried along with the reason, and is an error when used.
"""

from __future__ import annotations

import re
from bisect import bisect_right
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import NoReturn

from settled.models.problems import InputError, Problem
from settled.models.readers.liberty_functions import Words
from settled.models.source import Span
from settled.models.text_file import read_text

LARGEST = 64_000_000
"""How many bytes a library file may have."""

_TOKEN = re.compile(
    r"""(?:[\s\\]+|/\*.*?\*/|//[^\n]*)*
    (?:"(?P<string>[^"\\]*(?:\\.[^"\\]*)*)"
    |(?P<word>[^\s"(){}:;,\\/]+(?:/(?![*/])[^\s"(){}:;,\\/]*)*)
    |(?P<sign>[(){}:;,])
    |(?P<end>\Z)
    |(?P<other>.))""",
    re.DOTALL | re.VERBOSE,
)
_INSIDE = re.compile(r'"[^"\\]*(?:\\.[^"\\]*)*"|/\*.*?\*/|//[^\n]*|[{}]', re.DOTALL)
_NAME = re.compile(r"[!-~]+")
_KEPT = {
    *("library", "cell", "pin", "latch", "ff", "bus", "bundle", "statetable"),
    *("latch_bank", "ff_bank", "memory", "retention_condition"),
}
_BEYOND = ("bus", "bundle", "statetable", "latch_bank", "ff_bank", "memory", "retention_condition")


@dataclass(frozen=True)
class Pin:
    """A signal pin of a cell. `direction` is the library's word, empty where it says none."""

    name: str
    direction: str
    function: Words | None
    attributes: frozenset[str] = frozenset()
    span: Span | None = field(default=None, compare=False)


@dataclass(frozen=True)
class Storage:
    """A `latch` or `ff` group: its state, the complement of the state if it is named, and its attributes."""

    kind: str
    names: tuple[str, ...]
    attributes: Mapping[str, Words]
    span: Span = field(compare=False)


@dataclass(frozen=True)
class Cell:
    """A library cell. `beyond` names what it has that has no meaning as gates here, such as a `statetable`."""

    name: str
    pins: tuple[Pin, ...]
    storage: tuple[Storage, ...]
    beyond: tuple[str, ...]
    span: Span = field(compare=False)


@dataclass
class _Group:
    kind: str
    arguments: list[str]
    start: int
    attributes: dict[str, tuple[str, int]] = field(default_factory=dict)
    groups: list[_Group] = field(default_factory=list)


def read_cells(path: str) -> dict[str, Cell]:
    """The cells of a Liberty file by name, in the order of the file. Raises `InputError`."""
    return cells_of(read_text(path, limit=LARGEST), path)


def cells_of(text: str, file: str) -> dict[str, Cell]:
    """The cells of a library given as text. Raises `InputError`."""
    parser = _Parser(text, file)
    cells: dict[str, Cell] = {}
    problems = []
    for group in parser.groups():
        cell = parser.cell(group)
        if cells.setdefault(cell.name, cell) != cell:
            place = cells[cell.name].span
            note = f"the first one stands at {place.file}:{place.line}:{place.column}"
            message = f"cell `{cell.name}` has two different definitions"
            problems.append(Problem("duplicate-name", message, cell.span, "the second one", (note,)))
    if problems:
        raise InputError(problems)
    return cells


class _Parser:
    """Reads groups with a stack of its own, so that no nesting is too deep for it."""

    def __init__(self, text: str, file: str) -> None:
        self.text = text
        self.file = file
        self._place = 0
        self._kind, self._value, self._start = "", "", 0
        self._next()

    def groups(self) -> list[_Group]:
        """The `cell` groups of the library."""
        root = _Group("", [], 0)
        stack = [root]
        while self._kind != "end":
            if len(stack) == 1 and root.groups and not self._at(";"):
                self._fail("nothing after the library")
            self._statement(stack)
        if len(stack) > 1:
            self._unclosed(stack[-1].kind, stack[-1].start)
        if not root.groups or root.groups[0].kind != "library":
            message = f"`{self.file}` holds no `library` group"
            raise InputError(Problem("syntax", message, Span(self.file, 1, 1), help="accepted: Liberty text"))
        return [group for group in root.groups[0].groups if group.kind == "cell"]

    def _statement(self, stack: list[_Group]) -> None:
        """One attribute, the head of a group, or the end of one."""
        if len(stack) > 1 and self._accept("}"):
            stack.pop()
        elif self._accept(";"):
            return
        elif self._kind != "word":
            self._fail("an attribute or a group")
        else:
            name, start = self._value, self._start
            self._next()
            if self._accept(":"):
                stack[-1].attributes[name] = self._simple()
            elif self._accept("("):
                self._call(stack, name, start)
            else:
                self._fail(f"`:` or `(` after `{name}`")

    def _simple(self) -> tuple[str, int]:
        """The value of `name : value ;` and its place; a value of several words is joined."""
        start, parts = self._start, []
        while self._kind in ("word", "string") or self._at("(", ")", ","):
            parts.append(self._value)
            self._next()
        if not parts:
            self._fail("a value after `:`")
        if not self._accept(";"):
            self._fail("`;` after the value")
        return " ".join(parts), start

    def _call(self, stack: list[_Group], name: str, start: int) -> None:
        """What follows `name (`: the arguments, then `{` of a group or `;` of an attribute."""
        arguments = []
        while self._kind in ("word", "string") or self._at(",", ":"):
            if self._kind != "sign":
                arguments.append(self._value)
            self._next()
        if not self._accept(")"):
            self._fail("`)` after the arguments")
        if self._at("{") and name not in _KEPT:
            self._pass_over(name, start)
        elif self._accept("{"):
            group = _Group(name, arguments, start)
            stack[-1].groups.append(group)
            stack.append(group)
        elif name == "include_file":
            message = "`include_file` is not accepted"
            raise InputError(Problem("include", message, self.span(start, len(name)), help="join the files into one"))
        elif not self._accept(";") and self._kind == "sign" and not self._at("}"):
            self._fail("`;` or `{`")

    def _pass_over(self, name: str, start: int) -> None:
        """Go on after the `}` of a group that does not matter."""
        depth = 0
        for token in _INSIDE.finditer(self.text, self._start):
            depth += {"{": 1, "}": -1}.get(token[0], 0)
            if depth == 0:
                self._place = token.end()
                self._next()
                return
        self._kind, self._value, self._start = "end", "", len(self.text)
        self._unclosed(name, start)

    def _unclosed(self, name: str, start: int) -> NoReturn:
        self._fail(f"`}}` that closes group `{name}` of line {self.span(start, 1).line}")

    def cell(self, group: _Group) -> Cell:
        """A cell from its group."""
        pins = [self._pin(name, g) for g in group.groups if g.kind == "pin" for name in self._names(g)]
        storage = []
        for inner in group.groups:
            if inner.kind in ("latch", "ff"):
                attributes = {name: self._words(*value) for name, value in inner.attributes.items()}
                span = self.span(inner.start, len(inner.kind))
                storage.append(Storage(inner.kind, tuple(self._names(inner)), attributes, span))
        beyond = dict.fromkeys(f"`{g.kind}`" for g in group.groups if g.kind in _BEYOND)
        name = self._names(group)[0]
        return Cell(name, tuple(pins), tuple(storage), tuple(beyond), self.span(group.start, len(group.kind)))

    def _pin(self, name: str, group: _Group) -> Pin:
        function = group.attributes.get("function")
        direction = group.attributes.get("direction", ("", 0))[0]
        words = self._words(*function) if function else None
        return Pin(name, direction, words, frozenset(group.attributes), self.span(group.start, len(group.kind)))

    def _names(self, group: _Group) -> list[str]:
        names = [part for argument in group.arguments for part in re.split(r"[\s,]+", argument.strip())]
        if names and all(_NAME.fullmatch(name) for name in names):
            return names
        message = f"group `{group.kind}` has no readable name"
        raise InputError(Problem("syntax", message, self.span(group.start, len(group.kind)), help="name it in ASCII"))

    def _words(self, text: str, start: int) -> Words:
        return Words(text, self.span(start, len(text) + 2 * (self.text[start : start + 1] == '"')))

    @cached_property
    def _lines(self) -> list[int]:
        return [0, *(m.end() for m in re.finditer("\n", self.text))]

    def span(self, start: int, length: int) -> Span:
        """The span of some characters of one line."""
        line = bisect_right(self._lines, start) - 1
        end = self.text.find("\n", start)
        rest = (len(self.text) if end < 0 else end) - start
        return Span(self.file, line + 1, start - self._lines[line] + 1, max(1, min(length, rest)))

    def _next(self) -> None:
        token = _TOKEN.match(self.text, self._place)
        assert token is not None  # its alternatives take any character
        self._kind = token.lastgroup or "end"
        self._value = token[self._kind]
        self._start = token.start(self._kind) - (self._kind == "string")
        self._place = token.end()

    def _at(self, *signs: str) -> bool:
        return self._kind == "sign" and self._value in signs

    def _accept(self, sign: str) -> bool:
        if self._at(sign):
            self._next()
            return True
        return False

    def _fail(self, expected: str) -> NoReturn:
        found = "the end of the file" if self._kind == "end" else f"`{self._value[:40]}`"
        span = self.span(self._start, len(self._value))
        raise InputError(Problem("syntax", f"expected {expected}, found {found}", span, "here"))
