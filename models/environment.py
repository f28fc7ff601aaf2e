"""The environment: which inputs may change, when, and where runs begin. What its words mean is in `states`."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from settled.models.logic import TRUE, Expr


@dataclass(frozen=True)
class Guard:
    """When one input may rise and fall: conditions over inputs and signals. `must`: it may not wait for ever."""

    rises: Expr = TRUE
    falls: Expr = TRUE
    must: bool = False


@dataclass(frozen=True)
class Environment:
    """How the inputs behave.

    * `mode`: `fundamental` (inputs change in stable total states only) or `input-output`.
    * `changes`: in fundamental mode `single`, `burst` or `simultaneous`.
    * `assume`: over inputs only, true at every instant.
    * `start`: values of inputs, nodes and defined signals that a start state has.
    * `guards`: by input; a missing guard is "always".
    """

    mode: str = "fundamental"
    changes: str = "single"
    assume: tuple[Expr, ...] = ()
    start: Mapping[str, int] = field(default_factory=dict)
    guards: Mapping[str, Guard] = field(default_factory=dict)

    def guard(self, name: str) -> Guard:
        """The guard of an input."""
        return self.guards.get(name, Guard())
