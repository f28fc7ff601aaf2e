"""Responses by one schedule, many at a time, for circuits of any width: all gates fast, feedback lines slow.

The schedule is a lawful fair run under either winner rule: nodes outside a cut of the loops switch until each has the
value of its function; then one excited line of the cut switches; and so on, the lines in turn. Where a response has one
end only, this run comes to it; where a response may have several, it shows one of them. A later member of a burst
arrives when the circuit has come to rest.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from heapq import heappop, heappush

import numpy as np

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Program
from settled.models.states import Behaviour, excited
from settled.verify.explicit.replies import Reply
from settled.verify.explicit.starts import order_without
from settled.verify.limits import LimitReached, Limits
from settled.verify.pairing import Schedule, schedules

BATCH = 1 << 14
ROUNDS = 64
"""How often each line of the cut may switch in a response before it is taken for one that does not settle."""


class Schedules:
    """A circuit whose loops are cut: the nodes of `cut`, and all others in an order in which none reads a later one.

    A node is evaluated again only when something that it reads has changed.
    """

    def __init__(self, circuit: Circuit, cut: Sequence[str]) -> None:
        self.circuit, self.cut = circuit, tuple(cut)
        self._order = [*order_without(circuit, cut), *cut]
        self._fast = len(self._order) - len(self.cut)
        self._programs = [Program([circuit.excitation[n]]) for n in self._order]
        self._readers: dict[str, list[int]] = {s: [] for s in circuit.signals}
        for i, program in enumerate(self._programs):
            for signal in program.reads:
                self._readers[signal].append(i)

    def settle(self, values: dict[str, int], cases: int, changed: Iterable[str]) -> Iterator[list[tuple[str, int]]]:
        """Let the values of all signals come to rest after some have changed, one bit for each case.

        Gives what switches, step by step. Raises `LimitReached` when some case goes on for too long.
        """
        queue = sorted({i for s in changed for i in self._readers[s]})
        waiting: dict[int, int] = {}
        for turn in range(ROUNDS * len(self.cut) + 1):
            yield from self._follow(values, cases, queue, waiting)
            if not waiting:
                return
            switched = list(self._in_turn(values, waiting, turn))
            yield switched
            queue = sorted({i for n, _ in switched for i in (*self._readers[n], self._place(n))})
        raise LimitReached("a response by one schedule does not come to rest")

    def _place(self, line: str) -> int:
        return self._fast + self.cut.index(line)

    def _follow(
        self, values: dict[str, int], cases: int, queue: list[int], waiting: dict[int, int]
    ) -> Iterator[list[tuple[str, int]]]:
        """Evaluate what stands in the queue, and all that follows; `waiting`: excited lines of the cut."""
        known = set(queue)
        while queue:
            i = heappop(queue)
            known.discard(i)
            n = self._order[i]
            moved = self._programs[i].run(values, cases)[0] ^ values[n]
            if i >= self._fast:
                waiting[i] = moved
                if not moved:
                    del waiting[i]
            elif moved:
                values[n] ^= moved
                yield [(n, moved)]
                for reader in self._readers[n]:
                    if reader not in known:
                        known.add(reader)
                        heappush(queue, reader)

    def _in_turn(self, values: dict[str, int], waiting: Mapping[int, int], first: int) -> Iterator[tuple[str, int]]:
        """In each case one excited line of the cut switches, the search for it beginning at another one each time."""
        done = 0
        for k in range(len(self.cut)):
            place = self._fast + (first + k) % len(self.cut)
            moved = waiting.get(place, 0) & ~done
            if moved:
                values[self._order[place]] ^= moved
                done |= moved
                yield self._order[place], moved


class ScheduledReplies:
    """Responses of one circuit, one run each, found in batches and remembered. `signals`: the compared outputs."""

    def __init__(
        self, schedules_of: Schedules, environment: Environment, signals: Sequence[str], limits: Limits
    ) -> None:
        self.circuit, self.limits, self._schedules_of = schedules_of.circuit, limits, schedules_of
        self.behaviour = Behaviour(self.circuit, environment)
        self._outputs = Program(self.circuit.resolve(*map(self.circuit.signal, signals)))
        guards = [environment.guard(x) for x in self.circuit.inputs]
        self._guards = Program(self.circuit.resolve(*(e for g in guards for e in (g.rises, g.falls))))
        self._schedules = schedules(environment.changes, self.behaviour.admits, limits)
        self._known: dict[tuple[int, Schedule], int] = {}
        self._values: dict[int, int] = {}
        self._care = (1 << len(signals)) - 1

    def prepare(self, changes: Iterable[tuple[int, Schedule]]) -> None:
        """Find the replies to changes that are not known yet. Raises `LimitReached` where one does not come to rest."""
        fresh = sorted({change for change in changes if change not in self._known})
        for start in range(0, len(fresh), BATCH):
            self.limits.check("in simulation by one schedule")
            batch = fresh[start : start + BATCH]
            self._known.update(zip(batch, self._simulate(batch), strict=True))

    def _simulate(self, changes: Sequence[tuple[int, Schedule]]) -> list[int]:
        cases = (1 << len(changes)) - 1
        values = self._words([state for state, _ in changes])
        for i in range(max(len(s) for _, s in changes)):
            moved = turned([s[i] if i < len(s) else 0 for _, s in changes], len(self.circuit.inputs))
            for x, word in zip(self.circuit.inputs, moved, strict=True):
                values[x] ^= word
            for _ in self._schedules_of.settle(values, cases, self.circuit.inputs):
                pass
        return turned([values[s] for s in self.circuit.signals], len(changes))

    def _words(self, states: Sequence[int]) -> dict[str, int]:
        """For each signal the word of its values, one bit for each total state."""
        return dict(zip(self.circuit.signals, turned(states, len(self.circuit.signals)), strict=True))

    def reply(self, state: int, schedule: Schedule) -> Reply:
        """The end of the one run of the response to a change that has been prepared."""
        return Reply((self._known[state, schedule],), 0, 0)

    def hazards(self, state: int, schedule: Schedule) -> int:
        """Not answered here: transients are compared by search."""
        raise LimitReached("one schedule shows no transients")

    def evaluate(self, states: Iterable[int]) -> None:
        """Find the values of the compared outputs in total states."""
        fresh = sorted({s for s in states if s not in self._values})
        rows = self._outputs.run(self._words(fresh), (1 << len(fresh)) - 1)
        self._values.update(zip(fresh, turned(rows, len(fresh)), strict=True))

    def value(self, state: int) -> int:
        """The packed values of the compared outputs in a total state that has been evaluated."""
        return self._values[state]

    def care(self, _: int) -> int:
        """Every output matters in every state."""
        return self._care

    def changes(self, states: Sequence[int]) -> Mapping[int, Sequence[Schedule]]:
        """For each stable total state the changes that guards and assumptions allow."""
        values, cases = self._words(states), (1 << len(states)) - 1
        guards = self._guards.run(values, cases)
        willing = [
            values[x] & guards[2 * i + 1] | ~values[x] & guards[2 * i] for i, x in enumerate(self.circuit.inputs)
        ]
        mask = self.circuit.input_mask
        allowed = turned(willing, len(states))
        return {s: self._schedules(s & mask, a) for s, a in zip(states, allowed, strict=True)}

    def run(self, state: int, schedule: Schedule) -> list[int]:
        """The run of a response, the state before the change first."""
        run = [state]
        place = self.circuit.place
        for instant in schedule:
            run.append(run[-1] ^ instant)
            values = {s: run[-1] >> i & 1 for s, i in place.items()}
            for switched in self._schedules_of.settle(values, 1, self.circuit.inputs):
                run.append(run[-1] ^ sum(1 << place[n] for n, moved in switched if moved))
        return run

    def run_to(self, state: int, schedule: Schedule, end: int) -> list[int]:
        """The run of a response that has been found to end there; that of all nodes at once, where it does, too."""
        run = self.run(state, schedule)
        assert run[-1] == end, "the same schedule comes to the same end"
        at_once = self._at_once(state, schedule, len(run))
        return at_once if at_once[-1] == end else run

    def _at_once(self, state: int, schedule: Schedule, most: int) -> list[int]:
        """A run in which every excited node switches in every step, cut off after so many states."""
        run = [state]
        if self.circuit.winners == "one" or self.circuit.exclusive:
            return run
        for instant in schedule:
            run.append(run[-1] ^ instant)
            while len(run) < most and (moved := excited(self.circuit, run[-1])):
                run.append(run[-1] ^ moved)
        return run

    def lasso(self, state: int, schedule: Schedule) -> tuple[list[int], int]:
        """Never asked: each reply has an end."""
        raise AssertionError("a reply by one schedule has an end")


def turned(rows: Sequence[int], width: int) -> list[int]:
    """The matrix of bits turned over: of numbers of `width` bits, for each bit the word of its values."""
    if not rows or not width:
        return [0] * width
    size, mask = (width + 7) // 8, (1 << width) - 1
    raw = np.frombuffer(b"".join((r & mask).to_bytes(size, "little") for r in rows), np.uint8).reshape(len(rows), size)
    bits = np.unpackbits(raw, axis=1, count=width, bitorder="little")
    columns = np.packbits(bits, axis=0, bitorder="little").T
    return [int.from_bytes(column.tobytes(), "little") for column in columns]
