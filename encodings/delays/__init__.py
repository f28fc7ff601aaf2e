"""Delay models: where the delays of a netlist sit. One file a model; each states `DELAY` and a `place` function."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from importlib import import_module
from pkgutil import iter_modules
from typing import Literal

from settled.models.circuit import Circuit, definition_order, expand
from settled.models.logic import Expr, rename
from settled.models.netlist import Netlist


@dataclass(frozen=True)
class Placement:
    """What the property file says beside the name of the delay model.

    * `feedback`: the feedback lines (`feedback` only); `"auto"`: a smallest set that cuts every loop.
    * `isochronic`: nets whose connections carry no delay; `closed`: cells without inner wire delays (`wire` only).
    """

    winners: str = "any"
    feedback: Sequence[str] | Literal["auto"] = "auto"
    isochronic: Sequence[str] = ()
    closed: Sequence[str] = ()


def names() -> list[str]:
    """The delay models there are."""
    return sorted(m.name for m in iter_modules(__path__))


def place(netlist: Netlist, delay: str, placement: Placement = Placement()) -> Circuit:  # noqa: B008
    """The circuit that `netlist` is under the delay model `delay`. Raises `InputError` where the two do not fit."""
    circuit: Circuit = import_module(f"settled.encodings.delays.{delay}").place(netlist, placement)
    return circuit


def functions(netlist: Netlist) -> tuple[dict[str, Expr], dict[str, Expr]]:
    """Gate functions and definitions over inputs and gates only, all definitions expanded."""
    defined = expand(netlist.defined)
    bodies = rename([g.function for g in netlist.gates], defined)
    return {g.name: body for g, body in zip(netlist.gates, bodies, strict=True)}, defined


def without_delay(gates: Mapping[str, Expr], nodes: Sequence[str], defined: Mapping[str, Expr]) -> dict[str, Expr]:
    """Definitions in which every gate outside `nodes` has no delay: each over inputs and `nodes` only."""
    open_gates = {name: body for name, body in gates.items() if name not in set(nodes)}
    expanded = expand(open_gates)
    again = rename(list(defined.values()), expanded)
    return expanded | dict(zip(defined, again, strict=True))


__all__ = ["Placement", "definition_order", "functions", "names", "place", "without_delay"]
