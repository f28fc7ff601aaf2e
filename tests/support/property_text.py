"""Random cases as property files, so that a circuit that once failed can be kept as a case."""

from __future__ import annotations

import json
from collections.abc import Iterable, Iterator, Mapping
from typing import Any

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, and_, not_, support, to_text, var


def to_property_file(
    circuit: Circuit, environment: Environment, checks: Iterable[tuple[str, Mapping[str, Any]]]
) -> str:
    """The case as the text of a property file with equations; `checks` are pairs of a check and its options.

    The nodes of the circuit become excitation lines whatever its delay model was. The option `to` of `equivalent`
    may be a circuit.
    """
    lines = [f"title = {quoted(circuit.name)}", "", *_circuit("circuit", circuit), *_environment(circuit, environment)]
    for check, options in checks:
        lines += _property(check, options)
    return "\n".join(lines)


def quoted(value: Any) -> str:
    """A TOML value; an expression becomes its text."""
    if isinstance(value, Expr):
        return json.dumps(to_text(value))
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{quoted(k)} = {quoted(v)}" for k, v in value.items()) + " }"
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(map(quoted, value)) + "]"
    return json.dumps(value)


def table(name: str, content: Mapping[str, Any]) -> list[str]:
    """One TOML table."""
    return [f"[{name}]", *(f"{quoted(k)} = {quoted(v)}" for k, v in content.items()), ""]


def _circuit(name: str, circuit: Circuit) -> Iterator[str]:
    yield from table(name, {"inputs": circuit.inputs, "outputs": circuit.outputs, "winners": circuit.winners})
    granted = {g for pair in circuit.exclusive for g in pair}
    plain = {n: e for n, e in circuit.excitation.items() if n not in granted}
    if circuit.exclusive:
        elements = enumerate(circuit.exclusive)
        yield from table(f"{name}.arbiters", {f"ME{i}": _arbiter(circuit, pair) for i, pair in elements})
    if plain:
        yield from table(f"{name}.excitation", plain)
    if circuit.defined:
        yield from table(f"{name}.define", circuit.defined)


def _arbiter(circuit: Circuit, pair: tuple[str, str]) -> Mapping[str, Any]:
    """Two grants that exclude one another, each by its request and the absence of the other."""
    requests = [next(r for r in support(circuit.excitation[g]) if r not in pair) for g in pair]
    for own, other, request in zip(pair, reversed(pair), requests, strict=True):
        assert circuit.excitation[own] is and_(var(request), not_(var(other))), f"{own} is no grant"
    return {"requests": requests, "grants": pair}


def _environment(circuit: Circuit, environment: Environment) -> Iterator[str]:
    settings: dict[str, Any] = {"mode": environment.mode}
    if environment.mode == "fundamental":
        settings["changes"] = environment.changes
    yield from table("environment", {**settings, "assume": environment.assume, "start": environment.start})
    guards: dict[str, Any] = {}
    for x, guard in environment.guards.items():
        guards[x] = {"rises": guard.rises, "falls": guard.falls} | ({"must": True} if guard.must else {})
    if guards:
        yield from table("environment.inputs", guards)


def _property(check: str, options: Mapping[str, Any]) -> Iterator[str]:
    plain = {k: v for k, v in options.items() if not isinstance(v, Circuit)}
    yield from table("[property]", {"check": check, **plain})
    for key, value in options.items():
        if isinstance(value, Circuit):
            yield from _circuit(f"property.{key}", value)
