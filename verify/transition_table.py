"""The transition table of a circuit: for every total state the next internal state, all excited nodes following."""

from __future__ import annotations

from dataclasses import dataclass

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.problems import InputError, Problem
from settled.models.states import Behaviour, pack, value

MOST_NODES, MOST_INPUTS = 6, 4

Values = tuple[int, ...]


@dataclass(frozen=True)
class Entry:
    """One total state: the next internal state, whether it is the present one, and the present outputs."""

    after: Values
    stable: bool
    outputs: Values


@dataclass(frozen=True)
class TransitionTable:
    """Columns are input vectors, rows internal states, both in Gray order; values in the order of the names.

    `entries[row][column]` is None where the assumptions forbid the input vector.
    """

    circuit: Circuit
    columns: tuple[Values, ...]
    rows: tuple[Values, ...]
    entries: tuple[tuple[Entry | None, ...], ...]


def transition_table(circuit: Circuit, environment: Environment) -> TransitionTable:
    """The table of all total states, reachable or not. Raises `InputError` for a circuit too large to print."""
    problems = _too_large(circuit)
    if problems:
        raise InputError(problems)
    behaviour = Behaviour(circuit, environment)
    vectors, states = gray(len(circuit.inputs)), gray(len(circuit.nodes))
    entries = tuple(tuple(_entry(behaviour, vector, state) for vector in vectors) for state in states)
    return TransitionTable(circuit, vectors, states, entries)


def gray(bits: int) -> tuple[Values, ...]:
    """All vectors of so many bits, neighbours differing in one: 00 01 11 10."""
    codes = [i ^ i >> 1 for i in range(1 << bits)]
    return tuple(tuple(code >> place & 1 for place in reversed(range(bits))) for code in codes)


def _entry(behaviour: Behaviour, vector: Values, present: Values) -> Entry | None:
    circuit = behaviour.circuit
    state = pack(circuit, dict(zip(circuit.signals, vector + present, strict=True)))
    if not behaviour.admits(state & circuit.input_mask):
        return None
    after = tuple(value(circuit, circuit.excitation.values(), state))
    outputs = tuple(value(circuit, [circuit.signal(s) for s in circuit.outputs], state))
    return Entry(after, after == present, outputs)


def _too_large(circuit: Circuit) -> list[Problem]:
    found = []
    for number, most, what in (
        (len(circuit.nodes), MOST_NODES, "nodes"),
        (len(circuit.inputs), MOST_INPUTS, "inputs"),
    ):
        if number > most:
            message = f"{circuit.name} has {number} {what} under {circuit.delay} delays; a table holds at most {most}"
            fewer = what == "nodes" and circuit.delay != "feedback"
            help = 'with `delay = "feedback"` only the feedback lines are nodes' if fewer else ""
            found.append(Problem("too-large", message, help=help))
    return found
