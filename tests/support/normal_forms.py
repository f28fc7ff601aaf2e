"""The runs that must be shown, by brute force: every candidate is found and compared as the definition reads.

Fewest steps that change an input, then fewest steps, then fewest switchings of nodes in all, then the least values:
state by state, in each the signals in their order. Of two runs shown together the numbers add up; the values of the
lesser run come first.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable, Hashable, Iterable, Iterator, Mapping
from itertools import combinations, count
from typing import NamedTuple, TypeVar

from oracle import Options, resting, singles
from oracle_world import Situation, State, World

V = TypeVar("V", bound=Hashable)
Row = tuple[int, ...]


class Way(NamedTuple):
    """A run with what it is compared by: steps that change an input, steps, switchings, rows of values."""

    changes: int
    steps: int
    nodes: int
    rows: tuple[Row, ...]

    def then(self, other: Way) -> Way:
        """This run and another that begins where it ends."""
        return Way(*(a + b for a, b in zip(self[:3], other[:3], strict=True)), self.rows + other.rows[1:])


Shown = tuple[list[Way], int | None]
"""The runs of a refutation, and where the last one closes its loop."""


def row(world: World, state: State) -> Row:
    """The values of inputs and nodes in their order."""
    return tuple(int(s in state) for s in world.circuit.inputs + world.circuit.nodes)


def at(world: World, state: State) -> Way:
    """The run without a step."""
    return Way(0, 0, 0, (row(world, state),))


def step(world: World, before: State, after: State) -> Way:
    """The run of one step."""
    moved = before ^ after
    changes = int(bool(world.inputs(moved)))
    return Way(changes, 1, len(moved - world.inputs(moved)), (row(world, before), row(world, after)))


def least(
    world: World, starts: Mapping[V, Way], after: Callable[[V], Iterable[V]], state: Callable[[V], State]
) -> dict[V, Way]:
    """The least run to each vertex, counted on from what the starts have (Dijkstra, recalled)."""
    number, best = count(), {}
    queue = [(way, next(number), v) for v, way in starts.items()]
    heapq.heapify(queue)
    while queue:
        way, _, v = heapq.heappop(queue)
        if v not in best:
            best[v] = way
            for w in after(v):
                heapq.heappush(queue, (way.then(step(world, state(v), state(w))), next(number), w))
    return best


def ways(world: World) -> dict[Situation, Way]:
    """The least run to each reachable situation."""
    return least(world, {Situation(s): at(world, s) for s in world.starts()}, world.moves, lambda v: v.state)


def least_pair(pairs: Iterable[tuple[Way, Way]]) -> Shown:
    """The least of pairs of runs, the lesser run of each first."""

    def key(pair: list[Way]) -> tuple[int, ...]:
        return tuple(a + b for a, b in zip(pair[0][:3], pair[1][:3], strict=True)), pair[0].rows, pair[1].rows

    return min((sorted(pair) for pair in pairs), key=key), None


# ---- one run ---------------------------------------------------------------------------------------------------------


def to_a(world: World, bad: Callable[[Situation], bool]) -> Shown:
    """The run to a bad situation."""
    return [min(way for v, way in ways(world).items() if bad(v))], None


def invariant(world: World, options: Options, wanted: bool) -> Shown:
    def bad(v: Situation) -> bool:
        counted = options.get("when", "always") == "always" or world.stable(v.state)
        return counted and world.value(options["expr"], v.state) != wanted

    return to_a(world, bad)


def speed_independent(world: World, options: Options) -> Shown:
    excused = set(options.get("except", ()))
    found = []
    for v, way in ways(world).items():
        for w in world.moves(v):
            if (world.excited(v.state) - (v.state ^ w.state)) - world.excited(w.state) - excused:
                found.append(way.then(step(world, v.state, w.state)))
    return [min(found)], None


def hazard_free(world: World, options: Options) -> Shown:
    """The run up to the offending change."""
    found = []
    for v, way in ways(world).items():
        if not world.ended(v):
            continue
        for schedule in world.schedules(v.state):
            first = world.begin(v.state, schedule)
            for name in options.get("signals", world.circuit.outputs):

                def moved(a: State, b: State, name: str = name) -> int:
                    return int(world.signal(name, a) != world.signal(name, b))

                def after(at: tuple[Situation, int]) -> Iterator[tuple[Situation, int]]:
                    for w in world.respond(at[0]) if at[1] < 2 else ():
                        yield w, at[1] + moved(at[0].state, w.state)

                start = {(first, moved(v.state, first.state)): way.then(step(world, v.state, first.state))}
                reached = least(world, start, after, lambda v: v[0].state)
                found += [way for (_, times), way in reached.items() if times == 2]
    return [min(found)], None


# ---- two runs --------------------------------------------------------------------------------------------------------


def race_free(world: World, _options: Options) -> Shown:
    before = ways(world)
    found = []
    for state in resting(world):
        for schedules in world.changes(state).values():
            begun = {world.begin(state, schedule) for schedule in schedules}
            start = {v: step(world, state, v.state) for v in begun}
            ends: dict[State, Way] = {}
            for v, way in least(world, start, world.respond, lambda v: v.state).items():
                if world.ended(v):
                    ends[v.state] = min(way, ends.get(v.state, way))
            whole = [before[Situation(state)].then(way) for way in ends.values()]
            found += list(combinations(whole, 2))
    return least_pair(found)


def essential_hazard_free(world: World, _options: Options) -> Shown:
    before = ways(world)
    found = []
    for state in resting(world):
        for x in singles(world, state):

            def after(at: tuple[State, int], x: str = x) -> Iterator[tuple[State, int]]:
                now, changes = at
                yield from ((s, changes) for s in world.held(now))
                if changes < 3 and world.stable(now) and x in singles(world, now):
                    yield now ^ {x}, changes + 1

            reached = least(world, {(state, 0): before[Situation(state)]}, after, lambda v: v[0])
            ends = [(s - {x}, way) for (s, n), way in reached.items() if n in (1, 3) and world.stable(s)]
            found += [(a, b) for (p, a), (q, b) in combinations(ends, 2) if p - world.inputs(p) != q - world.inputs(q)]
    return least_pair(found)


# ---- runs that go round ----------------------------------------------------------------------------------------------

Waiting = frozenset[tuple[str, bool]]


def lassos(
    world: World,
    before: Mapping[V, Way],
    after: Callable[[V], Iterable[V]],
    state: Callable[[V], State],
    pressing: Callable[[V], Waiting],
) -> Iterator[tuple[Way, int]]:
    """The least fair lasso through each entry: its run, the return counted but not among the rows, and its loop."""
    for entry, way in before.items():

        def around(at: tuple[V, Waiting, bool], entry: V = entry) -> Iterator[tuple[V, Waiting, bool]]:
            v, left, home = at
            for w in after(v) if not home else ():
                yield w, left & pressing(w), w == entry and not left

        start = (entry, pressing(entry), False)
        reached = least(world, {start: at(world, state(entry))}, around, lambda v: state(v[0]))
        for (_, _, home), loop in reached.items():
            if home:
                whole = way.then(loop)
                yield whole._replace(rows=whole.rows[:-1]), len(way.rows) - 1


def settles(world: World, _options: Options) -> Shown:
    def after(v: Situation) -> Iterator[Situation]:
        return (Situation(s, v.waiting) for s in world.held(v.state))

    def pressing(v: Situation) -> Waiting:
        return frozenset((n, n in v.state) for n in world.excited(v.state))

    way, loop = min(lassos(world, ways(world), after, lambda v: v.state, pressing))
    return [way], loop


def leads_to(world: World, options: Options) -> Shown:
    Marked = tuple[Situation, bool]

    def avoids(v: Situation) -> bool:
        return not world.value(options["to"], v.state)

    def entered(v: Situation) -> bool:
        return avoids(v) and world.value(options["from"], v.state)

    def after(v: Marked) -> Iterator[Marked]:
        for w in world.moves(v[0]):
            if not v[1]:
                yield w, False
            if avoids(w) if v[1] else entered(w):
                yield w, True

    def pressing(v: Marked) -> Waiting:
        due = {(n, n in v[0].state) for n in world.pressing(v[0].state)}
        return frozenset(due | {(x, True) for instant in v[0].waiting for x in instant})

    begun = [Situation(s) for s in world.starts()]
    starts = {(v, False): at(world, v.state) for v in begun} | {
        (v, True): at(world, v.state) for v in begun if entered(v)
    }
    inside = {v: way for v, way in least(world, starts, after, lambda v: v[0].state).items() if v[1]}
    ends = [(way, 1, None) for v, way in inside.items() if not pressing(v)]
    round_ = [(way, 2, loop) for way, loop in lassos(world, inside, after, lambda v: v[0].state, pressing)]
    way, _, loop = min(ends + round_, key=lambda f: (f[0][:2], f[1], f[0], f[2]))
    return [way], loop


def stable_states(world: World, options: Options) -> Shown:
    """The least input vector with too few or too many stable states: those, or the least way to go round."""
    least, most = options.get("at-least", 1), options.get("at-most")
    counts = {v: [s for s in world.completions(v) if world.stable(s)] for v in world.vectors()}
    bad = [v for v, found in counts.items() if len(found) < least or (most is not None and len(found) > most)]
    vector = min(bad, key=lambda v: row(world, v))
    if counts[vector]:
        found = sorted(at(world, s) for s in counts[vector])
        return found[: max(least, (most or 0) + 1)], None

    def pressing(state: State) -> Waiting:
        return frozenset((n, n in state) for n in world.excited(state))

    start = {s: at(world, s) for s in world.completions(vector)}
    way, loop = min(lassos(world, start, world.held, lambda s: s, pressing))
    return [way], loop


SHOWN: dict[str, Callable[[World, Options], Shown]] = {
    "stable-states": stable_states,
    "settles": settles,
    "race-free": race_free,
    "hazard-free": hazard_free,
    "essential-hazard-free": essential_hazard_free,
    "always": lambda world, options: invariant(world, options, True),
    "never": lambda world, options: invariant(world, options, False),
    "deadlock-free": lambda world, _options: to_a(world, lambda v: not world.moves(v)),
    "speed-independent": speed_independent,
    "leads-to": leads_to,
}
