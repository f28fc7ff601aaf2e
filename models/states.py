"""Total states, steps and runs: the executable meaning of a circuit in its environment.

This is the meaning that every counterexample is walked through again, written for reading and not for speed: one
state at a time, no solver and no formula shared with the engines. Models: the general multiple winner (`any`) and
general single winner (`one`) models of Brzozowski and Seger, "Asynchronous Circuits", 1995 (recalled).

A total state is packed into an integer: bit `circuit.place[s]` is the value of signal `s`.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import NamedTuple

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, Program, evaluate


class Situation(NamedTuple):
    """A total state and, in burst mode, the inputs that have yet to change (both packed)."""

    state: int
    outstanding: int = 0


@dataclass(frozen=True)
class Run:
    """A sequence of total states; with `loop`, the last state moves to the state at that index, for ever."""

    title: str
    states: tuple[int, ...]
    loop: int | None = None
    circuit: str = ""


def pack(circuit: Circuit, values: Mapping[str, int]) -> int:
    """The packed total state with the given value of every input and node."""
    return sum(1 << i for i, s in enumerate(circuit.signals) if values[s])


def unpack(circuit: Circuit, state: int) -> dict[str, int]:
    """Value of every input and node in a packed total state."""
    return {s: state >> i & 1 for i, s in enumerate(circuit.signals)}


def value(circuit: Circuit, expressions: Iterable[Expr], state: int) -> list[int]:
    """Values of expressions (definitions, `stable` and `excited` allowed) in a total state."""
    return evaluate(circuit.resolve(*expressions), unpack(circuit, state))


@lru_cache(maxsize=100_000)
def excited(circuit: Circuit, state: int) -> int:
    """The packed set of nodes whose excitation differs from their value."""
    values = unpack(circuit, state)
    targets = circuit.targets.run(values)
    return sum(1 << circuit.place[n] for n, t in zip(circuit.excitation, targets, strict=True) if t != values[n])


def subsets(mask: int) -> Iterator[int]:
    """The non-empty subsets of a packed set, in increasing order."""
    part = 0
    while (part := (part - mask) & mask) != 0:
        yield part


def members(mask: int) -> Iterator[int]:
    """The single members of a packed set, as packed sets."""
    while mask:
        yield mask & -mask
        mask &= mask - 1


def choices(mask: int, winners: str) -> Iterator[int]:
    """What may switch in one step when the members of `mask` may: any non-empty part, or exactly one."""
    return subsets(mask) if winners == "any" else members(mask)


def switchings(circuit: Circuit, mask: int) -> Iterator[int]:
    """What may switch in one step of a circuit when the members of `mask` may: not both nodes of an exclusive pair."""
    parts, pairs = choices(mask, circuit.winners), circuit.pairs
    return (part for part in parts if all(part & pair != pair for pair in pairs)) if pairs else parts


def successors(circuit: Circuit, state: int) -> Iterator[int]:
    """The total states that one step reaches while the inputs are held: each node holds or follows."""
    for switching in switchings(circuit, excited(circuit, state)):
        yield state ^ switching


class Behaviour:
    """A circuit in its environment: where runs begin and what one step may do."""

    def __init__(self, circuit: Circuit, environment: Environment) -> None:
        self.circuit, self.environment = circuit, environment
        self.admits = lru_cache(maxsize=100_000)(self._admits)

    @cached_property
    def _assume(self) -> Program:
        return Program(self.circuit.resolve(*self.environment.assume))

    @cached_property
    def _guards(self) -> Program:
        guards = map(self.environment.guard, self.circuit.inputs)
        return Program(self.circuit.resolve(*(e for guard in guards for e in (guard.rises, guard.falls))))

    def _admits(self, vector: int) -> bool:
        return all(self._assume.run(unpack(self.circuit, vector)))

    def excited(self, state: int) -> int:
        """The packed set of excited nodes."""
        return excited(self.circuit, state)

    def is_stable(self, state: int) -> bool:
        """Whether no node is excited."""
        return self.excited(state) == 0

    def may_start(self, state: int) -> bool:
        """Whether runs may begin in `state`."""
        wanted = self.environment.start
        present = value(self.circuit, [self.circuit.signal(s) for s in wanted], state)
        fits = present == [int(v) for v in wanted.values()] and self.admits(state & self.circuit.input_mask)
        return fits and (self.environment.mode == "input-output" or self.is_stable(state))

    def allowed(self, state: int) -> int:
        """The packed set of inputs whose guard lets them change in `state`."""
        guards = self._guards.run(unpack(self.circuit, state))
        return sum(1 << i for i in range(len(self.circuit.inputs)) if guards[2 * i + (state >> i & 1)])

    def finishes(self, vector: int, outstanding: int) -> bool:
        """Whether the outstanding inputs can change one after the other with every vector admitted."""
        if not outstanding:
            return True
        return any(
            self.admits(vector ^ bit) and self.finishes(vector ^ bit, outstanding ^ bit) for bit in members(outstanding)
        )

    def arrivals(self, at: Situation) -> Iterator[tuple[int, int]]:
        """Outstanding inputs that may change next, each with what is then outstanding."""
        vector = at.state & self.circuit.input_mask
        for bit in members(at.outstanding):
            if self.admits(vector ^ bit) and self.finishes(vector ^ bit, at.outstanding ^ bit):
                yield bit, at.outstanding ^ bit

    def changes(self, at: Situation) -> Iterator[Situation]:
        """What the environment may do of its own accord in a stable total state in fundamental mode."""
        if self.environment.mode != "fundamental" or at.outstanding or not self.is_stable(at.state):
            return
        how = self.environment.changes
        vector = at.state & self.circuit.input_mask
        for chosen in choices(self.allowed(at.state), "one" if how == "single" else "any"):
            if how != "burst":
                if self.admits(vector ^ chosen):
                    yield Situation(at.state ^ chosen)
            else:
                for bit, rest in self.arrivals(Situation(at.state, chosen)):
                    yield Situation(at.state ^ bit, rest)

    def moves_to(self, at: Situation, state: int) -> set[Situation]:
        """The situations with this total state that one step reaches: those of `moves`, the others not listed."""
        if self.environment.mode != "input-output":
            return self.responses_to(at, state) | self.changes_to(at, state)
        movers = self.excited(at.state) | self.allowed(at.state)
        lawful = self._lawful(at.state ^ state, movers) and self.admits(state & self.circuit.input_mask)
        return {Situation(state)} if lawful else set()

    def responses_to(self, at: Situation, state: int) -> set[Situation]:
        """Those of `responses` with this total state."""
        arrived = (at.state ^ state) & self.circuit.input_mask
        switched = at.state ^ state ^ arrived
        alone = not switched or self._lawful(switched, self.excited(at.state))
        if not alone or (switched and arrived and self.circuit.winners == "one"):
            return set()
        if not arrived:
            return {Situation(state, at.outstanding)} if switched else set()
        return {Situation(state, rest) for bit, rest in self.arrivals(at) if bit == arrived}

    def changes_to(self, at: Situation, state: int) -> set[Situation]:
        """Those of `changes` with this total state."""
        moved = at.state ^ state
        one = moved.bit_count() == 1
        if not moved or moved & ~self.allowed(at.state) or not (one or self.environment.changes == "simultaneous"):
            return set()
        if self.environment.changes == "burst":
            return {after for after in self.changes(at) if after.state == state}
        begins = self.environment.mode == "fundamental" and not at.outstanding and self.is_stable(at.state)
        return {Situation(state)} if begins and self.admits(state & self.circuit.input_mask) else set()

    def _lawful(self, switched: int, movers: int) -> bool:
        """Whether these, all at once, may be the switchings of one step when `movers` may switch."""
        some = switched and not switched & ~movers and all(switched & pair != pair for pair in self.circuit.pairs)
        return bool(some) and (self.circuit.winners == "any" or switched.bit_count() == 1)

    def held(self, at: Situation) -> Iterator[Situation]:
        """Steps of the nodes alone."""
        for switching in switchings(self.circuit, self.excited(at.state)):
            yield Situation(at.state ^ switching, at.outstanding)

    def responses(self, at: Situation) -> Iterator[Situation]:
        """Steps of the response to a change: of the nodes, and arrivals that are outstanding."""
        yield from self.held(at)
        switching = self.excited(at.state)
        for bit, rest in self.arrivals(at):
            yield Situation(at.state ^ bit, rest)
            if self.circuit.winners == "any":
                for part in switchings(self.circuit, switching):
                    yield Situation(at.state ^ bit ^ part, rest)

    def free(self, at: Situation) -> Iterator[Situation]:
        """Steps in input-output mode: nodes and inputs alike."""
        moving = self.excited(at.state) | self.allowed(at.state)
        for switching in switchings(self.circuit, moving):
            if self.admits((at.state ^ switching) & self.circuit.input_mask):
                yield Situation(at.state ^ switching)

    def moves(self, at: Situation) -> Iterator[Situation]:
        """Every situation that one step reaches."""
        if self.environment.mode == "input-output":
            yield from self.free(at)
        else:
            yield from self.responses(at)
            yield from self.changes(at)


def walk(behaviour: Behaviour, run: Run, anywhere: bool = False) -> list[set[Situation]]:
    """Walk a run: for each of its states the situations it can be in. Raises `ValueError` where it is no run.

    `anywhere` drops the demand that the run begins in a start state.
    """
    first = run.states[0]
    if not anywhere and not behaviour.may_start(first):
        raise ValueError("the run does not begin in a start state")
    now = {Situation(first)}
    seen = [now]
    for i, state in enumerate(run.states[1:], 1):
        now = {after for at in now for after in behaviour.moves_to(at, state)}
        if not now:
            raise ValueError(f"no lawful move leads to step {i} of the run")
        seen.append(now)
    if run.loop is not None and not any(behaviour.moves_to(at, run.states[run.loop]) for at in now):
        raise ValueError("no lawful move closes the loop of the run")
    return seen
