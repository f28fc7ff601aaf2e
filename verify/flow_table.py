"""The flow table of a circuit: what it does as seen from outside, compatible rows merged."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import pairwise

from settled.encodings.packed import TooWide
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.flow_table import Entry, FlowTable
from settled.models.logic import support
from settled.models.problems import InputError, Problem
from settled.verify.engines.pair_search import Original
from settled.verify.explicit.starts import starts
from settled.verify.limits import LimitReached, Limits
from settled.verify.questions import Differs, Task
from settled.verify.responses import changed_inputs, describe

MOST_INPUTS, MOST_ROWS = 6, 400

Place = tuple[int, int]
"""An internal state, packed, and an input vector."""


@dataclass
class Behaved:
    """Where the circuit goes: by place the internal state after settling, and the outputs where it is stable.

    `strict`: what is not specified must stay so, for guards forbid it that the table cannot tell.
    """

    after: dict[Place, int] = field(default_factory=dict)
    outputs: dict[Place, tuple[int, ...]] = field(default_factory=dict)
    vectors: int = 0
    strict: bool = False


def flow_table(circuit: Circuit, environment: Environment, limits: Limits) -> FlowTable:
    """The reduced flow table of what is reachable. Changes that cannot happen are not specified.

    Raises `InputError` for a circuit that has none: too large, with an open outcome, or under bursts.
    """
    _check(circuit, environment)
    try:
        behaved = _explore(circuit, environment, limits)
    except (LimitReached, TooWide) as reached:
        raise InputError(_no_table(circuit, f"it cannot be explored: {reached}")) from None
    rows = sorted({state for state, _ in behaved.outputs})
    if not rows:
        raise InputError(_no_table(circuit, "no stable total state satisfies `start` and `assume`"))
    if len(rows) > MOST_ROWS:
        raise InputError(_no_table(circuit, f"it has {len(rows)} internal states, and at most {MOST_ROWS} are merged"))
    return _table(circuit, behaved, _merge(rows, behaved))


def _no_table(circuit: Circuit, why: str, help: str = "") -> Problem:
    return Problem("no-flow-table", f"`{circuit.name}` has no flow table to print: {why}", help=help)


def _check(circuit: Circuit, environment: Environment) -> None:
    if environment.mode != "fundamental" or environment.changes == "burst":
        help = "a flow table speaks of inputs that change in one instant: `single` or `simultaneous`"
        raise InputError(_no_table(circuit, "its inputs change while it moves", help))
    if not 0 < len(circuit.inputs) <= MOST_INPUTS:
        raise InputError(
            _no_table(circuit, f"it has {len(circuit.inputs)} inputs, and 1 to {MOST_INPUTS} can be printed")
        )


def _explore(circuit: Circuit, environment: Environment, limits: Limits) -> Behaved:
    original = Original(Task(circuit, environment, limits), Differs(circuit, circuit.outputs))
    width = len(circuit.inputs)
    found = Behaved(vectors=1 << width, strict=_guards_read_nodes(circuit, environment))
    layer: list[int] = starts(original.guards, limits).tolist()
    seen = set(layer)
    while layer:
        original.evaluate(layer)
        changes = original.changes(layer)
        original.prepare((state, s) for state in layer for s in changes[state])
        fresh: set[int] = set()
        for state in layer:
            here = (state >> width, state & circuit.input_mask)
            found.after[here] = here[0]
            found.outputs[here] = tuple(original.value(state) >> i & 1 for i in range(len(circuit.outputs)))
            for (instant,) in changes[state]:
                end = _one_end(original, state, instant)
                found.after[here[0], here[1] ^ instant] = end >> width
                fresh.add(end)
        layer = sorted(fresh - seen)
        seen |= fresh
        limits.tick(len(seen), 0)
    return found


def _guards_read_nodes(circuit: Circuit, environment: Environment) -> bool:
    read = support(*(e for guard in environment.guards.values() for e in (guard.rises, guard.falls)))
    return not {*circuit.inputs, *circuit.outputs}.issuperset(read)


def _one_end(original: Original, state: int, instant: int) -> int:
    ends = original.reply(state, (instant,)).ends
    if ends is not None and len(ends) == 1:
        return ends[0]
    circuit = original.circuit
    change = changed_inputs(circuit, state, state ^ instant)
    open_, ask = ("need not settle", "settles") if ends is None else ("can end in several states", "race-free")
    why = f"after {change} from {describe(circuit, state)} it {open_}"
    raise InputError(_no_table(circuit, why, f"`{ask}` shows how"))


def _merge(rows: Sequence[int], behaved: Behaved) -> dict[int, int]:
    """The class of each row: compatible rows are put together one after the other, as far as that is consistent.

    Rows are compatible when no sequence of changes that both specify tells them apart (Paull and Unger 1959,
    "Minimizing the number of states in incompletely specified sequential switching functions", recalled).
    """
    classes = {row: row for row in rows}
    for row in rows:
        for other in sorted({classes[r] for r in rows if r < row} - {classes[row]}):
            together = _together(classes, row, other, behaved)
            if together is not None:
                classes = together
                break
    number = {name: i for i, name in enumerate(dict.fromkeys(classes[row] for row in rows))}
    return {row: number[name] for row, name in classes.items()}


def _together(classes: dict[int, int], one: int, other: int, behaved: Behaved) -> dict[int, int] | None:
    """The classes with two rows put together and all that follows from it; None when outputs would clash."""
    found, todo = dict(classes), [(one, other)]
    while todo:
        first, second = sorted(found[row] for row in todo.pop())
        if first == second:
            continue
        found.update({row: first for row, name in found.items() if name == second})
        members = [row for row, name in found.items() if name == first]
        for vector in range(behaved.vectors):
            after = [behaved.after[row, vector] for row in members if (row, vector) in behaved.after]
            if len({behaved.outputs[row, vector] for row in after}) > 1:
                return None
            if behaved.strict and 0 < len(after) < len(members):
                return None
            todo += pairwise(after)
    return found


def _table(circuit: Circuit, behaved: Behaved, classes: dict[int, int]) -> FlowTable:
    names = {number: _name(number) for number in sorted(set(classes.values()))}
    unspecified = Entry(None, (None,) * len(circuit.outputs))
    entries = {(names[c], v): unspecified for c in names for v in range(1 << len(circuit.inputs))}
    for (row, vector), after in behaved.after.items():
        to, stable = names[classes[after]], classes[after] == classes[row]
        outputs = behaved.outputs[after, vector] if stable else unspecified.outputs
        entries[names[classes[row]], vector] = Entry(to, outputs)
    notes = []
    for number, name in names.items():
        states = [describe_internal(circuit, row) for row, c in classes.items() if c == number]
        notes.append(f"{name}: {'; '.join(states[:4])}{'; ...' if len(states) > 4 else ''}")
    return FlowTable(circuit.name, circuit.inputs, circuit.outputs, tuple(names.values()), entries, tuple(notes))


def _name(number: int) -> str:
    """a, b, ..., z, aa, ab, ..."""
    letters = ""
    number += 1
    while number:
        number, digit = divmod(number - 1, 26)
        letters = chr(ord("a") + digit) + letters
    return letters


def describe_internal(circuit: Circuit, row: int) -> str:
    """An internal state in words."""
    return " ".join(f"{n}={row >> i & 1}" for i, n in enumerate(circuit.nodes) if ">" not in n)
