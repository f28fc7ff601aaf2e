"""What a property file says, as data: a circuit with its delay model, an environment, properties with options."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from settled.models.environment import Environment
from settled.models.netlist import Netlist
from settled.models.source import Span


@dataclass(frozen=True)
class Shape:
    """Which options a check takes.

    `required` and `optional` name them; `mode` says whether the check has a meaning in `any` mode or in
    `fundamental` mode only; `watches`: it needs something to look at, `signals` or else outputs of the circuit.
    """

    required: frozenset[str] | set[str] = frozenset()
    optional: frozenset[str] | set[str] = frozenset()
    mode: Literal["fundamental", "any"] = "any"
    watches: bool = False


@dataclass(frozen=True)
class CircuitSource:
    """A netlist and the delay model asked for.

    * `delay`: `feedback`, `gate` or `wire`; `winners`: `any` or `one`.
    * `feedback`: the gates that stay nodes under `feedback`, or `auto`; `None` under another delay model and
      for equations, where every gate is a node.
    * `isochronic`: inputs and gates whose connections carry no delay; `closed`: keys of `netlist.groups`.
    * `span`: where the circuit was asked for.
    """

    netlist: Netlist
    delay: str = "gate"
    feedback: tuple[str, ...] | Literal["auto"] | None = None
    winners: str = "any"
    isochronic: tuple[str, ...] = ()
    closed: tuple[str, ...] = ()
    span: Span | None = None


@dataclass(frozen=True)
class Property:
    """One question.

    `options` holds the options that were given, by their name in the file; expressions are `Expr` over names of
    the netlist, `stable` and `excited`, lists of names are tuples, `to` of `equivalent` is a `CircuitSource`.
    `spans` says where each option's value stands, `span` where the check does.
    """

    name: str
    check: str
    options: Mapping[str, Any] = field(default_factory=dict)
    span: Span | None = None
    spans: Mapping[str, Span] = field(default_factory=dict)


@dataclass(frozen=True)
class Specification:
    """A property file.

    `spans` says where `start` and `assume` stand, if they do; `files` holds the SHA-256 of every file that was read.
    """

    path: str
    title: str
    circuit: CircuitSource
    environment: Environment
    properties: tuple[Property, ...]
    spans: Mapping[str, Span] = field(default_factory=dict)
    files: Mapping[str, str] = field(default_factory=dict)
