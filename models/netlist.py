"""A circuit as it was written: gates and zero-delay definitions, before a delay model says what carries a delay."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from settled.models.logic import Expr
from settled.models.source import Span


@dataclass(frozen=True, slots=True)
class Delay:
    """Bounds of one gate's delay in the unit of the netlist's `#(...)`: (min, max) of the rising and falling output."""

    rise: tuple[float, float]
    fall: tuple[float, float]


@dataclass(frozen=True, slots=True)
class Gate:
    """One gate: the net it drives and the function it computes of other nets (and of its own output, if it latches)."""

    name: str
    function: Expr
    span: Span | None = None
    delay: Delay | None = None


@dataclass(frozen=True)
class Netlist:
    """Gates in the order in which they were written.

    * `inputs`, `outputs`: names; an output is an input, a gate or a defined signal.
    * `defined`: zero-delay signals over inputs, gates and one another, without cycles; the aliases of a net
      (the names it has on other levels of a hierarchy) are among them.
    * `groups`: gates that may be closed cells, by the name of the cell, instance or module: each entry lists
      the closed cells, one tuple of gate names each, that the name stands for.
    * `cells`: closed cells in force, by name, as the gates they hold. Flip-flops of a cell library come closed.
    * `arbiters`: mutual-exclusion elements by name, as the two gates that are their grants (see `arbiter`).
    * `delayed`: gates that carry a delay under every delay model, beside the grants of `arbiters`.
    * `notes`: sentences for the echo, such as how a library cell was understood.
    """

    name: str
    inputs: tuple[str, ...]
    gates: tuple[Gate, ...]
    outputs: tuple[str, ...]
    defined: Mapping[str, Expr] = field(default_factory=dict)
    cells: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    groups: Mapping[str, tuple[tuple[str, ...], ...]] = field(default_factory=dict)
    notes: tuple[str, ...] = ()
    equations: bool = False
    arbiters: Mapping[str, tuple[str, str]] = field(default_factory=dict)
    delayed: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        for name in ("defined", "cells", "groups", "arbiters"):
            object.__setattr__(self, name, MappingProxyType(dict(getattr(self, name))))
