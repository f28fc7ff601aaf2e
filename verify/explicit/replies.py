"""Responses of one circuit to changes of its inputs, many at a time: where they end, and which signals flicker.

A vertex is a total state with, above it, the number of an agenda: what the environment has yet to do. Agenda 0 is
empty; of a burst it is the rest, in the order of arrival; and one that is still to begin waits in a stable state.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np

from settled.encodings.packed import WIDTH, Bits, Packed, Places, TooWide, Words
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Program
from settled.verify.explicit.graph import MANY, Graph
from settled.verify.explicit.hazards import Watch, least_flicker, rest_of_response, still_changing
from settled.verify.explicit.oscillations import least_oscillation
from settled.verify.explicit.races import all_ends
from settled.verify.explicit.serial_steps import SerialSteps
from settled.verify.limits import LimitReached, Limits
from settled.verify.pairing import Schedule

MOST_STEPS = 1_000_000


class Agenda(NamedTuple):
    """The instants to come; `begun` is False while the first is the environment's own choice in a stable state."""

    instants: Schedule = ()
    begun: bool = True


@dataclass(frozen=True)
class Reply:
    """The response to a change of the inputs, from the instant of the first change on.

    * `ends`: the stable total states in which it can end; None when a fair run never settles.
    * `once`, `twice`: the packed sets of watched signals that can still change at least once, at least twice.
    """

    ends: tuple[int, ...] | None
    once: int
    twice: int


class Responding(Packed):
    """A circuit whose inputs change by agendas. Raises `TooWide` beyond 63 bits a vertex."""

    def __init__(self, circuit: Circuit) -> None:
        super().__init__(circuit, Environment())
        self.agendas = [Agenda()]
        self.number = {Agenda(): 0}
        self.shift = np.uint64(self.state_bits)
        self.burst = True

    def word(self, state: int, agenda: Agenda) -> int:
        """The vertex of a total state with an agenda, and of no more instants: those that follow are numbered too."""
        for rest in (agenda, *(Agenda(agenda.instants[i:]) for i in range(1, len(agenda.instants)))):
            if rest not in self.number:
                self.number[rest] = len(self.agendas)
                self.agendas.append(rest)
        self.bits = self.state_bits + (len(self.agendas) - 1).bit_length()
        if self.bits > WIDTH:
            raise TooWide(f"{self.bits} bits a total state; at most {WIDTH} fit")
        return state | self.number[agenda] << self.state_bits

    def outstanding(self, vertices: Words) -> Words:
        """The number of the agenda of each vertex."""
        return vertices >> self.shift

    def allowed(self, vertices: Words) -> Words:
        """No input changes but by an agenda."""
        return np.zeros_like(vertices)

    def ends(self, vertices: Words, excited: Words) -> Bits:
        """Whether a vertex is stable and its agenda empty, or waiting to begin."""
        return (excited == 0) & ~self._arriving[self.outstanding(vertices).astype(np.int64)]

    def changes(self, stable: Words) -> tuple[Places, Words]:
        """Agendas that wait in a stable state begin."""
        place = np.flatnonzero(self._waiting[self.outstanding(stable).astype(np.int64)])
        return place, self._advanced(stable[place])

    def arrivals(self, vertices: Words) -> tuple[Places, Words]:
        """The next instant of an agenda that has begun."""
        place = np.flatnonzero(self._arriving[self.outstanding(vertices).astype(np.int64)])
        return place, self._advanced(vertices[place])

    _arrivals = arrivals

    def _advanced(self, vertices: Words) -> Words:
        number = self.outstanding(vertices).astype(np.int64)
        return (vertices & self.state_mask ^ self._first[number]) | self._rest[number] << self.shift

    def seal(self) -> None:
        """Tables by number of agenda; called once all agendas of a graph are numbered."""
        self._arriving = np.array([a.begun and bool(a.instants) for a in self.agendas])
        self._waiting = np.array([not a.begun for a in self.agendas])
        self._first: Words = np.array([a.instants[0] if a.instants else 0 for a in self.agendas], np.uint64)
        rests = [self.number[Agenda(a.instants[1:])] if a.instants else 0 for a in self.agendas]
        self._rest: Words = np.array(rests, np.uint64)


class Responses(Graph):
    """The graph of responses from given vertices on. Raises `LimitReached` when it cannot be explored to the end.

    With `serial` steps that can be taken apart are left out (see `serial_steps`).
    """

    packed: Responding

    def __init__(self, packed: Responding, limits: Limits, sources: Iterable[int], serial: SerialSteps | None) -> None:
        packed.seal()
        self.serial = serial
        super().__init__(packed, limits, np.unique(np.array(list(sources), np.uint64)))
        if self.unfinished is not None:
            raise LimitReached(self.unfinished)

    def held(self, vertices: Words) -> tuple[Places, Words]:
        """Steps of the nodes alone: what is on the agenda is done in the end, so nothing goes on for ever before."""
        idle = np.flatnonzero(self.packed.outstanding(vertices) == 0)
        here = vertices[idle]
        source, target = self.serial.steps(here, self.packed.excited(here)) if self.serial else super().held(here)
        return idle[source], target

    def steps(self, vertices: Words, excited: Words | None = None) -> tuple[Places, Words]:
        """Steps of the response: of the nodes, and what comes next on the agenda."""
        if self.serial is None:
            return super().steps(vertices, excited)
        source, target = self.serial.steps(vertices, self.packed.excited(vertices) if excited is None else excited)
        place, arrived = self.packed.arrivals(vertices)
        return np.concatenate([source, place]), np.concatenate([target, arrived])

    @cached_property
    def unsettled(self) -> Bits:
        """Whether a fair run from a vertex never settles."""
        marked = np.zeros(len(self), bool)
        fresh = np.unique(np.concatenate([np.zeros(0, np.int64), *self.cores]))
        while len(fresh):
            marked[fresh] = True
            before = np.unique(self.step_edges.into(fresh)[0])
            fresh = before[~marked[before]]
        return marked

    def ends_from(self, vertex: int) -> tuple[int, ...]:
        """The stable total states in which the response from a vertex can end."""
        only = int(self.outcome[vertex])
        found = all_ends(self, vertex) if only == MANY else [only]
        return tuple((self.vertices[found] & self.packed.state_mask).tolist())


class Replies:
    """Responses of one circuit, found in batches and remembered.

    `signals` are watched; `flickers`: whether it matters how often they change.
    """

    def __init__(self, circuit: Circuit, signals: tuple[str, ...], limits: Limits, flickers: bool = False) -> None:
        self.circuit, self.signals, self.limits, self.flickers = circuit, signals, limits, flickers
        self.packed, self._serial = Responding(circuit), SerialSteps(circuit, limits)
        self._program = Program(circuit.resolve(*map(circuit.signal, signals)))
        self._known: dict[tuple[int, Schedule], Reply] = {}
        self._values: dict[int, int] = {}
        self._explored = 0

    def prepare(self, changes: Iterable[tuple[int, Schedule]]) -> None:
        """Find the replies to changes (a stable total state and what changes in it) that are not known yet."""
        wanted = {(state ^ s[0], s[1:]) for state, s in changes}
        fresh = sorted(key for key in wanted if key not in self._known)
        if not fresh:
            return
        words = [self.packed.word(state, Agenda(rest)) for state, rest in fresh]
        graph = Responses(self.packed, self.limits, words, self._serial)
        self._explored += len(graph)
        self.limits.tick(self._explored, 0)
        nothing = np.zeros_like(graph.vertices)
        once, twice = still_changing(graph, Watch(graph, self.signals)) if self.flickers else (nothing, nothing)
        for key, v in zip(fresh, graph.index(np.array(words, np.uint64)).tolist(), strict=True):
            ends = None if graph.unsettled[v] else graph.ends_from(v)
            self._known[key] = Reply(ends, int(once[v]), int(twice[v]))

    def reply(self, state: int, schedule: Schedule) -> Reply:
        """The reply to a change that has been prepared."""
        return self._known[state ^ schedule[0], schedule[1:]]

    def hazards(self, state: int, schedule: Schedule) -> int:
        """The packed set of watched signals that change twice in some run of the response to a change."""
        reply = self.reply(state, schedule)
        after = state ^ schedule[0]
        self.evaluate([state, after])
        moved = self.value(state) ^ self.value(after)
        return moved & reply.once | ~moved & reply.twice

    def evaluate(self, states: Iterable[int]) -> None:
        """Find the values of the watched signals in total states."""
        fresh = sorted({s for s in states if s not in self._values})
        if fresh:
            words = np.array(fresh, np.uint64)
            values = self.packed.mask(self.packed.values(self._program, words), words)
            self._values.update(zip(fresh, values.tolist(), strict=True))

    def value(self, state: int) -> int:
        """The packed values of the watched signals in a total state that has been evaluated."""
        return self._values[state]

    # ---- runs ----------------------------------------------------------------------------------------------------

    def run_to(self, state: int, schedule: Schedule, end: int) -> list[int]:
        """The least run of a response to one of its ends, the state before the change first."""
        graph = self._single(state, schedule)
        return self._states(*graph.least_runs(graph.index(np.array([end], np.uint64))))

    def lasso(self, state: int, schedule: Schedule) -> tuple[list[int], int]:
        """The least run of a response that never settles, and the position at which its last state goes on."""
        graph = self._single(state, schedule)
        found = least_oscillation(graph)
        assert found is not None, "a response that can fail to settle has a run that shows it"
        return self._states(found[0]), found[1]

    def flicker(self, state: int, schedule: Schedule, signals: int) -> tuple[list[int], str, int]:
        """The least run of a response in which one of `signals` changes twice, the signal, and the step."""
        graph = self._single(state, schedule)
        found = least_flicker(graph, Watch(graph, self.signals), signals)
        assert found is not None, "a signal that flickers has a run that shows it"
        path, signal = found
        return self._states(path + rest_of_response(graph, path[-1])), signal, len(path) - 1

    def _single(self, state: int, schedule: Schedule) -> Responses:
        """The response to one change, with all its steps unless they are too many for the shortest run to be found."""
        word = self.packed.word(state, Agenda(schedule, begun=False))
        graph = Responses(self.packed, self.limits, [word], self._serial)
        if np.exp2(np.bitwise_count(graph.excited).astype(np.float64)).sum() > MOST_STEPS:
            return graph
        return Responses(self.packed, self.limits, [word], None)

    def _states(self, path: Sequence[int]) -> list[int]:
        return [word & int(self.packed.state_mask) for word in path]
