"""Delay model `wire`: every gate output is a node and so is every connection, with no promise about forks.

Connections are one for each primary input, `x>`, and one for each gate pin (per reading gate and distinct source),
`source>reader`. A closed cell is entered through one connection per source, `source>cell`, and has none inside; a
mutual-exclusion element is a closed cell. Nets listed as isochronic have connections without delay. Source of the
model: Brzozowski and Seger, "A unified framework for race analysis of asynchronous networks", 1989 (recalled).
"""

from __future__ import annotations

from settled.encodings.delays import Placement, functions
from settled.models.circuit import Circuit
from settled.models.logic import Expr, rename, support, var
from settled.models.netlist import Netlist

DELAY = "wire"


def place(netlist: Netlist, placement: Placement) -> Circuit:
    """One node for each input connection, gate pin and gate."""
    gates, defined = functions(netlist)
    cell_of = {gate: name for name, gates_of in closed_cells(netlist, placement).items() for gate in gates_of}
    nodes: dict[str, Expr] = {}
    entry = {x: x for x in netlist.inputs}
    for x in netlist.inputs:
        if x not in placement.isochronic:
            entry[x] = connection(x, "")
            nodes[entry[x]] = var(x)
    for name, body in gates.items():
        reader = cell_of.get(name, name)
        pins: dict[str, Expr] = {}
        for source in support(body):
            inside = source in cell_of and cell_of[source] == reader
            if source in placement.isochronic or inside:
                continue
            pins[source] = var(connection(source, reader))
            nodes.setdefault(connection(source, reader), var(entry.get(source, source)))
        nodes[name] = rename([body], pins)[0]
    return Circuit(
        name=netlist.name,
        inputs=netlist.inputs,
        nodes=tuple(nodes),
        excitation=nodes,
        outputs=netlist.outputs,
        defined=defined,
        delay=DELAY,
        winners=placement.winners,
        exclusive=tuple(netlist.arbiters.values()),
        notes=(*netlist.notes, *_notes(netlist, placement)),
    )


def connection(source: str, reader: str) -> str:
    """The name of the connection from `source` to a gate or cell."""
    return f"{source}>{reader}"


def closed_cells(netlist: Netlist, placement: Placement) -> dict[str, tuple[str, ...]]:
    """The closed cells in force, by name: those of the netlist and those that `closed` asks for."""
    cells = dict(netlist.cells)
    instance = {groups[0]: name for name, groups in reversed(list(netlist.groups.items())) if len(groups) == 1}
    for name in placement.closed:
        for group in netlist.groups[name]:
            taken = {gate for members in cells.values() for gate in members}
            fresh = tuple(gate for gate in group if gate not in taken)
            cells |= {instance.get(group, name): fresh} if fresh else {}
    taken = {gate for members in cells.values() for gate in members}
    return cells | {name: grants for name, grants in netlist.arbiters.items() if not taken & set(grants)}


def _notes(netlist: Netlist, placement: Placement) -> list[str]:
    cells = closed_cells(netlist, placement)
    notes = [f"closed cell {name}: {', '.join(gates)}" for name, gates in cells.items()]
    if placement.isochronic:
        notes.append(f"isochronic by assumption (a promise of the layout): {', '.join(placement.isochronic)}")
    return notes
