"""The `[[property]]` tables: which options there are, and what their values mean."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from itertools import count
from typing import Any

from settled.models.environment import Environment
from settled.models.logic import Expr, evaluate, to_text
from settled.models.problems import nearest
from settled.models.property_files import circuit_table
from settled.models.property_files.flow_table_option import flow_table
from settled.models.property_files.name_scope import Scope, expression, names_among, state
from settled.models.property_files.toml_document import Spot, listed, where
from settled.models.property_files.toml_readers import array_of, boolean, one_of, table, text, whole_number
from settled.models.specification import CircuitSource, Property, Shape


@dataclass(frozen=True)
class Context:
    """What properties are read against; `None` for a part of the file that could not be read."""

    circuit: CircuitSource | None
    environment: Environment | None
    kinds: Mapping[str, Shape]

    @cached_property
    def scope(self) -> Scope | None:
        """The names of the circuit."""
        return Scope.of(self.circuit.netlist) if self.circuit else None


OptionReader = Callable[[Spot, Context], Any]


def _signals(spot: Spot, context: Context) -> tuple[str, ...] | None:
    return names_among(context.scope.signals if context.scope else None, "signal")(spot)


def _nodes(spot: Spot, context: Context) -> tuple[str, ...] | None:
    scope = context.scope
    if scope is None:
        return names_among(None, "node")(spot)
    known = [name for name in scope.signals if scope.net(name) in scope.gate_set]
    names = names_among(known, "node")(spot)
    return None if names is None else tuple(dict.fromkeys(scope.net(name) for name in names))


def _expression(spot: Spot, context: Context) -> Expr | None:
    return expression(context.scope, state_words=True)(spot)


def _circuit(spot: Spot, context: Context) -> CircuitSource | None:
    return circuit_table.circuit(spot)


def _sequence(spot: Spot, context: Context) -> tuple[Mapping[str, int], ...] | None:
    """Input vectors, each of which names every input and satisfies `assume`."""
    vectors = array_of(state(context.scope, inputs_only=True), "tables")(spot)
    if vectors == () and not spot.value:
        spot.problem("bad-value", "`sequence` is empty: at least one input vector is applied", "nothing in it")
    if vectors is not None and context.circuit is not None:
        for member in spot.members():
            if isinstance(member.value, dict):
                _check_vector(member, context.circuit.netlist.inputs, context.environment)
    return vectors


def _check_vector(vector: Spot, inputs: tuple[str, ...], environment: Environment | None) -> None:
    absent = [name for name in inputs if name not in vector.value]
    if absent:
        message = f"a vector of `sequence` must name every input; {listed(absent)} is missing"
        vector.problem("missing-key", message, "not every input")
        return
    values = {name: vector.value[name] for name in inputs}
    if environment is None or any(value not in (0, 1) for value in values.values()):
        return
    for assumption in environment.assume:
        if not evaluate([assumption], values)[0]:
            message = f"a vector of `sequence` violates the assumption `{to_text(assumption)}`"
            vector.problem("violates-assume", message, "never occurs under `assume`")


OPTIONS: Mapping[str, OptionReader] = {
    "signals": _signals,
    "outputs": _signals,
    "except": _nodes,
    "expr": _expression,
    "from": _expression,
    "to": _expression,
    "when": lambda spot, context: one_of("always", "stable")(spot),
    "at-least": lambda spot, context: whole_number(spot),
    "at-most": lambda spot, context: whole_number(spot),
    "sequence": _sequence,
    "table": lambda spot, context: flow_table(spot),
    "transients": lambda spot, context: boolean(spot),
    "to of equivalent": _circuit,
}
"""Reader of each option; `X of CHECK` where an option means something of its own in one check."""


def read_properties(spot: Spot, context: Context) -> tuple[Property, ...]:
    """The properties of the array of tables `[[property]]`; problems are noted in the document."""
    if not isinstance(spot.value, list):
        spot.wrong_type("an array of tables", help="write `[[property]]` with double brackets")
        return ()
    tables = [member for member in spot.members() if table(member)]
    _check_names(tables)
    return _named([read_property(member, context) for member in tables])


def _check_names(tables: list[Spot]) -> None:
    first: dict[str, Spot] = {}
    for name in (spot.child("name") for spot in tables if isinstance(spot.value.get("name"), str)):
        if first.setdefault(name.value, name) is not name:
            note = f"the first one stands at {where(first[name.value].span)}"
            name.problem("duplicate-name", f"two properties are called `{name.value}`", "again", note=note)


def _named(found: list[Property]) -> tuple[Property, ...]:
    """Every property with a name of its own: the check's, numbered, where the file gives none."""
    taken = {prop.name for prop in found}
    free = {check: (name for name in _numbered(check) if name not in taken) for check in {p.check for p in found}}
    return tuple(prop if prop.name else replace(prop, name=next(free[prop.check])) for prop in found)


def _numbered(check: str) -> Iterator[str]:
    yield check
    yield from (f"{check} {number}" for number in count(2))


def read_property(spot: Spot, context: Context) -> Property:
    """One property; its name is empty when the file gives none."""
    name = spot.take("name", text) or ""
    check = spot.take("check", text) or ""
    shape = context.kinds.get(check)
    options = {}
    for member in spot.members():
        reader = OPTIONS.get(f"{member.name} of {check}") or OPTIONS.get(member.name)
        if member.name in ("name", "check") or not _takes(member, check, shape, reader is not None):
            continue
        options[member.name] = reader(member, context) if reader else None
    _check_shape(spot, check, shape, context)
    if shape is not None:
        _check_bounds(spot, options)
        _check_watched(spot, shape, context)
    span = spot.child("check").span if spot.has("check") else spot.span
    kept = {key: value for key, value in options.items() if value is not None}
    return Property(name, check, kept, span, {key: spot.child(key).span for key in kept})


def _takes(option: Spot, check: str, shape: Shape | None, exists: bool) -> bool:
    """Whether the check takes the option; notes a problem if not."""
    if shape is None:
        known = ["name", "check", *OPTIONS]
        if not exists:
            message = f"unknown key `{option.name}` in a property"
            help = nearest(option.name, known)
            option.problem("unknown-key", message, "not an option", at_key=True, help=help)
        return exists
    takes = sorted({*shape.required, *shape.optional})
    if option.name in takes:
        return True
    help = nearest(option.name, [*takes, "name", "check"])
    help = help or (f"its options are {listed(takes)}" if takes else "it takes no options")
    what = "does not take" if exists else "has no option"
    option.problem("unknown-key", f"`{check}` {what} `{option.name}`", "not an option here", at_key=True, help=help)
    return False


def _check_shape(spot: Spot, check: str, shape: Shape | None, context: Context) -> None:
    """The check exists, has all that it needs, and a meaning in the environment's mode."""
    if not spot.has("check"):
        spot.missing("check", "a property", help=f"the checks are {listed(sorted(context.kinds))}")
    elif shape is None and check:
        help = nearest(check, context.kinds) or f"the checks are {listed(sorted(context.kinds))}"
        spot.child("check").problem("unknown-check", f"unknown check `{check}`", "not a check", help=help)
    if shape is None:
        return
    for key in sorted(shape.required):
        if not spot.has(key):
            spot.child("check").problem("missing-key", f"`{check}` needs `{key}`", f"needs `{key}`")
    if shape.mode == "fundamental" and context.environment and context.environment.mode != "fundamental":
        message = f"`{check}` is a property of fundamental mode; this environment is in input-output mode"
        spot.child("check").problem("wrong-mode", message, "has no meaning in input-output mode")


def _check_bounds(spot: Spot, options: Mapping[str, Any]) -> None:
    low, high = options.get("at-least"), options.get("at-most")
    if high is None or (low is None and spot.has("at-least")):
        return
    if high < (1 if low is None else low):
        least = "1, the default" if low is None else str(low)
        message = f"`at-most` is {high}, less than `at-least`, which is {least}"
        spot.child("at-most").problem("bad-value", message, "less than `at-least`")


def _check_watched(spot: Spot, shape: Shape, context: Context) -> None:
    if not shape.watches or context.circuit is None:
        return
    given = spot.has("signals")
    if spot.value["signals"] == [] if given else not context.circuit.netlist.outputs:
        why = "`signals` is empty" if given else "it lists no `signals`, and the circuit has no outputs"
        place = spot.child("signals" if given else "check")
        message = f"`{spot.value['check']}` has nothing to watch: {why}"
        place.problem("nothing-to-watch", message, "nothing to watch", help='list some: `signals = ["..."]`')
