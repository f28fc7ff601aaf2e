"""The `[environment]` table: how the inputs behave, and the circuit that drives some of them."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import replace
from pathlib import Path

from settled.models.environment import Environment, Guard
from settled.models.joining import join
from settled.models.logic import TRUE
from settled.models.problems import InputError
from settled.models.property_files import circuit_table
from settled.models.property_files.name_scope import Scope, expression, state, unknown
from settled.models.property_files.toml_document import Spot
from settled.models.property_files.toml_readers import array_of, boolean, one_of, table
from settled.models.specification import CircuitSource, Property

KEYS = ("mode", "changes", "assume", "start", "inputs", "circuit")
GUARD_KEYS = ("rises", "falls", "must")
_NOT_ITS_OWN = ("delay", "feedback", "winners", "isochronic", "closed", "cells")


def surrounded(root: Spot, circuit: CircuitSource | None) -> CircuitSource | None:
    """The circuit with the one that `[environment]` names as its environment; `None` when a noted problem leaves none.

    `root` is the whole property file.
    """
    environment = root.value.get("environment")
    if not isinstance(environment, dict) or "circuit" not in environment:
        return circuit
    spot = root.child("environment").child("circuit")
    other = circuit_table.circuit(spot, (Path(spot.document.file).resolve(),))
    for key in _NOT_ITS_OWN if isinstance(spot.value, dict) else ():
        if spot.has(key):
            message = f"`{key}` is not said of the environment: each of its gates carries one delay"
            spot.child(key).problem("conflict", message, "not for this circuit", at_key=True)
    if circuit is None or other is None:
        return None
    try:
        return replace(circuit, netlist=join(circuit.netlist, other.netlist, spot.span))
    except InputError as error:
        spot.document.note(*error.problems)
        return None


def check_alone(root: Spot, properties: Collection[Property]) -> None:
    """Note every property that compares with another circuit, where the environment is a circuit."""
    environment = root.value.get("environment")
    if isinstance(environment, dict) and "circuit" in environment:
        for prop in (p for p in properties if p.check in ("equivalent", "realises")):
            message = f"`{prop.check}` compares circuits under inputs that are free; here a circuit drives some"
            root.problem("conflict", message, "not beside `circuit` of the environment", span=prop.span)


def read_environment(spot: Spot, scope: Scope | None) -> Environment | None:
    """The environment, with names checked against `scope`; problems are noted in the document."""
    if table(spot) is None:
        return None
    spot.only(KEYS, "`[environment]`")
    mode = (spot.take("mode", one_of("fundamental", "input-output")) if spot.has("mode") else "fundamental") or ""
    if mode == "input-output" and spot.has("changes"):
        changes = spot.child("changes")
        message = "`changes` has no meaning in input-output mode, where an input changes whenever its guard allows"
        changes.problem("conflict", message, "for fundamental mode only", at_key=True)
    return Environment(
        mode=mode or "fundamental",
        changes=spot.take("changes", one_of("single", "burst", "simultaneous")) or "single",
        assume=spot.take("assume", array_of(expression(scope, inputs_only=True), "expressions")) or (),
        start=spot.take("start", state(scope)) or {},
        guards=spot.take("inputs", lambda inputs: _guards(inputs, scope, mode)) or {},
    )


def _guards(spot: Spot, scope: Scope | None, mode: str) -> dict[str, Guard]:
    guards: dict[str, Guard] = {}
    for line in spot.members() if table(spot) else ():
        if scope and line.name not in scope.inputs:
            unknown(line, line.name, scope.inputs, "input", at_key=True)
        if table(line):
            guards[line.name] = _guard(line, scope, mode)
    return guards


def _guard(line: Spot, scope: Scope | None, mode: str) -> Guard:
    line.only(GUARD_KEYS, "a guard")
    if mode == "fundamental" and line.has("must"):
        must = line.child("must")
        message = "`must` belongs to input-output mode; in fundamental mode the environment may always rest"
        must.problem("conflict", message, "for input-output mode only", at_key=True)
    guard = expression(scope)
    return Guard(
        rises=line.take("rises", guard) or TRUE,
        falls=line.take("falls", guard) or TRUE,
        must=line.take("must", boolean) or False,
    )
