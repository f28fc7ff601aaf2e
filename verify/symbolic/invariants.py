"""Guessed local invariants: clauses of up to three literals over near-by signals that random runs never violate, and
of these the greatest set that is inductive together (Flanagan and Leino 2001, "Houdini"; recalled).

A guess is never believed: what is returned has been shown to hold in all start states and to be kept by every step.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Collection, Hashable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import combinations, product

import numpy as np

from settled.encodings.system import System, system
from settled.models.logic import rename, support, var
from settled.verify.symbolic.formula import Cube, Formula, Progress, Query
from settled.verify.symbolic.local import Local
from settled.verify.symbolic.simulation import FULL, Bits, Places, Simulation, Words

NEAR = 10
SHARED = 100
TOGETHER = 400
WIDTH = 8
MOMENTS = 16
LITERALS = 3
AGAIN = 3
RINGS = 2
STEADY = 0.99
STARTS = 64

Shape = tuple[Hashable, ...]


def guessed(made: System, progress: Progress) -> list[Cube]:
    """Clauses that are true in every reachable state and inductive together. Raises `LimitReached`."""
    formula = Formula(made)
    progress.at("random runs")
    near = neighbourhoods(made)
    runs = Simulation(_eager(made), starts(formula, progress), progress)
    samples = np.concatenate(runs.explore(_alike(made, near)), axis=1)
    runs.spread(WIDTH)
    cubes = unseen(near, samples)
    for apart in (3, 6, 12, 24):
        more = runs.sample(MOMENTS, apart)
        samples = np.concatenate([samples, more], axis=1)
        left = _left(cubes, more)
        steady = len(left) >= STEADY * len(cubes)
        cubes = left if steady else unseen(near, samples)
        if steady:
            break
    return _kept(formula, near, samples, cubes, progress)


def guessed_about(made: System, known: Sequence[Cube], progress: Progress) -> list[Cube]:
    """Clauses about what observers watch, inductive together with the `known` ones. Raises `LimitReached`."""
    progress.at("random runs with observers")
    formula = Formula(made)
    near: dict[Shape, list[tuple[int, ...]]] = {(v,): [_watched(made, v)] for v in made.watching}
    runs = Simulation(_eager(made), starts(formula, progress), progress)
    samples = np.concatenate(runs.explore(np.arange(len(made.variables))), axis=1)
    runs.spread(WIDTH)
    samples = np.concatenate([samples, runs.sample(MOMENTS)], axis=1)
    watching = {made.number[v] for v in made.watching}
    cubes = [c for c in unseen(near, samples, (), [negated(c) for c in known]) if watching & set(map(abs, c))]
    return [negated(cube) for cube in inductive(formula, cubes, known, progress)]


def _watched(made: System, name: str) -> tuple[int, ...]:
    """Positions of an observer, what it reads, and what that reads."""
    excitation = made.circuit.excitation
    read = [v for v in support(*made.one_copy[name]) if v in made.number]
    near = dict.fromkeys([name, *read, *(r for v in read if v in excitation for r in support(excitation[v]))])
    return tuple(made.number[v] - 1 for v in near)[:NEAR]


def _eager(made: System) -> System:
    """The system with any number of nodes switching at once: its runs get about sooner, and show no less."""
    eager = system(replace(made.circuit, winners="any"), made.environment, made.restraint)
    if not made.watching:
        return eager
    watching = {v: made.may[v] for v in made.watching}
    return replace(made, may={**eager.may, **watching}, selectors=tuple(dict.fromkeys((*made.selectors, *eager.selectors))))


def _kept(
    formula: Formula, near: dict[Shape, list[tuple[int, ...]]], samples: Words, cubes: list[Cube], progress: Progress
) -> list[Cube]:
    """The clauses that are inductive; where a cube was too large, the cubes of more literals within it are tried."""
    kept: list[Cube] = []
    hopeless: set[Cube] = set()
    for _ in range(AGAIN):
        found = inductive(formula, cubes, [negated(cube) for cube in kept], progress)
        kept += found
        failed = set(cubes) - set(found)
        hopeless |= failed
        around = [{abs(lit) - 1 for lit in cube} for cube in failed if len(cube) < LITERALS]
        close = {s: [p for p in places if any(a.issubset(p) for a in around)] for s, places in near.items()}
        if not any(close.values()):
            break
        cubes = unseen({s: places for s, places in close.items() if places}, samples, hopeless, kept)
    return [negated(cube) for cube in kept]


def starts(formula: Formula, progress: Progress) -> Words:
    """Up to 64 different start states, a bit for each in the row of each variable."""
    query = Query(formula, progress, [[formula.start]])
    rng = np.random.default_rng(1)
    found: list[list[bool]] = []
    while len(found) < STARTS and query.solve([]):
        state = query.model()[: len(formula.state)]
        found.append([v > 0 for v in state])
        query.add([-v for v in state])
        query.prefer([int(v) for v in np.where(rng.random(len(state)) < 0.5, formula.state, -np.array(formula.state))])
    query.close()
    rows = np.resize(np.array(found, bool), (STARTS, len(formula.state))).T
    return np.ascontiguousarray(np.packbits(rows, axis=1)).view(np.uint64)


# ---- guesses -------------------------------------------------------------------------------------------------------


def neighbourhoods(made: System) -> dict[Shape, list[tuple[int, ...]]]:
    """For each node the positions of the nearest variables: itself, what it reads, what these read.

    Listed by shape. In large circuits nodes whose surroundings compute the same functions have the same shape, so
    that what one of them shows speaks against a guess for all; in small ones every node has a shape of its own.
    """
    circuit = made.circuit
    place = {v: i for i, v in enumerate(made.variables)}
    reads = {n: support(circuit.excitation[n]) for n in circuit.nodes}
    found: dict[Shape, list[tuple[int, ...]]] = defaultdict(list)
    for n in circuit.nodes:
        near = list(dict.fromkeys([n, *reads[n], *(r for m in reads[n] for r in reads.get(m, ()))]))
        shape: Shape = (n,)
        if len(circuit.nodes) > SHARED:
            names = {v: var(f"{i}") for i, v in enumerate(near)}
            inner = [m for m in (n, *reads[n]) if m in reads]
            shape = (len(near), *rename([circuit.excitation[m] for m in inner], names))
        found[shape].append(tuple(place[v] for v in near[:NEAR]))
    return found


def _alike(made: System, near: dict[Shape, list[tuple[int, ...]]]) -> Places:
    """A number for each variable, the same for nodes of one shape."""
    found = np.arange(len(made.variables))
    for places in near.values():
        for place in places:
            found[place[0]] = places[0][0]
    return found


def unseen(
    near: dict[Shape, list[tuple[int, ...]]],
    samples: Words,
    hopeless: Collection[Cube] = (),
    known: Collection[Cube] = (),
) -> list[Cube]:
    """Cubes of one to three literals over a neighbourhood that no sample shows, none of them within another of it.

    `hopeless` cubes are not found; nor are `known` ones and what lies within them.
    """
    found: dict[Cube, None] = {}
    outer: set[tuple[int, Cube]] = set()
    kept = set(known)
    for size in range(1, LITERALS + 1):
        for shape, cube in _never(_sets(near, size), samples):
            parts = [part for k in range(1, size + 1) for part in combinations(cube, k)]
            if cube not in hopeless and not any(part in kept or (shape, part) in outer for part in parts):
                found[cube] = None
                outer.add((shape, cube))
    return sorted(found)


@dataclass(frozen=True)
class Sets:
    """Sets of variables, a row each, with the number of the group of sets that are alike and of the group's shape."""

    rows: Places
    groups: Places
    shapes: Places


def _sets(near: dict[Shape, list[tuple[int, ...]]], size: int) -> Sets:
    rows, numbers, shapes = [np.zeros((0, size), np.int64)], [np.zeros(0, np.int64)], [np.zeros(0, np.int64)]
    base = 0
    for shape, places in enumerate(near.values()):
        parts = np.array(list(combinations(range(len(places[0])), size)), np.int64).reshape(-1, size)
        rows.append(np.array(places, np.int64)[:, parts].reshape(-1, size))
        numbers.append(np.tile(np.arange(base, base + len(parts)), len(places)))
        shapes.append(np.full(len(parts) * len(places), shape))
        base += len(parts)
    return Sets(np.concatenate(rows), np.concatenate(numbers), np.concatenate(shapes))


def _never(sets: Sets, samples: Words) -> Iterator[tuple[int, Cube]]:
    """Cubes over the sets that no sample shows, in no set of the group; each with the number of the shape."""
    size = sets.rows.shape[1]
    for signs in product((False, True), repeat=size):
        shown = np.zeros(int(sets.groups.max(initial=-1)) + 1, bool)
        np.logical_or.at(shown, sets.groups, _shown(sets.rows, signs, samples))
        never = ~shown[sets.groups]
        literals = (sets.rows[never] + 1) * np.where(signs, 1, -1)
        for shape, cube in zip(sets.shapes[never].tolist(), literals.tolist(), strict=True):
            yield shape, tuple(sorted(cube, key=abs))


def _shown(sets: Places, signs: Sequence[bool], samples: Words) -> Bits:
    block = max(1, (1 << 20) // samples.shape[1])
    found = np.zeros(len(sets), bool)
    for at in range(0, len(sets), block):
        part = sets[at : at + block]
        words = np.full((len(part), samples.shape[1]), FULL)
        for k, sign in enumerate(signs):
            row = samples[part[:, k]]
            words &= row if sign else ~row
        found[at : at + block] = words.any(axis=1)
    return found


def _left(cubes: Sequence[Cube], samples: Words) -> list[Cube]:
    """The cubes that no sample shows."""
    found: list[Cube] = []
    for size in range(1, LITERALS + 1):
        some = np.array([cube for cube in cubes if len(cube) == size], np.int64).reshape(-1, size)
        shown = np.zeros(len(some), bool)
        for signs in product((False, True), repeat=size):
            alike = np.flatnonzero(((some > 0) == np.array(signs)).all(axis=1))
            shown[alike] = _shown(np.abs(some[alike]) - 1, signs, samples)
        found += (tuple(cube) for cube in some[~shown].tolist())
    return found


# ---- what can be kept ----------------------------------------------------------------------------------------------


def inductive(formula: Formula, cubes: Sequence[Cube], given: Sequence[Cube], progress: Progress) -> list[Cube]:
    """Of the cubes a large set that no start state is in and into which no step leads from outside it.

    `given`: clauses that are inductive already.
    """
    at_start = Query(formula, progress, [[formula.start]], steady=True)
    kept = _closed(at_start, cubes, {lit: lit for lit in formula.may})
    reduce = _by_rounds if len(formula.state) <= TOGETHER else _by_neighbours
    return reduce(formula, kept, given, progress)


def _by_rounds(formula: Formula, cubes: list[Cube], given: Sequence[Cube], progress: Progress) -> list[Cube]:
    """The greatest such set: while a step from outside all cubes that are left leads into some, drop these."""
    while True:
        steps = Query(formula, progress, [*given, *map(negated, cubes)], steady=True)
        kept = _closed(steps, cubes, formula.may)
        if len(kept) == len(cubes):
            return kept
        cubes = kept


def _by_neighbours(formula: Formula, cubes: list[Cube], given: Sequence[Cube], progress: Progress) -> list[Cube]:
    """A cube stays while what stands near it refutes a step into it; when one goes, those that were refuted with its
    help are looked at again. The work grows with the number of cubes alone."""
    kept = dict.fromkeys(cubes)
    local = Local(formula, [*given, *map(negated, kept)])
    used_by: dict[Cube, set[Cube]] = defaultdict(set)
    todo = list(kept)
    while todo:
        progress.tick()
        cube = todo.pop()
        if cube in kept:
            used = local.refutation([formula.may[lit] for lit in cube], RINGS)
            for clause in used or ():
                used_by[clause].add(cube)
            if used is None:
                del kept[cube]
                local.remove(negated(cube))
                todo += sorted(used_by.pop(negated(cube), ()))
    return list(kept)


def negated(cube: Cube) -> Cube:
    """The clause that excludes a cube, and the other way round."""
    return tuple(-lit for lit in cube)


def _closed(query: Query, cubes: Sequence[Cube], becomes: Mapping[int, int]) -> list[Cube]:
    """The cubes whose literals cannot all become true; a model speaks against every cube that it shows."""
    literals = [[becomes[lit] for lit in cube] for cube in cubes]
    broken = np.zeros(len(cubes), bool)
    for i, wanted in enumerate(literals):
        if not broken[i] and query.solve(wanted):
            model = set(query.model())
            broken[[k for k in range(i, len(cubes)) if model.issuperset(literals[k])]] = True
    query.close()
    return [cube for cube, gone in zip(cubes, broken, strict=True) if not gone]
