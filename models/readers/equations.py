"""Excitation equations: the `[circuit]` table of a property file with its `excitation`, `define` and `cells`.

Each line of `excitation` is a gate with a delay of its own, as in the excitation equations of Huffman ("The synthesis
of sequential switching circuits", 1954; recalled).
"""

from __future__ import annotations

from collections.abc import Mapping
from graphlib import CycleError, TopologicalSorter

from settled.models.logic import FALSE, Expr, support
from settled.models.name_scope import Scope, check_new, expression, names_among, new_names
from settled.models.netlist import Gate, Netlist
from settled.models.source import Span
from settled.models.toml_document import Spot, where
from settled.models.toml_readers import table

KEYS = ("inputs", "outputs", "excitation", "define", "cells")
"""What a circuit given by equations takes and one read from a file does not."""


def netlist(circuit: Spot, name: str) -> Netlist:
    """The netlist of a `[circuit]` table; problems are noted in its document, and what is left is returned."""
    inputs = circuit.take("inputs", new_names) or ()
    excitation = circuit.take("excitation", table)
    define = circuit.take("define", table)
    scope = Scope(inputs, _keys(excitation), dict.fromkeys(_keys(define)))
    _check_names(circuit, inputs, excitation, define)
    if circuit.has("excitation") and excitation is not None and not excitation.value:
        excitation.problem("bad-value", "`excitation` is empty: a circuit has at least one node", "no line in it")
    gates = _functions(excitation, scope)
    defined = _functions(define, scope)
    if define is not None:
        _check_cycles(define, defined)
    spans = {spot.name: spot.key_span for spot in excitation.members()} if excitation else {}
    return Netlist(
        name=name,
        inputs=inputs,
        gates=tuple(Gate(gate, function, spans[gate]) for gate, function in gates.items()),
        outputs=circuit.take("outputs", names_among(scope.signals, "signal")) or (),
        defined=defined,
        cells=circuit.take("cells", lambda spot: _cells(spot, scope)) or {},
        equations=True,
    )


def _keys(spot: Spot | None) -> tuple[str, ...]:
    return tuple(spot.value) if spot else ()


def _functions(spot: Spot | None, scope: Scope) -> dict[str, Expr]:
    """The expression of each line; 0 stands in for one that cannot be read."""
    reader = expression(scope)
    return {line.name: reader(line) or FALSE for line in spot.members()} if spot else {}


def _check_names(circuit: Spot, inputs: tuple[str, ...], *tables: Spot | None) -> None:
    """Every name of a line is one that expressions can read, and names one signal only."""
    first: dict[str, Span] = dict.fromkeys(inputs, circuit.child("inputs").span) if inputs else {}
    for line in (line for spot in tables if spot for line in spot.members()):
        check_new(line.name, line, at_key=True)
        if line.name in first:
            note = f"the other one stands at {where(first[line.name])}"
            message = f"`{line.name}` names two signals"
            line.problem("duplicate-name", message, "again", span=line.key_span, note=note)
        first.setdefault(line.name, line.key_span)


def _check_cycles(define: Spot, defined: dict[str, Expr]) -> None:
    """Note a problem for each cycle of definitions, no two of them with a common member."""
    left = dict(defined)
    while cycle := find_cycle(left):
        line = define.child(cycle[0])
        message = "definitions form a cycle: " + " reads ".join(f"`{name}`" for name in cycle)
        help = "a signal of a feedback loop needs a delay: move one of them to `[circuit.excitation]`"
        line.problem("definition-cycle", message, "defined by itself", span=line.key_span, help=help)
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


def _cells(spot: Spot, scope: Scope) -> dict[str, tuple[str, ...]]:
    """Closed cells: groups of nodes without a common member."""
    cells: dict[str, tuple[str, ...]] = {}
    if table(spot) is None:
        return cells
    home: dict[str, str] = {}
    for group in spot.members():
        cells[group.name] = names_among(scope.gates, "node")(group) or ()
        for node in cells[group.name]:
            if home.setdefault(node, group.name) != group.name:
                message = f"`{node}` is in two cells, `{home[node]}` and `{group.name}`"
                group.problem("duplicate-name", message, "the second one")
    return cells
