"""The naive oracle: every property decided by plain enumeration, as literally as its definition reads.

`decide` answers all checks but `equivalent` (see `oracle_equivalence`); whether shown runs really are a refutation
is judged in `oracle_traces`.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable, Hashable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cache
from itertools import count, permutations
from typing import Any, TypeVar

from oracle_world import Schedule, Situation, State, Unaskable, World, components, reach, world_of

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, topological

Options = Mapping[str, Any]
Distance = tuple[int, int]
V = TypeVar("V", bound=Hashable)
FUNDAMENTAL_ONLY = ("race-free", "hazard-free", "essential-hazard-free", "equivalent")


@dataclass(frozen=True)
class Verdict:
    """`proved` or `refuted`; whether a proof is vacuous; facts about the property.

    `shortest`, where it is given: the fewest (steps in which an input switches, steps) of a run that refutes.
    """

    verdict: str
    vacuous: bool = False
    facts: dict[str, Any] = field(default_factory=dict)
    shortest: Distance | None = None


def decide(circuit: Circuit, environment: Environment, check: str, options: Options) -> Verdict:
    """The verdict on one property. Raises `Unaskable` where the question is an input error."""
    if check in FUNDAMENTAL_ONLY and environment.mode != "fundamental":
        raise Unaskable(f"`{check}` is a property of fundamental mode")
    world = world_of(circuit, environment)
    if not world.vectors():
        raise Unaskable("no input vector satisfies `assume`")
    verdict = CHECKS[check](world, options)
    if check in ("settles", "race-free") and verdict.verdict == "refuted":
        single = CHECKS[check](World(replace(circuit, winners="one"), environment), options)
        verdict.facts["needs_simultaneous"] = single.verdict == "proved"
    return verdict


def reachable(circuit: Circuit, environment: Environment) -> set[State]:
    """The reachable total states, each as the set of inputs and nodes that are 1."""
    return {at.state for at in world_of(circuit, environment).reachable}


def outcome(
    circuit: Circuit, environment: Environment, state: State, change: frozenset[str]
) -> tuple[set[State], bool]:
    """The stable total states in which the response to a change can end, and whether it can oscillate for ever."""
    world = world_of(circuit, environment)
    response = world.response(state, world.changes(state)[change])
    settled = {at.state for at in response if world.ended(at)}
    return settled, bool(world.oscillations(at.state for at in response if not at.waiting))


def verdict_of(holds: bool, vacuous: bool = False, shortest: Distance | None = None, **facts: Any) -> Verdict:
    # Section 7 speaks of verdicts; here only a proof can be vacuous, a refutation shows something that happens.
    return Verdict("proved" if holds else "refuted", vacuous and holds, facts, None if holds else shortest)


# ---- stable states ---------------------------------------------------------------------------------------------------


def stable_states(world: World, options: Options) -> Verdict:
    """For every input vector that `assume` allows, the number of stable internal states is within the bounds."""
    least, most = options.get("at-least", 1), options.get("at-most")
    if most is not None and most < least:
        raise Unaskable("`at-most` is below `at-least`")
    counts = [sum(world.stable(s) for s in world.completions(vector)) for vector in world.vectors()]
    return verdict_of(all(least <= n and (most is None or n <= most) for n in counts), counts=sorted(counts))


# ---- fundamental mode ------------------------------------------------------------------------------------------------


def resting(world: World) -> set[State]:
    """The reachable stable total states in which the environment may begin a change."""
    return {at.state for at in world.reachable if world.ended(at)}


def exercised(world: World) -> bool:
    """Whether some reachable stable total state has an allowed input change."""
    return any(world.moves(at) for at in world.reachable if world.stable(at.state))


def ranged(world: World) -> dict[str, int]:
    """How many stable total states were visited, and how many sets of inputs that may change in them."""
    states = resting(world)
    return {"stable_states": len(states), "input_changes": sum(len(world.changes(s)) for s in states)}


def settles(world: World, _options: Options) -> Verdict:
    """From no reachable total state, with the inputs held from there on, is a sustained oscillation possible.

    `some_run_settles` is read as the property with "some" in the place of "every": from each reachable total state,
    with the inputs held, some run settles. `ways_out` holds, for each oscillation, whether it can be left for a
    stable total state.
    """
    states = {at.state for at in world.reachable}
    found = world.oscillations(states)
    vacuous = not exercised(world) and all(map(world.stable, states))
    some = all(world.stable_ends([s]) for s in states)
    return verdict_of(not found, vacuous, some_run_settles=some, ways_out={bool(world.stable_ends(c)) for c in found})


def race_free(world: World, _options: Options) -> Verdict:
    """For each reachable stable state and allowed change, no two runs end in different stable total states."""
    ends = [world.ends(s, schedules) for s in resting(world) for schedules in world.changes(s).values()]
    return verdict_of(all(len(e) <= 1 for e in ends), not exercised(world), ranged=ranged(world))


def hazard_free(world: World, options: Options) -> Verdict:
    """In the response to a change each watched signal changes at most once; `hazards` lists all that can be shown.

    `shortest` leads to the offending change.
    """
    watched = options.get("signals", world.circuit.outputs)
    if not watched:
        raise Unaskable("nothing to watch")
    found = set(hazards(world, watched))
    shortest = shortest_hazard(world, watched) if found else None
    return verdict_of(not found, not exercised(world), shortest, hazards=found, ranged=ranged(world))


Hazard = tuple[str, str | None, str | None]


def hazards(world: World, watched: Sequence[str]) -> Iterator[Hazard]:
    """Signal, class and kind of each hazard that some run shows."""
    for state in resting(world):
        for change, schedules in world.changes(state).items():
            for name in watched:
                kind = hazard_kind(world, state, change, name)
                for offending in second_changes(world, state, schedules, name):
                    for label in hazard_classes(world, state, offending, name):
                        yield name, label, kind


def second_changes(world: World, state: State, schedules: set[Schedule], name: str) -> dict[Situation, Distance]:
    """The situations right after the second change of a signal in a response, with the way there from `state`."""

    def after(at: tuple[Situation, int]) -> Iterator[tuple[Situation, int]]:
        situation, changes = at
        for s in world.respond(situation) if changes < 2 else ():
            yield s, changes + (world.signal(name, s.state) != world.signal(name, situation.state))

    begun = {world.begin(state, schedule) for schedule in schedules}
    starts = {(s, int(world.signal(name, s.state) != world.signal(name, state))): (1, 1) for s in begun}
    found = cheapest(starts, after, lambda a, b: moved(world, a[0], b[0]))
    return {s: far for (s, changes), far in found.items() if changes == 2}


def shortest_hazard(world: World, watched: Sequence[str]) -> Distance:
    """The fewest (steps in which an input switches, steps) up to the second change of a watched signal."""
    far = distances(world)
    return min(
        (far[Situation(state)][0] + more[0], far[Situation(state)][1] + more[1])
        for state in resting(world)
        for schedules in world.changes(state).values()
        for name in watched
        for more in second_changes(world, state, schedules, name).values()
    )


def hazard_classes(world: World, state: State, offending: Situation, name: str) -> set[str | None]:
    """The classes of the runs that go on from the offending change.

    "To a stable total state" is read as to the end of the response, with no member of the burst outstanding.
    """
    before = world.signal(name, state)
    ends = [at.state for at in reach([offending], world.respond) if world.ended(at)]
    return {f"static-{before:d}" if world.signal(name, e) == before else "dynamic" for e in ends} or {None}


def hazard_kind(world: World, state: State, change: frozenset[str], name: str) -> str | None:
    """`function` or `logic` for a circuit without feedback, else null."""
    if has_feedback(world.circuit):
        return None
    return "function" if any(moves_settled(world, state, o, name) > 1 for o in permutations(change)) else "logic"


def moves_settled(world: World, state: State, order: tuple[str, ...], name: str) -> int:
    """How often a signal changes when the inputs change in this order, the circuit settling after each.

    0 for an order through a vector that `assume` forbids: it does not count.
    """
    if not world.lawful(state, tuple(frozenset({x}) for x in order)):
        return 0
    changes = 0
    for x in order:
        (settled,) = world.stable_ends([state ^ {x}])
        changes += world.signal(name, settled) != world.signal(name, state)
        state = settled
    return changes


@cache
def has_feedback(circuit: Circuit) -> bool:
    """Whether some node's expression reads the node, directly or through others."""

    def reads(name: str) -> set[str]:
        e: Expr | None = circuit.excitation.get(name, circuit.defined.get(name))
        return {leaf.name for leaf in topological([e]) if leaf.op == "var"} if e is not None else set()

    return any(n in reach(reads(n), reads) for n in circuit.nodes)


def essential_hazard_free(world: World, _options: Options) -> Verdict:
    """One change and three changes of a single input lead to one and the same internal state."""
    pairs = [(s, x) for s in resting(world) for x in singles(world, s)]
    # "An allowed input change" (section 7) is read as one that this property speaks of: of a single input.
    return verdict_of(all(len(rows_after(world, s, x)) <= 1 for s, x in pairs), not pairs)


def singles(world: World, state: State) -> set[str]:
    """The single inputs that may change in a stable total state, whatever `changes` says."""
    return {x for x in world.willing(state) if world.admits(state ^ {x})}


def rows_after(world: World, state: State, x: str) -> set[State]:
    """The internal states after one change and after three changes of `x`, with settling between."""

    def once(states: set[State]) -> set[State]:
        return {end for s in states if x in singles(world, s) for end in world.stable_ends([s ^ {x}])}

    first = once({state})
    return {s - world.inputs(s) for s in first | once(once(first))}


# ---- either mode -----------------------------------------------------------------------------------------------------


def distances(world: World) -> dict[Situation, Distance]:
    """For each reachable situation the fewest (steps in which an input switches, steps) that lead there."""
    return cheapest({Situation(s): (0, 0) for s in world.starts()}, world.moves, lambda a, b: moved(world, a, b))


def cheapest(
    starts: Mapping[V, Distance], after: Callable[[V], Iterable[V]], cost: Callable[[V, V], int]
) -> dict[V, Distance]:
    """The least (costs, moves) that lead to each vertex, counted on from what the starts have."""
    best: dict[V, Distance] = {}
    number = count()
    queue = [(*far, next(number), v) for v, far in starts.items()]
    heapq.heapify(queue)
    while queue:
        costs, moves, _, v = heapq.heappop(queue)
        if v not in best:
            best[v] = costs, moves
            for w in after(v):
                heapq.heappush(queue, (costs + cost(v, w), moves + 1, next(number), w))
    return best


def moved(world: World, at: Situation, after: Situation) -> int:
    """1 if some input switches on the way, else 0."""
    return int(world.inputs(at.state) != world.inputs(after.state))


def nowhere(world: World, bad: Callable[[Situation], bool], vacuous: bool = False) -> Verdict:
    """No reachable situation is bad."""
    found = [at for at in world.reachable if bad(at)]
    return verdict_of(not found, vacuous, min(map(distances(world).__getitem__, found)) if found else None)


def invariant(world: World, options: Options, wanted: bool) -> Verdict:
    """The expression has the wanted value in every reachable total state, or in every stable one."""
    everywhere = options.get("when", "always") == "always"
    counted = {at for at in world.reachable if everywhere or world.stable(at.state)}
    return nowhere(world, lambda at: at in counted and world.value(options["expr"], at.state) != wanted, not counted)


def deadlock_free(world: World, _options: Options) -> Verdict:
    """In every reachable total state some node is excited or some input may change."""
    return nowhere(world, lambda at: not world.moves(at))


def speed_independent(world: World, options: Options) -> Verdict:
    """No step or input change takes away the excitation of a node that did not itself switch."""
    excused = set(options.get("except", ()))

    def robs(at: Situation, after: Situation) -> bool:
        waited = world.excited(at.state) - (at.state ^ after.state)
        return bool(waited - world.excited(after.state) - excused)

    found = [(at, after) for at in world.reachable for after in world.moves(at) if robs(at, after)]
    far = distances(world) if found else {}
    costs = [(far[at][0] + moved(world, at, after), far[at][1] + 1) for at, after in found]
    return verdict_of(not found, shortest=min(costs, default=None))


def leads_to(world: World, options: Options) -> Verdict:
    """From every reachable total state with `from` true, every fair run has `to` true, then or later."""
    concerned = {at for at in world.reachable if world.value(options["from"], at.state)}

    def avoids(at: Situation) -> bool:
        return not world.value(options["to"], at.state)

    def after(at: Situation) -> list[Situation]:
        return [s for s in world.moves(at) if avoids(s)]

    region = reach(filter(avoids, concerned), after)
    ends = any(may_end(world, at) for at in region)
    return verdict_of(not ends and not any(fair_for_ever(world, c) for c in components(region, after)), not concerned)


def may_end(world: World, at: Situation) -> bool:
    """Whether a run may end here: nothing that may not wait for ever is waiting."""
    return not world.pressing(at.state) and not at.waiting


def fair_for_ever(world: World, component: set[Situation]) -> bool:
    """Whether a fair run can go round a component for ever; a burst once begun is finished."""
    states = [at.state for at in component]
    return world.goes_round(states, world.pressing) and not all(at.waiting for at in component)


# ---- power-up --------------------------------------------------------------------------------------------------------


def power_up(world: World, options: Options) -> list[State]:
    """The vectors of `sequence`, as the inputs that are 1. Raises `Unaskable` for one that violates `assume`."""
    sequence = [frozenset(x for x, v in table.items() if v) for table in options["sequence"]]
    if not sequence or any(set(table) != set(world.circuit.inputs) for table in options["sequence"]):
        raise Unaskable("`sequence` must be a list of tables that each name every input")
    if not all(map(world.admits, sequence)):
        raise Unaskable("a vector of `sequence` violates `assume`")
    return sequence


def initialises(world: World, options: Options) -> Verdict:
    """From every internal state the sequence of input vectors leads every fair run to one and the same state."""
    sequence = power_up(world, options)
    states = set(world.completions(sequence[0]))
    for vector in sequence:
        applied = {s - world.inputs(s) | vector for s in states}
        if world.oscillations(applied):
            return verdict_of(False, oscillates=True)
        states = world.stable_ends(applied)
    return verdict_of(len(states) == 1, oscillates=False, ends=states)


CHECKS: dict[str, Callable[[World, Options], Verdict]] = {
    "stable-states": stable_states,
    "settles": settles,
    "race-free": race_free,
    "hazard-free": hazard_free,
    "essential-hazard-free": essential_hazard_free,
    "always": lambda world, options: invariant(world, options, True),
    "never": lambda world, options: invariant(world, options, False),
    "deadlock-free": deadlock_free,
    "speed-independent": speed_independent,
    "leads-to": leads_to,
    "initialises": initialises,
}
