"""A circuit under other names: inputs, gates and defined signals renamed wherever they stand."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace

from settled.models.logic import rename, var
from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem, nearest
from settled.models.specification import CircuitSource


def read_names(pairs: Iterable[str], source: CircuitSource) -> dict[str, str]:
    """New names by old ones, from texts `old=new`. Raises `InputError` with everything that cannot be renamed so."""
    net = source.netlist
    known = [*net.inputs, *(g.name for g in net.gates), *net.defined]
    names: dict[str, str] = {}
    problems: list[Problem] = []
    for text in pairs:
        old, sign, new = text.partition("=")
        if not (old and sign and new):
            problems.append(Problem("bad-renaming", f"`{text}` is no renaming", help="write `old=new`"))
        elif old not in known:
            message = f"`{net.name}` has no signal `{old}` to rename"
            problems.append(Problem("unknown-name", message, help=nearest(old, known)))
        elif old in names:
            problems.append(Problem("bad-renaming", f"`{old}` is renamed twice"))
        else:
            names[old] = new
    after = [names.get(name, name) for name in known]
    twice = sorted({name for name in after if after.count(name) > 1} & set(names.values())) if names else []
    problems += [Problem("bad-renaming", f"two signals of `{net.name}` would be called `{n}`") for n in twice]
    if problems:
        raise InputError(problems)
    return names


def renamed(source: CircuitSource, names: Mapping[str, str]) -> CircuitSource:
    """The same circuit with each name in `names` replaced by the new one."""

    def all_new(old: Iterable[str]) -> tuple[str, ...]:
        return tuple(names.get(name, name) for name in old)

    net = source.netlist
    leaves = {old: var(new) for old, new in names.items()}
    functions = rename([g.function for g in net.gates], leaves)
    defined = rename(list(net.defined.values()), leaves)
    lines = source.feedback if source.feedback is None or source.feedback == "auto" else all_new(source.feedback)
    return replace(
        source,
        feedback=lines,
        isochronic=all_new(source.isochronic),
        netlist=Netlist(
            name=net.name,
            inputs=all_new(net.inputs),
            gates=tuple(
                replace(g, name=names.get(g.name, g.name), function=f)
                for g, f in zip(net.gates, functions, strict=True)
            ),
            outputs=all_new(net.outputs),
            defined=dict(zip(all_new(net.defined), defined, strict=True)),
            cells={name: all_new(gates) for name, gates in net.cells.items()},
            groups={name: tuple(map(all_new, cells)) for name, cells in net.groups.items()},
            notes=net.notes,
            equations=net.equations,
            arbiters={name: (all_new(pair)[0], all_new(pair)[1]) for name, pair in net.arbiters.items()},
            delayed=all_new(net.delayed),
        ),
    )
