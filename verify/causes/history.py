"""What excited what: the events of a run, each with those that led to it.

A node is excited in a state and was not in the state before: of what switched in between and is read by the node, those
events excited it without any one of which it would not be excited; all of them where no single one counts. They come
in the order of their names.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import NamedTuple

from settled.models.logic import support
from settled.models.states import Behaviour, value


class Event(NamedTuple):
    """An input or node that switches, or is due to switch, in a step of a run (the step that leads to that state)."""

    name: str
    step: int


class History:
    """What excited what in one response: `states` of a run, the response beginning after the state at `begin`."""

    def __init__(self, behaviour: Behaviour, states: Sequence[int], begin: int) -> None:
        self.behaviour, self.circuit = behaviour, behaviour.circuit
        self.states, self.begin = states, begin

    def sign(self, event: Event) -> str:
        """The event as the trade writes it: `a+` or `a-`."""
        return f"{event.name}{'-' if self._value(event.name, event.step - 1) else '+'}"

    def since(self, event: Event) -> int:
        """The position from which on a node is excited to switch as it does."""
        place = event.step - 1
        while place > self.begin and self._due(event, place - 1):
            place -= 1
        return place

    def causes(self, event: Event) -> list[Event]:
        """The events that excited a node; none for an input."""
        since = self.since(event)
        if event.name in self.circuit.inputs or since == self.begin:
            return []
        bit = 1 << self.circuit.place[event.name]
        reads = support(self.circuit.excitation[event.name])
        return self._needed(reads, since, lambda state: bool(self.behaviour.excited(state) & bit))

    def turned(self, signal: str, step: int) -> list[Event]:
        """The events that made a signal change in a step, or excited the node that it is to do so."""
        if signal in self.circuit.nodes:
            return self.causes(Event(signal, step))
        (expression,) = self.circuit.resolve(self.circuit.signal(signal))
        new = value(self.circuit, [expression], self.states[step])
        return self._needed(support(expression), step, lambda state: value(self.circuit, [expression], state) == new)

    def ancestors(self, event: Event) -> dict[Event, int]:
        """The event and all that led to it, each with how many events back it is."""
        back, fresh = {event: 0}, [event]
        for here in fresh:
            for cause in self.causes(here):
                if cause not in back:
                    back[cause] = back[here] + 1
                    fresh.append(cause)
        return back

    def _needed(self, reads: Sequence[str], step: int, holds: Callable[[int], bool]) -> list[Event]:
        moved = self.states[step] ^ self.states[step - 1]
        found = [s for s in sorted(reads) if moved >> self.circuit.place[s] & 1]
        alone = [s for s in found if not holds(self.states[step] ^ 1 << self.circuit.place[s])]
        return [Event(s, step) for s in alone or found]

    def _value(self, name: str, place: int) -> int:
        return self.states[place] >> self.circuit.place[name] & 1

    def _due(self, event: Event, place: int) -> bool:
        excited = self.behaviour.excited(self.states[place]) >> self.circuit.place[event.name] & 1
        return bool(excited) and self._value(event.name, place) == self._value(event.name, event.step - 1)
