"""Moves as functions from sets of states to sets of states.

A *single* move inverts certain variables where its guard is true. Under `winners = "any"` several nodes may switch in
one step, which is not the same as one after the other, so there are *joint* moves, which say it all; the single ones
are among them and are there because they are cheap. A *cluster* does in one go whatever single moves of a few
neighbouring variables can do one after the other.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

from settled.verify.diagrams.manager import Diagrams, Set, then

LARGE = 2_000


@dataclass(frozen=True, eq=False)
class Single:
    """Where `guard` is true, the variables `names` are inverted."""

    diagrams: Diagrams
    guard: Set
    names: tuple[str, ...]

    def image(self, f: Set) -> Set:
        """The states that the move makes of `f`."""
        return self.diagrams.flipped(f & self.guard, self.names)

    def preimage(self, f: Set) -> Set:
        """The states of which the move makes one of `f`."""
        return self.diagrams.flipped(f, self.names) & self.guard

    strict_preimage = preimage
    """The states of which the move makes another state, in `f`."""


@dataclass(frozen=True)
class Part:
    """A relation between present values and the values after a step of the variables `names`; `still`: where none of
    them changes."""

    relation: Set
    still: Set
    names: tuple[str, ...]
    reads: frozenset[str]


class Joint:
    """Where `guard` is true, each of the `movers` may be inverted where its condition is true, all at once; not both
    of an exclusive pair. The variables `names` are inverted as well, and the state reached is in `after`.

    That none of the movers moves is among the choices.
    """

    def __init__(
        self,
        diagrams: Diagrams,
        movers: Mapping[str, Set],
        exclusive: Sequence[tuple[str, str]],
        guard: Set,
        names: tuple[str, ...] = (),
        after: Set | None = None,
    ) -> None:
        self.diagrams, self.guard, self.names = diagrams, guard, names
        self.movers = tuple(movers)
        self.after = diagrams.true if after is None else after
        self.parts = self._parts(movers, exclusive)

    def image(self, f: Set) -> Set:
        """The states that the move makes of `f`."""
        d = self.diagrams
        g, last = f & self.guard, self._last_use
        for number, part in enumerate(self.parts):
            g = d.cudd.and_exists(g, part.relation, last[number])
        g = d.renamed(g, {then(m): m for m in self.movers})
        return d.flipped(g, self.names) & self.after

    def preimage(self, f: Set) -> Set:
        """The states of which the move makes one of `f`."""
        d = self.diagrams
        g = d.renamed(d.flipped(f & self.after, self.names), {m: then(m) for m in self.movers})
        for part in self.parts:
            g = d.cudd.and_exists(g, part.relation, [then(m) for m in part.names])
        return g & self.guard

    def strict_preimage(self, f: Set) -> Set:
        """The states of which the move makes another state, in `f`, one of the movers at least moving."""
        d = self.diagrams
        still = d.renamed(d.flipped(f & self.after, self.names), {m: then(m) for m in self.movers})
        moved = d.false
        for part in self.parts:
            after = [then(m) for m in part.names]
            moves = d.cudd.and_exists(still, part.relation & ~part.still, after)
            moved = d.cudd.and_exists(moved, part.relation, after) | moves
            still = d.cudd.and_exists(still, part.still, after)
        return moved & self.guard

    def _parts(self, movers: Mapping[str, Set], exclusive: Sequence[tuple[str, str]]) -> list[Part]:
        d = self.diagrams
        moved = {m: d.manager.apply("xor", d.manager.var(m), d.manager.var(then(m))) for m in movers}
        made = {}
        for m, may in movers.items():
            made[m] = Part(~moved[m] | may, ~moved[m], (m,), frozenset(d.manager.support(may)) | {m})
        for a, b in exclusive:
            one, two = made[a], made[b]
            names = tuple(dict.fromkeys(one.names + two.names))
            both = one.relation & two.relation & ~(moved[a] & moved[b])
            made |= dict.fromkeys(names, Part(both, one.still & two.still, names, one.reads | two.reads))
        return list(dict.fromkeys(made.values()))

    @cached_property
    def _last_use(self) -> list[list[str]]:
        """For each part the present values of movers that no later part reads."""
        last = {name: number for number, part in enumerate(self.parts) for name in part.reads}
        found: list[list[str]] = [[] for _ in self.parts]
        for m in self.movers:
            found[last[m]].append(m)
        return found


@dataclass(frozen=True, eq=False)
class Pick:
    """In rest, the environment decides which inputs are outstanding."""

    diagrams: Diagrams
    rest: Set
    picked: Set
    names: tuple[str, ...]

    def image(self, f: Set) -> Set:
        """The states of `f` that are in rest, with a burst picked."""
        return self.diagrams.without(f & self.rest, self.names) & self.picked

    def preimage(self, f: Set) -> Set:
        """The states of rest in which a state of `f` can be picked."""
        return self.diagrams.without(f & self.picked, self.names) & self.rest

    strict_preimage = preimage


class Cluster:
    """Any number of single moves one after the other. `relation`: between the values of `names` before and after."""

    def __init__(self, parts: Sequence[Single], relation: Set) -> None:
        self.diagrams, self.parts, self.relation = parts[0].diagrams, tuple(parts), relation
        self.names = tuple(name for part in parts for name in part.names)
        self._back = {then(name): name for name in self.names}

    def image(self, f: Set) -> Set:
        """The states that the moves make of `f`, those of `f` among them."""
        return self.diagrams.renamed(self.diagrams.cudd.and_exists(f, self.relation, self.names), self._back)


def clustered(parts: Sequence[Single]) -> tuple[Move, ...]:
    """The cluster of some moves; the moves themselves where its relation would be large.

    The second variable of each name first remembers where the moves began, while they are applied to the first.
    """
    d = parts[0].diagrams
    names = [name for part in parts for name in part.names]
    relation = d.true
    for name in names:
        relation = relation & ~d.manager.apply("xor", d.manager.var(name), d.manager.var(then(name)))
    before = d.false
    while relation != before:
        before = relation
        for part in parts:
            relation = relation | part.image(relation)
        if len(relation) > LARGE:
            return tuple(parts)
    swapped = {a: b for name in names for a, b in ((name, then(name)), (then(name), name))}
    return (Cluster(parts, d.renamed(relation, swapped)),)


Plain = Single | Joint | Pick
Move = Plain | Cluster


@dataclass(frozen=True)
class Moves:
    """Moves of one kind: `joint` together are all of them, or `single` are where there are none.

    `fast`: what does the same as `single`, with clusters, for searches forwards that nothing confines.
    """

    single: tuple[Plain, ...]
    joint: tuple[Plain, ...] = ()
    fast: tuple[Move, ...] = ()

    @property
    def all(self) -> tuple[Plain, ...]:
        """Moves that leave out nothing."""
        return self.joint or self.single

    @property
    def serial(self) -> Moves:
        """The single moves alone."""
        return Moves(self.single, (), self.fast)

    def __add__(self, other: Moves) -> Moves:
        every = (*self.all, *other.all) if self.joint or other.joint else ()
        return Moves((*self.single, *other.single), every, (*self.fast, *other.fast))
