"""The names that a property file may use, and the readers of values that hold names: lists, expressions, states."""

from __future__ import annotations

import re
from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass, replace
from functools import cached_property

from settled.models.expression_text import NameAt, parse
from settled.models.logic import Expr, excited, substitute
from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem, nearest
from settled.models.property_files.toml_document import Spot, listed
from settled.models.property_files.toml_readers import bit, strings, table
from settled.models.source import Span

NEAREST_LIMIT = 2_000
"""Among more names than this no near one is looked for."""

_UNREADABLE = re.compile(r"[\s\x00-\x1f\x7f]|\A\\")
_SWALLOWED = re.compile(r"(?<!\\)(?:\\\\)*(\\b|\\[tnfr](?=[A-Za-z_0-9]))[^\s\\]*\Z")
"""A control character in TOML's spelling that a word follows up to the end."""


@dataclass(frozen=True)
class Scope:
    """Inputs, gates and defined signals of a circuit; a definition that could not be read is `None`."""

    inputs: tuple[str, ...]
    gates: tuple[str, ...]
    defined: Mapping[str, Expr | None]

    @classmethod
    def of(cls, netlist: Netlist) -> Scope:
        return cls(netlist.inputs, tuple(gate.name for gate in netlist.gates), netlist.defined)

    @cached_property
    def signals(self) -> dict[str, str]:
        """Every name, with what it is."""
        return {
            **dict.fromkeys(self.defined, "defined signal"),
            **dict.fromkeys(self.gates, "gate"),
            **dict.fromkeys(self.inputs, "input"),
        }

    @cached_property
    def gate_set(self) -> frozenset[str]:
        return frozenset(self.gates)

    def net(self, name: str) -> str:
        """The input or gate that `name` is another name of, or `name`."""
        seen = set()
        while name not in seen and name in self.defined:
            seen.add(name)
            body = self.defined[name]
            name = body.name if body is not None and body.op == "var" else name
        return name


def new_names(spot: Spot) -> tuple[str, ...] | None:
    """An array of names that come into being here."""
    members = strings(spot)
    for member in members or ():
        check_new(member.value, member)
    return None if members is None else tuple(member.value for member in members)


def check_new(name: str, spot: Spot, at_key: bool = False) -> None:
    """Note a problem when expressions could not read `name`, at the value or the key of `spot`."""
    if name in ("stable", "excited"):
        spot.problem(
            "reserved-name", f"`{name}` is a word of expressions and cannot name a signal", "reserved", at_key=at_key
        )
    elif not name or _UNREADABLE.search(name):
        help = "the backslash and the final blank of an escaped name stand in expressions only" if "\\" in name else ""
        message = f"`{name}` cannot name a signal: white space or a leading backslash"
        spot.problem("bad-name", message if name else "a name is empty", "not a name", at_key=at_key, help=help)


def names_among(known: Collection[str] | None, what: str) -> Callable[[Spot], tuple[str, ...] | None]:
    """Reader of an array of names, each a known `what` (`None`: nothing is known, so nothing is checked)."""

    def reader(spot: Spot) -> tuple[str, ...] | None:
        members = strings(spot)
        if members is None:
            return None
        for member in members:
            if known is not None and member.value not in known:
                unknown(member, member.value, known, what)
        return tuple(member.value for member in members if known is None or member.value in known)

    return reader


def unknown(spot: Spot, name: str, known: Collection[str], what: str, at_key: bool = False) -> None:
    """Note that there is no `what` called `name`."""
    spot.problem("unknown-name", f"unknown {what} `{name}`", "not known", at_key=at_key, help=suggestion(name, known))


def near(name: str, known: Collection[str]) -> str:
    """The nearest known name, if there are not too many of them."""
    return nearest(name, known) if len(known) <= NEAREST_LIMIT else ""


def suggestion(name: str, known: Collection[str]) -> str:
    """The nearest known name; all of them when none is near and they are few."""
    return near(name, known) or (f"the known names are {listed(known)}" if 0 < len(known) <= 8 else "")


def expression(
    scope: Scope | None, *, inputs_only: bool = False, state_words: bool = False
) -> Callable[[Spot], Expr | None]:
    """Reader of an expression over the names of `scope`; without one only its syntax is checked."""

    def reader(spot: Spot) -> Expr | None:
        if not isinstance(spot.value, str):
            spot.wrong_type("an expression in a string")
            return None
        try:
            parsed = parse(spot.value, span_of=spot.inside, state_words=state_words)
        except InputError as error:
            spot.document.note(*(_explained(spot, problem) for problem in error.problems))
            return None
        if scope is None:
            return parsed.expr
        known = [_check_name(spot, name, scope, inputs_only) for name in parsed.names]
        if not all(known):
            return None
        named = {name.name: excited(scope.net(name.name)) for name in parsed.names if name.node}
        if not named:
            return parsed.expr
        return substitute([parsed.expr], lambda e: named[e.name] if e.op == "excited" else e)[0]

    return reader


def _check_name(spot: Spot, at: NameAt, scope: Scope, inputs_only: bool) -> bool:
    """Whether the name may stand where it does; notes a problem if not."""
    kind = scope.signals.get(at.name)
    if kind and (kind == "input" or not inputs_only) and (not at.node or scope.net(at.name) in scope.gate_set):
        return True
    span = spot.inside(at.start, at.end)
    if kind is None:
        known = scope.inputs if inputs_only else scope.signals
        spot.problem("unknown-name", f"unknown name `{at.name}`", "not known", span=span, help=_hint(spot, at, known))
    elif inputs_only and kind != "input":
        spot.problem(
            "not-an-input", f"`{at.name}` is no input: `{spot.name}` reads inputs only", f"a {kind}", span=span
        )
    else:
        message = f"`{at.name}` carries no delay: `excited` takes a node"
        spot.problem("not-a-node", message, "an input" if kind == "input" else f"a {kind}", span=span)
    return False


def _hint(spot: Spot, at: NameAt, known: Collection[str]) -> str:
    return near(at.name, known) or _swallowed(spot, spot.inside(at.start, at.end)) or suggestion(at.name, known)


def _explained(spot: Spot, problem: Problem) -> Problem:
    help = _swallowed(spot, problem.span) if problem.span else ""
    return replace(problem, help=help) if help else problem


def _swallowed(spot: Spot, span: Span) -> str:
    """A cure where the word that ends at `span` lost its backslash, which TOML took for a control character."""
    start, document = spot.place.value[0], spot.document
    end = document.line_starts[span.line - 1] + span.column - 1 + span.length
    match = _SWALLOWED.search(document.text[start:end]) if document.text[start] == '"' else None
    if match is None:
        return ""
    return f"`{match[1]}` in double quotes is a control character; write the expression in single quotes"


def state(scope: Scope | None, *, inputs_only: bool = False) -> Callable[[Spot], Mapping[str, int] | None]:
    """Reader of a table that gives signals (or inputs only) the values 0 and 1."""
    known = None if scope is None else scope.inputs if inputs_only else scope.signals
    what = "input" if inputs_only else "signal"

    def reader(spot: Spot) -> Mapping[str, int] | None:
        if table(spot) is None:
            return None
        values: dict[str, int] = {}
        for member in spot.members():
            value = bit(member)
            if known is not None and member.name not in known:
                unknown(member, member.name, known, what, at_key=True)
            elif value is not None:
                values[member.name] = value
        return values

    return reader
