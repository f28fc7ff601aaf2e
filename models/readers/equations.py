"""Equations: the `[circuit]` table of a property file with its `excitation`, `define`, `arbiters` and `cells`.

Each line of `excitation` is a gate with a delay of its own, as in the excitation equations of Huffman ("The synthesis
of sequential switching circuits", 1954; recalled).
"""

from __future__ import annotations

from collections.abc import Mapping
from graphlib import CycleError, TopologicalSorter

from settled.models.logic import FALSE, Expr, support
from settled.models.netlist import Gate, Netlist
from settled.models.property_files.name_scope import Scope, check_new, expression, names_among, new_names
from settled.models.property_files.toml_document import Spot, where
from settled.models.property_files.toml_readers import table
from settled.models.readers import arbiters

KEYS = ("inputs", "outputs", "excitation", "define", "arbiters", "cells")
"""What a circuit given by equations takes and one read from a file does not."""


def netlist(circuit: Spot, name: str) -> Netlist | None:
    """The netlist of a `[circuit]` table; problems are noted in its document, `None` when they leave no names."""
    inputs = circuit.take("inputs", new_names)
    excitation = circuit.take("excitation", table)
    define = circuit.take("define", table)
    listed = circuit.take("arbiters", arbiters.elements)
    elements = listed or []
    given = {"inputs": inputs, "excitation": excitation, "define": define, "arbiters": listed}
    nodes = _keys(excitation) + arbiters.grant_names(elements)
    complete = bool(nodes) and not any(circuit.has(key) and given[key] is None for key in given)
    scope = Scope(inputs or (), nodes, dict.fromkeys(_keys(define))) if complete else None
    arbiters.check_names(elements, _check_names(circuit, excitation, define))
    if excitation is not None and not excitation.value:
        excitation.problem("bad-value", "`excitation` is empty: a circuit has at least one node", "no line in it")
    gates, defined = _functions(excitation, scope), _functions(define, scope)
    grants, pairs = arbiters.read(elements, scope)
    outputs = circuit.take("outputs", names_among(scope.signals if scope else None, "signal"))
    cells = circuit.take("cells", lambda spot: _cells(spot, scope)) or {}
    arbiters.check_cells(elements, cells)
    if define is not None:
        _check_cycles(define, defined)
    if scope is None:
        return None
    lines = excitation.members() if excitation else ()
    return Netlist(
        name=name,
        inputs=scope.inputs,
        gates=(*(Gate(line.name, gates[line.name], line.key_span) for line in lines), *grants),
        outputs=outputs or (),
        defined=defined,
        cells=cells,
        notes=tuple(f"mutual-exclusion element {name}: at most one of {a} and {b}" for name, (a, b) in pairs.items()),
        equations=True,
        arbiters=pairs,
    )


def _keys(spot: Spot | None) -> tuple[str, ...]:
    return tuple(spot.value) if spot else ()


def _functions(spot: Spot | None, scope: Scope | None) -> dict[str, Expr]:
    """The expression of each line; 0 stands in for one that cannot be read."""
    reader = expression(scope)
    return {line.name: reader(line) or FALSE for line in spot.members()} if spot else {}


def _check_names(circuit: Spot, *tables: Spot | None) -> dict[str, Spot]:
    """Every name of a line is one that expressions can read, and names one signal only; where each name stands."""
    given = circuit.child("inputs") if circuit.has("inputs") else None
    members = list(given.members()) if given and isinstance(given.value, list) else []
    first = {member.value: member for member in members if isinstance(member.value, str)}
    for line in (line for spot in tables if spot for line in spot.members()):
        check_new(line.name, line, at_key=True)
        if line.name in first:
            note = f"the other one stands at {where(first[line.name].span)}"
            message = f"`{line.name}` names two signals"
            line.problem("duplicate-name", message, "again", at_key=True, note=note)
        first.setdefault(line.name, line)
    return first


def _check_cycles(define: Spot, defined: dict[str, Expr]) -> None:
    """Note a problem for each cycle of definitions, no two of them with a common member."""
    left = dict(defined)
    while cycle := find_cycle(left):
        line = define.child(cycle[0])
        message = "definitions form a cycle: " + " reads ".join(f"`{name}`" for name in cycle)
        help = "a signal of a feedback loop needs a delay: move one of them to `[circuit.excitation]`"
        line.problem("definition-cycle", message, "defined by itself", at_key=True, help=help)
        left = {name: body for name, body in left.items() if name not in cycle}


def find_cycle(bodies: Mapping[str, Expr]) -> list[str]:
    """Names of which each one's expression reads the next, the first one again at the end; `[]` if there are none."""
    try:
        TopologicalSorter({name: [r for r in support(body) if r in bodies] for name, body in bodies.items()}).prepare()
    except CycleError as error:
        cycle: list[str] = list(reversed(error.args[1]))
        turn = cycle.index(min(cycle, key=list(bodies).index))
        return [*cycle[turn:-1], *cycle[: turn + 1]]
    return []


def _cells(spot: Spot, scope: Scope | None) -> dict[str, tuple[str, ...]]:
    """Closed cells: groups of nodes without a common member."""
    cells: dict[str, tuple[str, ...]] = {}
    home: dict[str, str] = {}
    for group in spot.members() if table(spot) else ():
        cells[group.name] = names_among(scope.gates if scope else None, "node")(group) or ()
        for node in cells[group.name]:
            if home.setdefault(node, group.name) != group.name:
                message = f"`{node}` is in two cells, `{home[node]}` and `{group.name}`"
                group.problem("duplicate-name", message, "the second one")
    return cells
