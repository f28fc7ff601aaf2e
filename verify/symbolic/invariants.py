"""Guessed local invariants: clauses of few literals over near-by signals that random runs never violate, and
of these the greatest set that is inductive together (Flanagan and Leino 2001, "Houdini"; recalled).

A guess is never believed: what is returned has been shown to hold in all start states and to be kept by every step.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from settled.encodings.system import System, system
from settled.verify.symbolic.formula import Cube, Formula, Progress, Query
from settled.verify.symbolic.guesses import Near, alike, left_unseen, unseen, unseen_within, watched
from settled.verify.symbolic.local import Local
from settled.verify.symbolic.simulation import Simulation, Words

SMALL, FEW_CUBES = 600, 1_000
WIDTH = 8
MOMENTS = 16
RINGS = 2
STEADY = 0.99
STARTS = 64


def guessed(made: System, near: Near, known: Sequence[Cube], progress: Progress) -> list[Cube]:
    """Clauses that are true in every reachable state and inductive together with the `known` ones.

    Raises `LimitReached`.
    """
    formula = Formula(made)
    progress.at("random runs")
    given = [negated(clause) for clause in known]
    runs = Simulation(_eager(made), starts(formula, progress), progress)
    samples = np.concatenate(runs.explore(alike(made, near)), axis=1)
    runs.spread(WIDTH)
    cubes = unseen(near, samples, given)
    for apart in (3, 6, 12, 24):
        more = runs.sample(MOMENTS, apart)
        samples = np.concatenate([samples, more], axis=1)
        left = left_unseen(cubes, more)
        steady = len(left) >= STEADY * len(cubes)
        cubes = left if steady else unseen(near, samples, given)
        if steady:
            break
    return _kept(formula, near, samples, cubes, given, progress)


def guessed_about(made: System, known: Sequence[Cube], progress: Progress) -> list[Cube]:
    """Clauses about what observers watch, inductive together with the `known` ones. Raises `LimitReached`."""
    progress.at("random runs with observers")
    formula = Formula(made)
    runs = Simulation(_eager(made), starts(formula, progress), progress)
    samples = np.concatenate(runs.explore(np.arange(len(made.variables))), axis=1)
    runs.spread(WIDTH)
    samples = np.concatenate([samples, runs.sample(MOMENTS)], axis=1)
    watching = {made.number[v] for v in made.watching}
    cubes = unseen(watched(made), samples, [negated(clause) for clause in known])
    cubes = [cube for cube in cubes if watching & set(map(abs, cube))]
    return [negated(cube) for cube in inductive(formula, cubes, known, progress)]


def _eager(made: System) -> System:
    """The system with any number of nodes switching at once: its runs get about sooner, and show no less."""
    eager = system(replace(made.circuit, winners="any"), made.environment, made.restraint)
    watching = {v: made.may[v] for v in made.watching}
    selectors = tuple(dict.fromkeys((*made.selectors, *eager.selectors)))
    return replace(made, may={**eager.may, **watching}, selectors=selectors)


def _kept(
    formula: Formula, near: Near, samples: Words, cubes: list[Cube], given: list[Cube], progress: Progress
) -> list[Cube]:
    """The clauses that are inductive; where a cube was too large, the cubes of more literals within it are tried."""
    kept: list[Cube] = []
    hopeless: set[Cube] = set()
    for _ in range(near.literals):
        found = inductive(formula, cubes, [negated(cube) for cube in (*given, *kept)], progress)
        kept += found
        hopeless |= set(cubes) - set(found)
        cubes = unseen_within(near, samples, hopeless, [*given, *kept])
        if not cubes:
            break
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


# ---- what can be kept ----------------------------------------------------------------------------------------------


def inductive(formula: Formula, cubes: Sequence[Cube], given: Sequence[Cube], progress: Progress) -> list[Cube]:
    """Of the cubes a large set that no start state is in and into which no step leads from outside it.

    `given`: clauses that are inductive already.
    """
    at_start = Query(formula, progress, [[formula.start]], steady=True)
    kept = _closed(at_start, cubes, {lit: lit for lit in formula.may})
    at_start.close()
    few = len(kept) <= FEW_CUBES or len(formula.state) <= SMALL
    reduce = _by_rounds if few else _by_neighbours
    return reduce(formula, kept, given, progress)


def _by_rounds(formula: Formula, cubes: list[Cube], given: Sequence[Cube], progress: Progress) -> list[Cube]:
    """The greatest such set: while a step from outside all cubes that are left leads into some, drop these."""
    steps = Query(formula, progress, given, steady=True)
    while True:
        outside = steps.fresh()
        for cube in cubes:
            steps.add([-outside, *negated(cube)])
        kept = _closed(steps, cubes, formula.may, [outside])
        if len(kept) == len(cubes):
            steps.close()
            return kept
        steps.add([-outside])
        cubes = kept


def _by_neighbours(formula: Formula, cubes: list[Cube], given: Sequence[Cube], progress: Progress) -> list[Cube]:
    """A cube stays while what stands near it refutes a step into it; when one goes, those that were refuted with its
    help are looked at again. The work grows with the number of cubes alone."""
    kept = dict.fromkeys(cubes)
    local = Local(formula, [*given, *map(negated, kept)])
    used_by: dict[Cube, set[Cube]] = defaultdict(set)
    todo = dict.fromkeys(kept)
    while todo:
        progress.tick()
        cube = next(iter(todo))
        del todo[cube]
        if cube in kept:
            used = local.refutation([formula.may[lit] for lit in cube], RINGS)
            for clause in used or ():
                used_by[clause].add(cube)
            if used is None:
                del kept[cube]
                local.remove(negated(cube))
                todo |= dict.fromkeys(sorted(used_by.pop(negated(cube), ())))
    return list(kept)


def negated(cube: Cube) -> Cube:
    """The clause that excludes a cube, and the other way round."""
    return tuple(-lit for lit in cube)


def _closed(query: Query, cubes: Sequence[Cube], becomes: Mapping[int, int], given: Sequence[int] = ()) -> list[Cube]:
    """The cubes whose literals cannot all become true; a model speaks against every cube that it shows."""
    literals = [[becomes[lit] for lit in cube] for cube in cubes]
    broken = np.zeros(len(cubes), bool)
    for i, wanted in enumerate(literals):
        if not broken[i] and query.solve([*given, *wanted]):
            model = set(query.model())
            broken[[k for k in range(i, len(cubes)) if model.issuperset(literals[k])]] = True
    return [cube for cube, gone in zip(cubes, broken, strict=True) if not gone]
