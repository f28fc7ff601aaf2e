"""Runs seen as responses: pieces of a run between one stable total state and the next, by the executable meaning."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from settled.models.circuit import Circuit
from settled.models.components import components
from settled.models.states import Behaviour, Run, Situation, excited, value, walk

LISTED = 32
"""Signals up to which a total state is written out in a sentence."""


def response(behaviour: Behaviour, states: Sequence[int]) -> set[Situation]:
    """Where `states` can end if they are one input change or burst in the first and the response to it; else empty."""
    if len(states) < 2:
        return set()
    now = behaviour.changes_to(Situation(states[0]), states[1])
    for state in states[2:]:
        now = {after for at in now for after in behaviour.responses_to(at, state)}
    return now


def settled(behaviour: Behaviour, states: Sequence[int]) -> bool:
    """Whether `states` are a whole response: its last state is stable with nothing outstanding."""
    return behaviour.is_stable(states[-1]) and any(not at.outstanding for at in response(behaviour, states))


def parting(first: Sequence[int], second: Sequence[int]) -> int:
    """How many states two runs have in common at their beginning."""
    common = 0
    for a, b in zip(first, second, strict=False):
        if a != b:
            break
        common += 1
    return common


def stable_places(behaviour: Behaviour, states: Sequence[int]) -> Iterator[int]:
    """Positions of stable states, the last first."""
    return (i for i in range(len(states) - 1, -1, -1) if behaviour.is_stable(states[i]))


def moved(circuit: Circuit, before: int, after: int) -> list[str]:
    """The inputs and nodes that differ between two total states, as events: `a+`, `b-`."""
    return [f"{s}{'+' if after >> i & 1 else '-'}" for i, s in enumerate(circuit.signals) if (before ^ after) >> i & 1]


def changed_inputs(circuit: Circuit, before: int, after: int) -> str:
    """The inputs that differ between two total states, as events."""
    return ", ".join(moved(circuit, before & circuit.input_mask, after & circuit.input_mask))


def describe(circuit: Circuit, state: int, also: Sequence[str] = ()) -> str:
    """A total state in words: `s=0 r=1 q=0`, nodes of connections left out.

    Of a wide circuit the inputs, the outputs and what is named in `also`, and how many nodes more the run shows.
    """
    signals = [s for s in circuit.signals if ">" not in s]
    shown = signals
    if len(signals) > LISTED:
        shown = list(dict.fromkeys([*circuit.inputs, *circuit.outputs, *also]))
    values = value(circuit, map(circuit.signal, shown), state)
    said = " ".join(f"{s}={v}" for s, v in zip(shown, values, strict=True))
    left = len(set(signals) - set(shown))
    return said + (f" ({left} nodes more in the run)" if left else "")


def excited_throughout(circuit: Circuit, states: Sequence[int]) -> list[str]:
    """Nodes that are excited with the same value in all of `states`: a fair run does not stay among these states."""
    high = low = -1
    for state in states:
        now = excited(circuit, state)
        high, low = high & now & state, low & now & ~state
    return [n for n in circuit.nodes if (high | low) >> circuit.place[n] & 1]


def rounds(behaviour: Behaviour, run: Run) -> list[list[tuple[int, Situation]]]:
    """The ways to go round the loop of a run for ever: connected sets of its positions with their situations."""
    first = run.loop or 0
    following = [*range(1, len(run.states)), first]
    todo = [(first, at) for at in walk(behaviour, run)[first]]
    after: dict[tuple[int, Situation], list[tuple[int, Situation]]] = {}
    while todo:
        here = todo.pop()
        if here not in after:
            place = following[here[0]]
            after[here] = [(place, at) for at in behaviour.moves_to(here[1], run.states[place])]
            todo += after[here]
    return [part for part in components(after) if len(part) > 1 or part[0] in after[part[0]]]
