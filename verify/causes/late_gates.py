"""The gate that was late for a hazard.

The *term* is what turned the signal back: of the events that excited its second change (or, for a signal without a
delay of its own, made it) one whose absence would have prevented it, if need be the signal itself. The *late* gate is
found from there backwards, from each event to one that excited it, up to the first that was already due before the
signal changed for the first time: had it come in time, the signal need not have changed. There is none where the way
back leads through the signal itself, which then turned itself back.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from settled.models.states import Behaviour, value
from settled.verify.causes.history import Event, History


def hazard_cause(behaviour: Behaviour, states: Sequence[int], signal: str, begin: int, last: int) -> dict[str, Any]:
    """`term` and `late`, as names and as events, of a signal that changes for the second time at position `last`.

    `begin`: the position of the stable state before the change. `late` is None where there is no late gate.
    """
    circuit = behaviour.circuit
    wave = [value(circuit, [circuit.signal(signal)], state)[0] for state in states[: last + 1]]
    first = next(i for i in range(begin + 1, last) if wave[i] != wave[i - 1])
    history = History(behaviour, states, begin)
    term = min(history.turned(signal, last), key=lambda event: event.name == signal)
    late = _late(history, term, Event(signal, first))
    shown = {"signal": f"{signal}{'+' if wave[first] else '-'}", "term": history.sign(term)}
    if late is not None:
        shown["late"] = history.sign(late)
    return {"term": term.name, "late": late.name if late else None, "events": shown, "step": first}


def _late(history: History, term: Event, first: Event) -> Event | None:
    """The late gate, by the definition above."""
    event = term
    while event.name != first.name:
        causes = [c for c in history.causes(event) if c.step >= first.step and c.step > history.begin + 1]
        if not causes:
            return event
        event = min(causes, key=lambda c: c.name == first.name)
    return None
