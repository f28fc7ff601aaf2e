"""Mutual-exclusion elements beside equations: `[circuit.arbiters]`, one line an element.

    ME = { requests = ["r1", "r2"], grants = ["g1", "g2"] }

The grants come into being there, as nodes.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from settled.models.arbiter import grants
from settled.models.logic import var
from settled.models.netlist import Gate
from settled.models.property_files.name_scope import Scope, check_new, names_among
from settled.models.property_files.toml_document import Spot, where
from settled.models.property_files.toml_readers import table

KEYS = ("requests", "grants")


def elements(arbiters: Spot) -> list[Spot] | None:
    """The lines of the table, each a table with two names as its `grants`; problems are noted in the document."""
    if table(arbiters) is None:
        return None
    if not arbiters.value:
        arbiters.problem("bad-value", "`arbiters` is empty", "no line in it")
    lines = [line for line in arbiters.members() if table(line)]
    return lines if all(_two(line, "grants", None) for line in lines) and len(lines) == len(arbiters.value) else None


def grant_names(lines: list[Spot]) -> tuple[str, ...]:
    """The nodes that the elements bring with them."""
    return tuple(member.value for member in _grants(lines))


def _grants(lines: list[Spot]) -> Iterator[Spot]:
    for line in lines:
        yield from line.child("grants").members()


def check_names(lines: list[Spot], first: dict[str, Spot]) -> None:
    """Every grant has a name that expressions can read and that no other signal (`first`: where it stands) has."""
    for member in _grants(lines):
        check_new(member.value, member)
        if member.value in first:
            note = f"the other one stands at {where(first[member.value].span)}"
            member.problem("duplicate-name", f"`{member.value}` names two signals", "again", note=note)
        first.setdefault(member.value, member)


def read(lines: list[Spot], scope: Scope | None) -> tuple[list[Gate], dict[str, tuple[str, str]]]:
    """The grants as gates, and the two grants of each element by its name."""
    gates: list[Gate] = []
    pairs: dict[str, tuple[str, str]] = {}
    for line in lines:
        line.only(KEYS, "an arbiter")
        requests = _two(line, "requests", scope)
        if requests:
            first, second = grant_names([line])
            gates += grants([var(r) for r in requests], (first, second), line.key_span)
            pairs[line.name] = (first, second)
    return gates, pairs


def _two(line: Spot, key: str, scope: Scope | None) -> tuple[str, ...] | None:
    """Two names; `requests` name signals that there are."""
    if not line.has(key):
        line.missing(key, "an arbiter")
        return None
    spot = line.child(key)
    names = names_among(scope.signals if scope else None, "signal")(spot)
    if names is not None and len(spot.value) != 2:
        spot.problem("bad-value", f"an arbiter has two {key}, not {len(spot.value)}", "not two names")
    return names if names is not None and len(names) == 2 else None


def check_cells(lines: list[Spot], cells: Mapping[str, tuple[str, ...]]) -> None:
    """A closed cell of another name holds both grants of an element or none: no connection parts them."""
    for line in lines:
        names = set(grant_names([line]))
        if line.name in cells:
            line.problem("duplicate-name", f"`{line.name}` names a cell and an arbiter", "again", at_key=True)
        for cell, members in cells.items():
            if names & set(members) and not names <= set(members):
                message = f"the cell `{cell}` parts the two grants of the arbiter `{line.name}`"
                line.problem("conflict", message, "its grants sit side by side", at_key=True)
