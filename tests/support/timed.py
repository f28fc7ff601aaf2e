"""A plain simulator of inertial delays, one event time after the other: the second opinion on concrete delays."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Mapping

from settled.models.circuit import Circuit
from settled.models.logic import evaluate

Event = tuple[int, frozenset[str]]
"""A time and what switched at it."""

Delay = Callable[[str, bool, int], int]
"""The delay of a node's rising or falling edge after so many firings of that edge."""


def simulate(
    circuit: Circuit, start: Mapping[str, int], changes: Mapping[int, frozenset[str]], delay: Delay, end: int
) -> list[Event]:
    """Everything that switches until `end` when inputs change as in `changes`, by time, from the state `start`."""
    state = {s: start[s] for s in circuit.signals}
    fired: Counter[tuple[str, bool]] = Counter()
    due: dict[str, int] = {}
    events: list[Event] = []
    time = 0
    while True:
        targets = evaluate(list(circuit.excitation.values()), state)
        for node, target in zip(circuit.excitation, targets, strict=True):
            if target == state[node]:
                due.pop(node, None)
            elif node not in due:
                due[node] = time + delay(node, bool(target), fired[node, bool(target)])
        coming = [*due.values(), *(t for t in changes if t > time)]
        if not coming or min(coming) > end:
            return events
        time = min(coming)
        switching = changes.get(time, frozenset()) | {n for n, t in due.items() if t == time}
        for name in switching:
            state[name] ^= 1
            if name in due:
                del due[name]
                fired[name, bool(state[name])] += 1
        events.append((time, frozenset(switching)))
