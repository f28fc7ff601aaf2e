"""The naive oracle against what is known without it: textbook circuits, theorems, relations between verdicts."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import replace
from functools import cache

import pytest
from oracle import CHECKS, decide, outcome, ranged, reachable
from oracle_equivalence import equivalent
from oracle_traces import unlawful
from oracle_world import Situation, State, Unaskable, World
from random_circuits import CHANGES, RACY, STYLES, random_case
from worked import (
    BURST,
    C_ELEMENT,
    CURED,
    DIVIDER,
    FOLLOWER,
    MULTIPLEXER,
    NOR_LATCH,
    RING,
    SINGLE,
    TOGETHER,
    circuit,
    expression,
    on,
)

from settled.models.environment import Environment, Guard
from settled.models.logic import var

# ---- textbook circuits (recalled) ----------------------------------------------------------------------------------


def test_nor_latch_released_at_one_instant_races_and_may_oscillate() -> None:
    """Unger, "Asynchronous Sequential Switching Circuits", 1969 (recalled); every text on the SR latch."""
    ends, oscillates = outcome(NOR_LATCH, TOGETHER, on("s r"), on("s r"))
    assert (ends, oscillates) == ({on("q"), on("p")}, True)
    settles, race_free = (decide(NOR_LATCH, TOGETHER, check, {}) for check in ("settles", "race-free"))
    assert settles.verdict == race_free.verdict == "refuted"
    assert settles.facts["needs_simultaneous"] and settles.facts["some_run_settles"]
    assert not race_free.facts["needs_simultaneous"]


def test_nor_latch_with_one_winner_settles_and_still_races() -> None:
    single = replace(NOR_LATCH, winners="one")
    assert outcome(single, TOGETHER, on("s r"), on("s r")) == ({on("q"), on("p")}, False)
    assert decide(single, TOGETHER, "settles", {}).verdict == "proved"
    assert decide(single, TOGETHER, "race-free", {}).verdict == "refuted"


def test_nor_latch_is_safe_when_one_input_changes_at_a_time_and_racy_under_bursts() -> None:
    for check in ("settles", "race-free", "essential-hazard-free", "speed-independent"):
        assert decide(NOR_LATCH, SINGLE, check, {}).verdict == "proved"
    assert decide(NOR_LATCH, BURST, "race-free", {}).verdict == "refuted"


def test_ring_only_oscillates_and_is_race_free() -> None:
    settles = decide(RING, SINGLE, "settles", {})
    assert settles.verdict == "refuted"
    assert settles.facts | {"ways_out": {False}} == settles.facts
    assert not settles.facts["needs_simultaneous"] and not settles.facts["some_run_settles"]
    assert decide(RING, SINGLE, "race-free", {}).verdict == "proved"


def test_transient_cycle_is_no_oscillation() -> None:
    """p and q chase each other only while z, which is excited all along, has not switched."""
    passing = circuit("x", p="~z & x & ~q", q="~z & x & p", z="x | z")
    assert decide(passing, SINGLE, "settles", {}).verdict == "proved"


def test_race_that_needs_two_winners() -> None:
    """From 00 both rise; alone, either one hands over to `w`; together they hold each other (made for this test)."""
    pair = circuit("x", p="x & ~w & (~q | p)", q="x & ~w & (~p | q)", w="x & (p ^ q | w)")
    race_free = decide(pair, SINGLE, "race-free", {})
    assert race_free.verdict == "refuted" and race_free.facts["needs_simultaneous"]


def test_multiplexer_has_a_static_1_hazard_that_the_consensus_term_cures() -> None:
    """McCluskey; Eichelberger 1965 (recalled)."""
    found = decide(MULTIPLEXER, SINGLE, "hazard-free", {})
    assert found.facts["hazards"] == {("z", "static-1", "logic")}
    assert decide(CURED, SINGLE, "hazard-free", {}).verdict == "proved"


def test_function_hazard_of_an_exclusive_or() -> None:
    gate = circuit("a b", "z", z="a ^ b")
    assert decide(gate, BURST, "hazard-free", {}).facts["hazards"] == {
        ("z", "static-0", "function"),
        ("z", "static-1", "function"),
    }
    assert decide(gate, TOGETHER, "hazard-free", {}).verdict == "proved"


def test_orders_through_forbidden_vectors_make_no_function_hazard() -> None:
    """z = a & ~n glitches while n lags; of the two orders of a and b only the forbidden one glitches when settled."""
    skewed = circuit("a b", "z", n="b", z="a & ~n")
    environment = Environment(changes="simultaneous", assume=(expression("~(a & ~b)"),))
    assert decide(skewed, environment, "hazard-free", {}).facts["hazards"] == {("z", "static-0", "logic")}
    anywhere = replace(environment, assume=())
    assert ("z", "static-0", "function") in decide(skewed, anywhere, "hazard-free", {}).facts["hazards"]


def test_dynamic_hazard_and_hazard_without_end() -> None:
    kick = circuit("a", "z", n="~a", d="a", z="a & n | d")
    assert ("z", "dynamic", "logic") in decide(kick, SINGLE, "hazard-free", {}).facts["hazards"]
    assert decide(RING, SINGLE, "hazard-free", {}).facts["hazards"] >= {("y", None, None)}


def test_divider_by_two_has_essential_hazards_and_a_latch_has_none() -> None:
    """Unger's rule of one and three changes, 1959 (recalled)."""
    assert decide(DIVIDER, SINGLE, "essential-hazard-free", {}).verdict == "refuted"
    assert decide(FOLLOWER, SINGLE, "essential-hazard-free", {}).verdict == "proved"


def test_three_changes_that_a_guard_stops_do_not_count() -> None:
    once = Environment(guards={"x": Guard(rises=expression("~q & ~p"), falls=expression("0"))}, start={"x": 0, "p": 0})
    assert decide(DIVIDER, once, "essential-hazard-free", {}).verdict == "proved"


@pytest.mark.parametrize(("stages", "explicit", "inverters"), [(1, 8, 12), (2, 16, 36), (3, 32, 108)])
def test_muller_pipeline(stages: int, explicit: int, inverters: int) -> None:
    """Muller and Bartky 1959 (recalled); counts 2^(N+2) and 4 * 3^N by hand induction."""
    ends = {"c0": "~c1", f"c{stages + 1}": f"c{stages}"}
    for inverted, count in ((False, explicit), (True, inverters)):
        nodes = dict(ends)
        for i in range(1, stages + 1):
            back = f"n{i}" if inverted else f"~c{i + 1}"
            nodes[f"c{i}"] = f"c{i - 1} & {back} | c{i} & (c{i - 1} | {back})"
            nodes |= {f"n{i}": f"~c{i + 1}"} if inverted else {}
        line = circuit("", **nodes)
        start = {n: int(n.startswith("n")) for n in nodes}
        environment = Environment(mode="input-output", start=start)
        assert len(reachable(line, environment)) == count
        for check in ("speed-independent", "deadlock-free"):
            assert decide(line, environment, check, {}).verdict == "proved"
        request = {"from": var("c0"), "to": var(f"c{stages}")}
        assert decide(line, environment, "leads-to", request).verdict == "proved"


# ---- input-output mode ---------------------------------------------------------------------------------------------

HANDSHAKE = {x: Guard(expression("~c"), expression("c")) for x in "ab"}
QUIET = dict.fromkeys("abc", 0)
POLITE = Environment(mode="input-output", guards=HANDSHAKE, start=QUIET)
EAGER = replace(POLITE, guards={x: replace(g, must=True) for x, g in HANDSHAKE.items()})


def test_c_element_with_a_polite_environment() -> None:
    assert decide(C_ELEMENT, POLITE, "speed-independent", {}).verdict == "proved"
    assert decide(C_ELEMENT, Environment(mode="input-output"), "speed-independent", {}).verdict == "refuted"
    assert len(reachable(C_ELEMENT, POLITE)) == 8


def test_an_input_may_rest_unless_it_must_move() -> None:
    answered = {"from": expression("a & ~c"), "to": var("c")}
    assert decide(C_ELEMENT, POLITE, "leads-to", answered).verdict == "refuted"
    assert decide(C_ELEMENT, EAGER, "leads-to", answered).verdict == "proved"


def test_dead_end_where_no_guard_is_true() -> None:
    stuck = replace(POLITE, guards={x: Guard(expression("~c"), expression("0")) for x in "ab"})
    assert decide(C_ELEMENT, stuck, "deadlock-free", {}).verdict == "refuted"
    assert decide(C_ELEMENT, stuck, "deadlock-free", {}).shortest == (1, 2)
    assert decide(C_ELEMENT, POLITE, "deadlock-free", {}).verdict == "proved"


def test_arbiter_robs_only_its_grants() -> None:
    arbiter = circuit("r1 r2", g1="r1 & ~g2", g2="r2 & ~g1")
    hold = {f"r{i}": Guard(expression(f"~g{i}"), expression(f"g{i}")) for i in (1, 2)}
    environment = Environment(mode="input-output", guards=hold, start={"r1": 0, "r2": 0, "g1": 0, "g2": 0})
    assert decide(arbiter, environment, "speed-independent", {}).verdict == "refuted"
    assert decide(arbiter, environment, "speed-independent", {"except": ["g1", "g2"]}).verdict == "proved"
    assert decide(arbiter, environment, "never", {"expr": expression("g1 & g2 & r1 & r2")}).verdict == "refuted"
    alone = replace(arbiter, winners="one")
    assert decide(alone, environment, "never", {"expr": expression("g1 & g2")}).verdict == "proved"


# ---- bursts --------------------------------------------------------------------------------------------------------


def test_a_burst_takes_only_orders_that_the_assumptions_admit() -> None:
    gate = circuit("a b", "z", z="a & ~b")
    never_alone = Environment(changes="burst", assume=(expression("~(a & ~b)"),), start={"a": 0, "b": 0})
    assert decide(gate, never_alone, "never", {"expr": var("z")}).verdict == "proved"
    neither = replace(never_alone, assume=(expression("~(a ^ b)"),))
    assert decide(gate, neither, "never", {"expr": var("a")}).verdict == "proved"
    assert decide(gate, replace(neither, changes="simultaneous"), "never", {"expr": var("a")}).verdict == "refuted"


def test_a_burst_once_begun_is_finished_and_two_arrivals_never_share_an_instant() -> None:
    gate = circuit("a b", z="a & b")
    both = Environment(changes="burst", guards={"b": Guard(rises=expression("~a"))}, start={"a": 0, "b": 0})
    apart = unlawful(gate, both, [{"a": 0, "b": 0, "z": 0}, {"a": 1, "b": 1, "z": 0}])
    assert apart == "no lawful move leads to step 1"
    lawful = [(0, 0, 0), (1, 0, 0), (1, 1, 0), (1, 1, 1)]
    assert unlawful(gate, both, [dict(zip("abz", s, strict=True)) for s in lawful]) is None
    leads = {"from": expression("a & ~b"), "to": var("z")}
    assert decide(gate, both, "leads-to", leads).verdict == "refuted"
    follower = circuit("a b", z="a")
    assert decide(follower, both, "leads-to", {"from": expression("a & ~z"), "to": var("z")}).verdict == "proved"


def test_guards_of_a_burst_are_evaluated_when_it_is_picked() -> None:
    """b may rise only while z = 0; z follows a, and may do so before b arrives."""
    follower = circuit("a b", z="a")
    environment = Environment(changes="burst", guards={"b": Guard(rises=expression("~z"))}, start={"a": 0, "b": 0})
    late = [(0, 0, 0), (1, 0, 0), (1, 0, 1), (1, 1, 1)]
    assert unlawful(follower, environment, [dict(zip("abz", s, strict=True)) for s in late]) is None
    single = replace(environment, changes="single")
    assert unlawful(follower, single, [dict(zip("abz", s, strict=True)) for s in late])


# ---- other checks --------------------------------------------------------------------------------------------------


def test_stable_states_counts_for_every_vector() -> None:
    assert decide(NOR_LATCH, SINGLE, "stable-states", {}).facts["counts"] == [1, 1, 1, 2]
    assert decide(NOR_LATCH, SINGLE, "stable-states", {"at-most": 1}).verdict == "refuted"
    assert decide(RING, SINGLE, "stable-states", {}).verdict == "refuted"


def test_initialises_needs_the_reset_and_the_right_release() -> None:
    reset, hold, both = {"s": 0, "r": 1}, {"s": 0, "r": 0}, {"s": 1, "r": 1}
    for sequence, verdict in (([reset, hold], "proved"), ([hold], "refuted"), ([both, hold], "refuted")):
        assert decide(NOR_LATCH, SINGLE, "initialises", {"sequence": sequence}).verdict == verdict


def test_input_errors() -> None:
    with pytest.raises(Unaskable):
        decide(RING, Environment(start={"en": 1}), "settles", {})
    with pytest.raises(Unaskable):
        decide(C_ELEMENT, POLITE, "race-free", {})
    with pytest.raises(Unaskable):
        decide(circuit("a", q="a"), SINGLE, "hazard-free", {})
    with pytest.raises(Unaskable):
        decide(FOLLOWER, Environment(assume=(expression("d & ~d"),)), "stable-states", {})


def test_vacuous_proofs() -> None:
    still = Environment(guards={x: Guard(expression("0"), expression("0")) for x in "dg"})
    for check in ("settles", "race-free", "essential-hazard-free", "hazard-free"):
        assert decide(FOLLOWER, still, check, {}).vacuous
        assert not decide(FOLLOWER, SINGLE, check, {}).vacuous
    leads = {"from": expression("excited(q)"), "to": var("q")}
    assert decide(FOLLOWER, still, "leads-to", leads).vacuous
    inverter = circuit("", p="~p")
    free = Environment(mode="input-output")
    assert decide(inverter, free, "never", {"expr": var("p"), "when": "stable"}).vacuous


# ---- equivalence ---------------------------------------------------------------------------------------------------


def test_latch_in_two_forms_and_two_priorities() -> None:
    single_node = circuit("s r", "q", q="~r & (s | q)")
    set_first = circuit("s r", "q", q="s | ~r & q")
    start = Environment(start={"s": 0, "r": 0, "q": 0})
    apart = Environment(start=start.start, assume=(expression("~(s & r)"),))
    assert equivalent(single_node, NOR_LATCH, start).verdict == "proved"
    assert equivalent(single_node, set_first, start).facts["fewest_changes"] == 2
    assert equivalent(single_node, set_first, apart).verdict == "proved"


def test_start_values_that_only_the_original_knows_bind_the_original_only() -> None:
    one, other = circuit("a", "q", q="q", m="a"), circuit("a", "q", q="q")
    both = equivalent(one, other, Environment(start={"q": 1}))
    original_only = equivalent(one, circuit("a", "q", q="q | a"), Environment(start={"m": 1, "q": 1}))
    assert both.verdict == original_only.verdict == "proved"
    assert equivalent(one, circuit("a", "q", q="q | a"), SINGLE).verdict == "refuted"


# ---- facts that hold of every circuit ------------------------------------------------------------------------------


@cache
def random_worlds(changes: str) -> list[World]:
    """Random circuits in fundamental mode, any number of winners."""
    found = []
    for i in range(100):
        styles = RACY if i % 2 else STYLES
        found.append(World(*random_case(i, mode="fundamental", changes=changes, winners="any", styles=styles)))
    return found


def verdict(world: World, check: str) -> str:
    return CHECKS[check](world, {}).verdict


def disabled_by(world: World, state: State, node: str) -> Iterator[str]:
    """What, switching alone, takes away the excitation of a node: other excited nodes, and inputs."""
    for other in world.excited(state) | set(world.circuit.inputs):
        if other != node and node not in world.excited(state ^ {other}):
            yield other


def has_disabling_ring(world: World, at: Situation) -> bool:
    """A set of excited nodes that disable one another, or a node that is disabled for good by what may switch."""
    state, excited = at.state, world.excited(at.state)
    arriving = at.waiting[0] if at.waiting else frozenset()
    ring = set(excited)
    while lost := {n for n in ring if not ring & set(disabled_by(world, state, n))}:
        ring -= lost
    alone = any(
        n not in world.excited(state ^ {n, other})
        for n in excited
        for other in disabled_by(world, state, n)
        if other in excited | arriving
    )
    return bool(ring) or alone


@pytest.mark.parametrize("changes", CHANGES)
def test_no_disabling_ring_and_settling_make_a_circuit_race_free(changes: str) -> None:
    seen: Counter[tuple[bool, str]] = Counter()
    for world in random_worlds(changes):
        if verdict(world, "settles") == "proved":
            seen[any(has_disabling_ring(world, at) for at in world.reachable), verdict(world, "race-free")] += 1
    assert seen[False, "refuted"] == 0
    assert min(seen[False, "proved"], seen[True, "refuted"]) >= 4


@pytest.mark.parametrize("changes", CHANGES)
def test_speed_independent_and_settling_make_a_circuit_race_free(changes: str) -> None:
    both = [
        world
        for world in random_worlds(changes)
        if verdict(world, "settles") == "proved" and verdict(world, "speed-independent") == "proved"
    ]
    assert len(both) >= 30
    assert {verdict(world, "race-free") for world in both} == {"proved"}


def test_a_burst_visits_no_total_state_that_it_could_not_stop_in() -> None:
    """The members that have arrived are themselves a burst that the environment might have picked."""
    for world in random_worlds("burst"):
        assert {at.state for at in world.reachable} == {at.state for at in world.reachable if not at.waiting}


@pytest.mark.parametrize("check", ["settles", "race-free", "hazard-free", "speed-independent", "essential-hazard-free"])
def test_what_fails_with_fewer_runs_fails_with_more(check: str) -> None:
    """One winner against any; single changes against simultaneous ones and bursts."""
    refuted = 0
    for seed in range(60):
        plain, environment = random_case(seed, mode="fundamental", changes="single", winners="one", styles=RACY)
        if decide(plain, environment, check, {}).verdict == "refuted":
            refuted += 1
            assert decide(replace(plain, winners="any"), environment, check, {}).verdict == "refuted"
            for changes in ("simultaneous", "burst"):
                more = replace(environment, changes=changes)
                assert decide(plain, more, check, {}).verdict == "refuted"
    assert refuted >= 3


def test_a_circuit_that_settles_and_does_not_race_is_equivalent_to_itself() -> None:
    for changes in CHANGES:
        for world in random_worlds(changes)[:50]:
            sound = verdict(world, "settles") == "proved" and verdict(world, "race-free") == "proved"
            same = equivalent(world.circuit, world.circuit, world.environment)
            assert same.verdict == "proved" or not sound


def test_ranges_are_counted() -> None:
    assert ranged(World(FOLLOWER, SINGLE)) == {"stable_states": 6, "input_changes": 12}
