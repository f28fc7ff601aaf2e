"""An environment that is a circuit: a second netlist whose outputs drive inputs of the first, in a closed loop.

So a protocol is written once, as a circuit, and used for every circuit that keeps to it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from settled.models.circuit import definition_order
from settled.models.logic import Expr, rename, var
from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem
from settled.models.property_files.toml_document import listed
from settled.models.source import Span

PREFIX = "env"


def join(netlist: Netlist, other: Netlist, span: Span | None = None) -> Netlist:
    """The first netlist with the second as its environment.

    Outputs of the second that are named like inputs of the first drive them. Inputs of the second that are named
    like signals of the first are those signals; its other inputs become inputs of the whole. All else of the second
    is called `env.` and its name. Every gate of the second carries one delay under each delay model, and under
    `wire` the second is one closed cell.

    Raises `InputError`, at `span`, when the second drives nothing, a name is taken, or a loop has no delay.
    """
    inner = [*(gate.name for gate in other.gates), *other.defined]
    driven = [x for x in netlist.inputs if x in other.outputs and x in inner]
    names = {n: n if n in driven else f"{PREFIX}.{n}" for n in inner}
    _check_names(netlist, other, names, driven, span)
    new = {old: var(name) for old, name in names.items()}
    functions = rename([gate.function for gate in other.gates], new)
    gates = [replace(g, name=names[g.name], function=e) for g, e in zip(other.gates, functions, strict=True)]
    bodies = rename(list(other.defined.values()), new)
    defined = {**netlist.defined, **dict(zip([names[n] for n in other.defined], bodies, strict=True))}
    _check_loops(defined, span)
    signals = _signals(netlist)
    pairs = {f"{PREFIX}.{name}": (names[a], names[b]) for name, (a, b) in other.arbiters.items()}
    added = tuple(gate.name for gate in gates)
    return replace(
        netlist,
        inputs=(*(x for x in netlist.inputs if x not in driven), *(x for x in other.inputs if x not in signals)),
        gates=(*netlist.gates, *gates),
        defined=defined,
        cells={**netlist.cells, PREFIX: added},
        notes=(*netlist.notes, *other.notes, f"driven by the circuit {other.name}: {', '.join(driven)}"),
        delayed=(*netlist.delayed, *added),
        arbiters={**netlist.arbiters, **pairs},
    )


def _signals(netlist: Netlist) -> set[str]:
    return {*netlist.inputs, *(gate.name for gate in netlist.gates), *netlist.defined}


def _check_names(netlist: Netlist, other: Netlist, names: dict[str, str], driven: list[str], span: Span | None) -> None:
    if not driven:
        raise InputError(
            Problem(
                "drives-nothing",
                "the circuit of the environment drives no input",
                span,
                "none of its outputs is named like an input",
                help=f"its outputs are {listed(other.outputs)}; the inputs are {listed(netlist.inputs)}",
            )
        )
    taken = [n for n in names.values() if n not in driven and n in _signals(netlist)]
    taken += [PREFIX] if PREFIX in {*netlist.cells, *netlist.arbiters} else []
    if taken:
        message = f"`{taken[0]}` names something of the circuit and of its environment"
        raise InputError(Problem("duplicate-name", message, span, f"what it adds is called `{PREFIX}.` and its name"))


def _check_loops(defined: Mapping[str, Expr], span: Span | None) -> None:
    try:
        definition_order(defined)
    except ValueError as loop:
        message = f"the circuit and its environment form a loop without a delay: {loop}"
        raise InputError(Problem("definition-cycle", message, span, "closes the loop")) from None
