"""A circuit and its environment over numpy words: thousands of packed total states at once.

A vertex is one unsigned 64-bit word: the inputs, then the nodes, then (burst mode) the inputs that are outstanding.
The same rules as in `settled.models.states`, written a second time and for speed.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, Program

Words = npt.NDArray[np.uint64]
Bits = npt.NDArray[np.bool_]
Places = npt.NDArray[np.int64]

WIDTH = 63
PLACES = np.left_shift(1, np.arange(8)).astype(np.uint8)
BURST_INPUTS = 12


class TooWide(Exception):
    """The circuit has more inputs and nodes than fit into a word."""


class Packed:
    """Vectorised meaning of a circuit in its environment. Raises `TooWide` beyond 63 bits a vertex."""

    def __init__(self, circuit: Circuit, environment: Environment) -> None:
        self.circuit, self.environment = circuit, environment
        self.inputs, self.nodes = len(circuit.inputs), len(circuit.nodes)
        self.fundamental = environment.mode == "fundamental"
        self.burst = self.fundamental and environment.changes == "burst"
        self.state_bits = self.inputs + self.nodes
        self.bits = self.state_bits + (self.inputs if self.burst else 0)
        if self.bits > WIDTH:
            raise TooWide(f"{self.bits} bits a total state; at most {WIDTH} fit")
        if self.burst and environment.assume and self.inputs > BURST_INPUTS:
            raise TooWide(f"bursts of {self.inputs} inputs under assumptions; at most {BURST_INPUTS} inputs fit")
        self.input_mask = np.uint64((1 << self.inputs) - 1)
        self.state_mask = np.uint64((1 << self.state_bits) - 1)
        self.node_mask = self.state_mask ^ self.input_mask
        self._targets = Program([circuit.excitation[n] for n in circuit.nodes])
        self._assume = Program(circuit.resolve(*environment.assume))
        guards = [environment.guard(name) for name in circuit.inputs]
        self._rises = Program(circuit.resolve(*(g.rises for g in guards)))
        self._falls = Program(circuit.resolve(*(g.falls for g in guards)))

    def values(self, program: Program, vertices: Words) -> list[Any]:
        """Values of a program's roots in each vertex, as arrays of bits (or one bit for a constant)."""
        rows = bits_of(vertices)
        return program.run_in_order([rows[self.circuit.place[s]] for s in program.reads], np.True_)

    def mask(self, bits: Sequence[Any], vertices: Words, shift: int = 0) -> Words:
        """Pack arrays of bits into words, the first at position `shift`."""
        rows = np.zeros((64, len(vertices)), bool)
        for i, column in enumerate(bits):
            rows[i + shift] = column
        return words_of(rows)

    def holds(self, expressions: Iterable[Expr], vertices: Words) -> Bits:
        """Whether all `expressions` (over any signals) are true in each vertex."""
        program = Program(self.circuit.resolve(*expressions))
        return self._all(program, vertices)

    def _all(self, program: Program, vertices: Words) -> Bits:
        result = np.ones(len(vertices), bool)
        for column in self.values(program, vertices):
            result &= column
        return result

    def excited(self, vertices: Words) -> Words:
        """The packed set of excited nodes of each vertex."""
        targets = self.mask(self.values(self._targets, vertices), vertices, self.inputs)
        return (targets ^ vertices) & self.node_mask

    def movers(self, excited: Words) -> Words:
        """The packed set of nodes that may switch, of those that are excited, for each vertex."""
        return excited

    def admits(self, vertices: Words) -> Bits:
        """Whether the input vector of each vertex satisfies the assumptions."""
        return self._all(self._assume, vertices)

    def allowed(self, vertices: Words) -> Words:
        """The packed set of inputs whose guard lets them change, for each vertex."""
        rises = self.mask(self.values(self._rises, vertices), vertices)
        falls = self.mask(self.values(self._falls, vertices), vertices)
        return ((rises & ~vertices) | (falls & vertices)) & self.input_mask

    def outstanding(self, vertices: Words) -> Words:
        """The packed set of inputs that have yet to change, for each vertex."""
        return vertices >> np.uint64(self.state_bits) if self.burst else np.zeros_like(vertices)

    # ---- steps ---------------------------------------------------------------------------------------------------

    def held(self, vertices: Words, movers: Words) -> tuple[Places, Words]:
        """Steps in which some of `movers` switch: (index of the source, target) of each."""
        if self.circuit.winners == "one":
            return one_of(vertices, movers)
        source, target = parts_of(vertices, movers)
        if not self.circuit.pairs:
            return source, target
        apart = self._apart(vertices[source] ^ target)
        return source[apart], target[apart]

    def _apart(self, switched: Words) -> Bits:
        """Whether no two nodes of an exclusive pair are among those that switched."""
        result = np.ones(len(switched), bool)
        for pair in map(np.uint64, self.circuit.pairs):
            result &= switched & pair != pair
        return result

    def steps(self, vertices: Words, movers: Words) -> tuple[Places, Words]:
        """Every step that is not the environment's own choice of a change; `movers`: the nodes that may switch."""
        if not self.fundamental:
            source, target = self.held(vertices, movers | self.allowed(vertices))
            lawful = self.admits(target)
            return source[lawful], target[lawful]
        source, target = self.held(vertices, movers)
        if not self.burst:
            return source, target
        waiting = np.flatnonzero(self.outstanding(vertices))
        first, arrived = self._arrivals(vertices[waiting])
        origin = waiting[first]
        if self.circuit.winners == "any":
            again, moved = self.held(arrived, movers[origin])
            origin, arrived = np.concatenate([origin, origin[again]]), np.concatenate([arrived, moved])
        return np.concatenate([source, origin]), np.concatenate([target, arrived])

    def changes(self, stable: Words) -> tuple[Places, Words]:
        """Changes that the environment may make in vertices that are stable with nothing outstanding."""
        if not self.fundamental:
            return np.zeros(0, np.int64), np.zeros(0, np.uint64)
        allowed = self.allowed(stable)
        if self.environment.changes == "single":
            source, target = one_of(stable, allowed)
        else:
            source, target = parts_of(stable, allowed)
        if self.burst:
            picked = (stable[source] ^ target) << np.uint64(self.state_bits)
            first, target = self._arrivals(stable[source] | picked)
            return source[first], target
        lawful = self.admits(target)
        return source[lawful], target[lawful]

    def ends(self, vertices: Words, excited: Words) -> Bits:
        """Whether each vertex is stable with nothing outstanding."""
        return (excited == 0) & (self.outstanding(vertices) == 0)

    def _arrivals(self, vertices: Words) -> tuple[Places, Words]:
        waiting = self.outstanding(vertices)
        found_source: list[Places] = []
        found: list[Words] = []
        for i in range(self.inputs):
            source = np.flatnonzero(waiting >> np.uint64(i) & np.uint64(1))
            flip = np.uint64(1 << i | 1 << (self.state_bits + i))
            target = vertices[source] ^ flip
            lawful = self._finishing(target)
            found_source.append(source[lawful])
            found.append(target[lawful])
        return np.concatenate(found_source or [np.zeros(0, np.int64)]), np.concatenate(found or [vertices[:0]])

    def _finishing(self, vertices: Words) -> Bits:
        """Whether the vector is admitted and what is outstanding can follow with every vector admitted."""
        if not self.environment.assume:
            return np.ones(len(vertices), bool)
        rest = self.outstanding(vertices).astype(np.int64)
        return self._finishable[rest, (vertices & self.input_mask).astype(np.int64)]

    @cached_property
    def _finishable(self) -> npt.NDArray[np.bool_]:
        """By outstanding set and vector: whether the rest of a burst can arrive (only built beside `assume`)."""
        size = 1 << self.inputs
        vectors = np.arange(size, dtype=np.uint64)
        admitted = self.admits(vectors)
        table = np.zeros((size, size), bool)
        table[0] = admitted
        for rest in range(1, size):
            for i in range(self.inputs):
                if rest >> i & 1:
                    table[rest] |= table[rest ^ 1 << i][vectors.astype(np.int64) ^ 1 << i]
            table[rest] &= admitted
        return table


def bits_of(words: Words) -> Bits:
    """A row for each of the 64 bits, a column for each word."""
    octets = np.ascontiguousarray(words.astype("<u8").view(np.uint8).reshape(-1, 8).T)
    rows: Bits = (octets[:, None, :] & PLACES[:, None]).reshape(64, -1) != 0
    return rows


def words_of(rows: Bits) -> Words:
    """The words whose bits stand in 64 rows."""
    bits = rows.view(np.uint8).reshape(8, 8, -1)
    octets = bits[:, 0].copy()
    for place in range(1, 8):
        octets |= bits[:, place] << np.uint8(place)
    return np.ascontiguousarray(octets.T).view("<u8").reshape(-1).astype(np.uint64)


def one_of(vertices: Words, movers: Words) -> tuple[Places, Words]:
    """One mover switches: (index of the source, target) of each such step."""
    left, place = movers, np.arange(len(vertices))
    sources: list[Places] = []
    targets: list[Words] = []
    while len(place := place[left != 0]):
        left = left[left != 0]
        lowest = left & (~left + np.uint64(1))
        sources.append(place)
        targets.append(vertices[place] ^ lowest)
        left = left ^ lowest
    if not sources:
        return np.zeros(0, np.int64), np.zeros(0, np.uint64)
    return np.concatenate(sources), np.concatenate(targets)


def parts_of(vertices: Words, movers: Words) -> tuple[Places, Words]:
    """Any non-empty part of the movers switches: (index of the source, target) of each such step."""
    place, target, left = np.arange(len(vertices)), vertices, movers
    done_place: list[Places] = []
    done: list[Words] = []
    while len(place):
        over = left == 0
        done_place.append(place[over])
        done.append(target[over])
        place, target, left = place[~over], target[~over], left[~over]
        lowest = left & (~left + np.uint64(1))
        left = left ^ lowest
        place = np.concatenate([place, place])
        target = np.concatenate([target, target ^ lowest])
        left = np.concatenate([left, left])
    if not done:
        return np.zeros(0, np.int64), np.zeros(0, np.uint64)
    source, reached = np.concatenate(done_place), np.concatenate(done)
    moved = reached != vertices[source]
    return source[moved], reached[moved]
