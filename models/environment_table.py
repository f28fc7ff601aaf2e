"""The `[environment]` table: how the inputs behave."""

from __future__ import annotations

from settled.models.environment import Environment, Guard
from settled.models.logic import TRUE
from settled.models.name_scope import Scope, expression, state, unknown
from settled.models.toml_document import Spot
from settled.models.toml_readers import array_of, boolean, one_of, table

KEYS = ("mode", "changes", "assume", "start", "inputs")
GUARD_KEYS = ("rises", "falls", "must")


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
