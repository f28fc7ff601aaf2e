"""Guesses about reachable states: clauses of few literals over near-by signals that no sampled state violates.

A clause is guessed as the cube that it excludes. Signals in one surrounding are compared with all others that have the
same surroundings, and whole sets of cubes with many samples at a time.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Collection, Hashable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from itertools import combinations, product

import numpy as np
import numpy.typing as npt

from settled.encodings.system import System
from settled.models.logic import rename, support, var
from settled.verify.symbolic.formula import Cube
from settled.verify.symbolic.simulation import Bits, Places, Words

NEAR = 10
SHARED, LINKED = 100, 40
FIRST_BLOCK, LARGEST_BLOCK = 16, 1 << 20

Shape = tuple[Hashable, ...]
Listed = Sequence[tuple[int, ...]]


@dataclass(frozen=True)
class Near:
    """Where clauses are guessed, and how many literals they may have.

    * `places`: positions of variables near one another, by the shape of what they compute.
    * `links`: for each position those that it is linked with, if only connected sets of variables count.
    """

    places: Mapping[Shape, Listed]
    literals: int
    links: Mapping[int, Collection[int]] | None = None


# ---- what is near --------------------------------------------------------------------------------------------------


def neighbourhoods(made: System) -> Near:
    """For each node the nearest variables, itself, what it reads, what these read: any three of them.

    Listed by shape. In large circuits nodes whose surroundings compute the same functions have the same shape, so
    that what one of them shows speaks against a guess for all; in small ones every node has a shape of its own.
    """
    found: dict[Shape, list[tuple[int, ...]]] = defaultdict(list)
    for name in made.circuit.nodes:
        near = _nearest(made, [name], 2)
        shape = _shape(made, near) if len(made.circuit.nodes) > SHARED else (name,)
        found[shape].append(tuple(made.number[v] - 1 for v in near))
    return Near(found, 3)


def linked(made: System) -> Near:
    """For each signal the nearest variables in either direction, readers as well: any four that are connected.

    An input reads what its guard reads. By shape, as in `neighbourhoods`, in all but the smallest circuits.
    """
    links = _links(made)
    found: dict[Shape, list[tuple[int, ...]]] = defaultdict(list)
    for name in made.circuit.signals:
        near = [name]
        for s in near:
            near += [v for v in links[s] if v not in near] if len(near) < NEAR else []
        shape = _shape(made, near[:NEAR]) if len(made.circuit.nodes) > LINKED else (name,)
        found[shape].append(tuple(made.number[v] - 1 for v in near[:NEAR]))
    number = made.number
    return Near(found, 4, {number[s] - 1: {number[v] - 1 for v in others} for s, others in links.items()})


def _links(made: System) -> dict[str, dict[str, None]]:
    """For each signal what it reads and what reads it, apart from itself."""
    circuit = made.circuit
    reads = {n: support(circuit.excitation[n]) for n in circuit.nodes}
    for x in circuit.inputs:
        guard = made.environment.guard(x)
        reads[x] = support(*circuit.resolve(guard.rises, guard.falls))
    found = {s: {r: None for r in reads[s] if r != s} for s in circuit.signals}
    for s in circuit.signals:
        for r in reads[s]:
            if r != s:
                found[r][s] = None
    return found


def watched(made: System) -> Near:
    """For each observer the nearest variables: itself, what it reads, what that reads."""
    found: dict[Shape, list[tuple[int, ...]]] = {}
    for name in made.watching:
        read = [v for v in support(*made.one_copy[name]) if v in made.number]
        found[(name,)] = [tuple(made.number[v] - 1 for v in _nearest(made, [name, *read], 1))]
    return Near(found, 3)


def _nearest(made: System, names: Sequence[str], rings: int) -> list[str]:
    """The names, what they read, and so on."""
    excitation = made.circuit.excitation
    near = dict.fromkeys(names)
    for _ in range(rings):
        near |= dict.fromkeys(r for v in list(near) if v in excitation for r in support(excitation[v]))
    return list(near)[:NEAR]


def _shape(made: System, near: Sequence[str]) -> Shape:
    """What those compute that read only one another."""
    excitation = made.circuit.excitation
    names = {v: var(f"{i}") for i, v in enumerate(near)}
    inner = [n for n in near if n in excitation and names.keys() >= set(support(excitation[n]))]
    return (len(near), *(near.index(n) for n in inner), *rename([excitation[n] for n in inner], names))


def alike(made: System, near: Near) -> Places:
    """A number for each variable, the same for those of one shape."""
    found = np.arange(len(made.variables))
    for places in near.places.values():
        for place in places:
            found[place[0]] = places[0][0]
    return found


# ---- cubes that no sample shows ------------------------------------------------------------------------------------


def unseen(near: Near, samples: Words, known: Collection[Cube] = ()) -> list[Cube]:
    """Cubes over neighbourhoods that no sample shows, none of them within another over the same neighbourhood.

    What lies within `known` cubes is not found.
    """
    return _unseen(near, near.places, samples, (), set(known))


def unseen_within(near: Near, samples: Words, hopeless: Collection[Cube], known: Collection[Cube]) -> list[Cube]:
    """As `unseen`, in the neighbourhoods of `hopeless` cubes, which are not found and hide no others."""
    around = {frozenset(abs(lit) - 1 for lit in cube) for cube in hopeless if len(cube) < near.literals}
    places_of: dict[int, list[tuple[Shape, tuple[int, ...]]]] = defaultdict(list)
    for shape, places in near.places.items():
        for place in places:
            for v in place:
                places_of[v].append((shape, place))
    close: dict[Shape, dict[tuple[int, ...], None]] = defaultdict(dict)
    for variables in around:
        for shape, place in places_of[min(variables)]:
            if variables.issubset(place):
                close[shape][place] = None
    return _unseen(near, {s: list(p) for s, p in close.items()}, samples, hopeless, set(known))


def _unseen(
    near: Near, close: Mapping[Shape, Listed], samples: Words, hopeless: Collection[Cube], kept: set[Cube]
) -> list[Cube]:
    found: dict[Cube, None] = {}
    for shape, places in close.items():
        rows, wanted = np.array(near.places[shape], np.int64), np.array(places, np.int64)
        width = rows.shape[1]
        hides = np.zeros(3**width, bool)
        for size in range(1, min(near.literals, width) + 1):
            cubes, codes, parts = _all_cubes(width, size)
            hides[codes] = hides[parts].any(axis=1)
            open_ = np.flatnonzero(~hides[codes] & _counted(near, near.places[shape][0], size))
            never = open_[_never(rows, cubes[open_], samples)]
            for which in never.tolist():
                instances = list(_instances(wanted, cubes[which]))
                hides[codes[which]] = not any(cube in hopeless for cube in instances)
                found |= dict.fromkeys(c for c in instances if c not in hopeless and not _within(c, kept))
    return sorted(found)


def _counted(near: Near, place: tuple[int, ...], size: int) -> Bits:
    """Which of all cubes of a size over a place count."""
    sets = combinations(place, size)
    counted = [near.links is None or _connected(chosen, near.links) for chosen in sets]
    return np.repeat(np.array(counted, bool), 1 << size)


def _connected(chosen: Sequence[int], links: Mapping[int, Collection[int]]) -> bool:
    reached, left = [chosen[0]], set(chosen[1:])
    for v in reached:
        more = left.intersection(links[v])
        reached += sorted(more)
        left -= more
    return not left


def _within(cube: Cube, kept: set[Cube]) -> bool:
    return any(part in kept for size in range(1, len(cube) + 1) for part in combinations(cube, size))


@cache
def _all_cubes(width: int, size: int) -> tuple[Places, Places, Places]:
    """All cubes over `width` variables, a row of literals each: variable i as i, its inverse as i + width.

    With each a code of its own, and the codes of the cubes of one literal less around it.
    """
    sets = combinations(range(width), size)
    rows = [
        [v + width * s for v, s in zip(c, signs, strict=True)] for c in sets for signs in product((0, 1), repeat=size)
    ]
    cubes = np.array(rows, np.int64).reshape(-1, size)
    digits = 3 ** (cubes % width) * (1 + cubes // width)
    codes: Places = digits.sum(axis=1)
    return cubes, codes, codes[:, None] - digits


def _instances(rows: Places, cube: Places) -> Iterator[Cube]:
    """A cube over the variables of each row."""
    width = rows.shape[1]
    literals = (rows[:, cube % width] + 1) * np.where(cube < width, 1, -1)
    return (tuple(sorted(instance, key=abs)) for instance in literals.tolist())


def _never(rows: Places, cubes: Places, samples: Words) -> Bits:
    """The cubes that no sample shows over the variables of any row."""
    left = np.arange(len(cubes))
    count = max(1, LARGEST_BLOCK // samples.shape[1])
    for at in range(0, len(rows), count):
        values = samples[rows[at : at + count].T].reshape(rows.shape[1], -1)
        left = left[~shown(np.concatenate([values, ~values]), cubes[left])]
    found = np.zeros(len(cubes), bool)
    found[left] = True
    return found


def shown(values: Words, cubes: Places) -> Bits:
    """The cubes, as rows of literals, that some sample shows; row i of `values` belongs to literal i."""
    found = np.zeros(len(cubes), bool)
    at, block = 0, FIRST_BLOCK
    left = np.arange(len(cubes))
    while at < values.shape[1] and len(left):
        part = values[:, at : at + block]
        words = part[cubes[left, 0]]
        for column in cubes[left, 1:].T:
            words &= part[column]
        hit = words.any(axis=1)
        found[left[hit]] = True
        left, at = left[~hit], at + block
        block = max(FIRST_BLOCK, min(4 * block, LARGEST_BLOCK // (len(left) or 1)))
    return found


def left_unseen(cubes: Sequence[Cube], samples: Words) -> list[Cube]:
    """Those of the cubes that no sample shows."""
    values = np.concatenate([samples, ~samples])
    found: list[Cube] = []
    for size in sorted({len(cube) for cube in cubes}):
        some = np.array([cube for cube in cubes if len(cube) == size], np.int64)
        literals: npt.NDArray[np.int64] = np.where(some > 0, some - 1, len(samples) - some - 1)
        found += (tuple(cube) for cube in some[~shown(values, literals)].tolist())
    return found
