"""Delay model `feedback`: only the feedback lines carry a delay, all other gates have none (Huffman 1954, recalled).

The grants of a mutual-exclusion element and the gates of an environment always carry one. With `"auto"` a smallest
set of lines that cuts every loop is chosen, as a smallest hitting set of the loops: loops that the set so far leaves
whole are added until none is left (implicit hitting sets, Moreno-Centeno and Karp 2013, recalled).
"""

from __future__ import annotations

from collections.abc import Mapping

from settled.encodings.delays import Placement, functions, without_delay
from settled.models.circuit import Circuit, loops
from settled.models.logic import Expr, rename, support
from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem

DELAY = "feedback"


def place(netlist: Netlist, placement: Placement) -> Circuit:
    """One node for each feedback line. For equations every excitation line is one."""
    gates, defined = functions(netlist)
    nodes, note = _lines(netlist, gates, placement)
    rest = {name: body for name, body in gates.items() if name not in nodes}
    whole = loops(list(rest), rest)
    if whole:
        raise InputError(
            Problem(
                "uncut-loop",
                f"the feedback lines leave a loop through `{'`, `'.join(whole[0][:6])}` without a delay",
                help='name one line of every loop, or write feedback = "auto"',
            )
        )
    flat = without_delay(gates, nodes, defined)
    excitation = dict(zip(nodes, rename([gates[n] for n in nodes], flat), strict=True))
    return Circuit(
        name=netlist.name,
        inputs=netlist.inputs,
        nodes=nodes,
        excitation=excitation,
        outputs=netlist.outputs,
        defined=flat,
        delay=DELAY,
        winners=placement.winners,
        exclusive=tuple(netlist.arbiters.values()),
        notes=(*netlist.notes, *note),
    )


def _lines(netlist: Netlist, gates: Mapping[str, Expr], placement: Placement) -> tuple[tuple[str, ...], list[str]]:
    if netlist.equations:
        return tuple(gates), []
    kept = {*netlist.delayed, *(grant for pair in netlist.arbiters.values() for grant in pair)}
    if placement.feedback != "auto":
        return tuple(n for n in gates if n in placement.feedback or n in kept), []
    cut = smallest_cut({name: body for name, body in gates.items() if name not in kept})
    chosen = tuple(n for n in gates if n in cut or n in kept)
    return chosen, [f"feedback lines chosen (a smallest cut of all loops): {', '.join(chosen) or 'none needed'}"]


def smallest_cut(gates: Mapping[str, Expr]) -> tuple[str, ...]:
    """A smallest set of gates that lies on every loop, in the order of `gates`."""
    import networkx as nx
    from pysat.examples.hitman import Hitman

    graph: nx.DiGraph = nx.DiGraph()
    graph.add_nodes_from(gates)
    for name, body in gates.items():
        graph.add_edges_from((r, name) for r in support(body) if r in gates)
    with Hitman(solver="g4", htype="sorted") as hitman:
        while True:
            cut = set(hitman.get() or [])
            rest = graph.subgraph([n for n in graph if n not in cut])
            found = [_a_loop(rest.subgraph(part)) for part in nx.strongly_connected_components(rest)]
            fresh = sorted(loop for loop in found if loop)
            if not fresh:
                return tuple(n for n in gates if n in cut)
            for loop in fresh:
                hitman.hit(loop)


def _a_loop(part: object) -> list[str]:
    import networkx as nx

    try:
        return sorted(edge[0] for edge in nx.find_cycle(part))
    except nx.NetworkXNoCycle:
        return []
