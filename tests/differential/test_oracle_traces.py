"""Runs worked by hand: those that refute a check, and those that only seem to."""

from __future__ import annotations

from dataclasses import replace

from oracle_equivalence import offending_pair
from oracle_traces import offending, trace
from oracle_world import State
from worked import BURST, DIVIDER, FOLLOWER, MULTIPLEXER, NOR_LATCH, RING, SINGLE, TOGETHER, circuit, expression, states

from settled.models.environment import Environment
from settled.models.logic import var

RACE = [states("s r", "", "q"), states("s r", "", "p")]
LASSO = states("", "en", "en y")
GLITCH = states("a b s g z", "a b g z", "a b z", "a b", "a b n", "a b n h", "a b n h z")


def test_a_race_is_two_complete_responses_to_one_change() -> None:
    shown = [trace(NOR_LATCH, run) for run in RACE]
    assert offending(NOR_LATCH, TOGETHER, "race-free", {}, shown) is None
    assert offending(NOR_LATCH, TOGETHER, "race-free", {}, shown[:1]) == "two runs were expected"
    assert offending(NOR_LATCH, TOGETHER, "race-free", {}, shown[:1] * 2) == "both runs end in the same state"
    unfinished = [shown[0], trace(NOR_LATCH, RACE[1][:2])]
    assert offending(NOR_LATCH, TOGETHER, "race-free", {}, unfinished)
    assert offending(NOR_LATCH, SINGLE, "race-free", {}, shown) == "no lawful move leads to step 1"


def test_a_race_under_bursts_includes_the_order_of_arrival() -> None:
    one, two = states("s r", "s", "s q", "q"), states("s r", "r", "r p", "p")
    shown = [trace(NOR_LATCH, run) for run in (one, two)]
    assert offending(NOR_LATCH, BURST, "race-free", {}, shown) is None
    other_set = [shown[0], trace(NOR_LATCH, states("s r", "r", "r p"))]
    assert offending(NOR_LATCH, BURST, "race-free", {}, other_set)


def test_an_oscillation_is_a_fair_loop_with_the_inputs_held() -> None:
    assert offending(RING, SINGLE, "settles", {}, [trace(RING, LASSO, 1)]) is None
    assert offending(RING, SINGLE, "settles", {}, [trace(RING, LASSO)]) == "the run has no loop"
    assert offending(RING, SINGLE, "settles", {}, [trace(RING, LASSO, 2)]) == "no lawful move closes the loop"
    assert offending(FOLLOWER, SINGLE, "settles", {}, [trace(FOLLOWER, states("", "d"), 0)])
    passing = circuit("x", p="~z & x & ~q", q="~z & x & p", z="x | z")
    chase = trace(passing, states("", "x", "x p", "x p q", "x q"), 1)
    assert offending(passing, SINGLE, "settles", {}, [chase]) == "the loop is not fair"


def test_what_a_trace_says_of_its_states_must_be_true() -> None:
    good = trace(RING, LASSO, 1)
    for key, value in (("excited", []), ("switched", ["y"]), ("stable", True), ("state", {"en": 1, "y": 1})):
        steps = [*good["steps"][:1], {**good["steps"][1], key: value}, *good["steps"][2:]]
        assert offending(RING, SINGLE, "settles", {}, [{**good, "steps": steps}])


def test_a_hazard_shows_two_changes_and_its_class() -> None:
    def said(label: str | None, kind: str | None, run: list[State]) -> str | None:
        facts = {"hazard": {"signal": "z", "class": label, "kind": kind}}
        return offending(MULTIPLEXER, SINGLE, "hazard-free", {}, [trace(MULTIPLEXER, run)], facts)

    assert said("static-1", "logic", GLITCH) is None
    assert (
        said("static-1", "function", GLITCH)
        == said("dynamic", "logic", GLITCH)
        == "class or kind of the hazard is wrong"
    )
    assert said("static-1", "logic", GLITCH[:-1]) == "no watched signal changes twice in one response"
    again = [*GLITCH, *states("a b s n h z")]
    assert said("static-1", "logic", again) == "no watched signal changes twice in one response"


def test_runs_of_the_other_checks() -> None:
    q_rises = [trace(FOLLOWER, states("", "d", "d g", "d g q"))]
    quiet = Environment(start={"d": 0, "g": 0, "q": 0})
    assert offending(FOLLOWER, quiet, "never", {"expr": var("q")}, q_rises) is None
    assert offending(FOLLOWER, quiet, "always", {"expr": var("q")}, q_rises) == "the last state keeps the property"
    unstable = {"expr": expression("g"), "when": "stable"}
    assert offending(FOLLOWER, quiet, "never", unstable, [trace(FOLLOWER, states("", "d", "d g"))])
    robbed = [trace(FOLLOWER, states("", "d", "d g", "g"))]
    free = replace(quiet, mode="input-output")
    assert offending(FOLLOWER, free, "speed-independent", {}, robbed) is None
    assert offending(FOLLOWER, free, "speed-independent", {"except": ["q"]}, robbed)
    assert offending(FOLLOWER, quiet, "deadlock-free", {}, q_rises) == "the last state is no dead end"
    rests = {"from": var("d"), "to": var("q")}
    assert offending(FOLLOWER, quiet, "leads-to", rests, [trace(FOLLOWER, states("", "d"))]) is None
    assert offending(FOLLOWER, quiet, "leads-to", rests, [trace(FOLLOWER, states("", "d", "d g"))])


def test_runs_of_essential_hazards_and_of_power_up() -> None:
    once = states("", "x", "x p")
    thrice = [*once, *states("p", "p q", "x p q", "x q")]
    shown = [trace(DIVIDER, run) for run in (once, thrice)]
    assert offending(DIVIDER, SINGLE, "essential-hazard-free", {}, shown) is None
    twice = [shown[0], trace(DIVIDER, thrice[:5])]
    assert offending(DIVIDER, SINGLE, "essential-hazard-free", {}, twice)
    hold = {"sequence": [{"s": 0, "r": 0}]}
    ends = [trace(NOR_LATCH, states("", "q")), trace(NOR_LATCH, states("p"))]
    assert offending(NOR_LATCH, SINGLE, "initialises", hold, ends) is None
    assert offending(NOR_LATCH, SINGLE, "initialises", hold, [trace(NOR_LATCH, states("", "p q"), 0)]) is None
    reset = {"sequence": [{"s": 0, "r": 1}, {"s": 0, "r": 0}]}
    ends = [trace(NOR_LATCH, states("r", "r p", *more)) for more in ((), ("p",))]
    assert (
        offending(NOR_LATCH, SINGLE, "initialises", reset, ends)
        == "a run ends before the whole sequence has been applied"
    )


def test_runs_of_stable_states() -> None:
    loop = [trace(RING, states("en", "en y"), 0)]
    assert offending(RING, SINGLE, "stable-states", {}, loop) is None
    assert offending(RING, SINGLE, "stable-states", {}, [trace(RING, states("en"))]) == "the run has no loop"
    two = [trace(NOR_LATCH, states(n)) for n in "qp"]
    assert offending(NOR_LATCH, SINGLE, "stable-states", {"at-most": 1}, two) is None
    assert offending(NOR_LATCH, SINGLE, "stable-states", {"at-most": 2}, two) == "the bounds are kept"


def test_runs_that_show_a_difference() -> None:
    one, other = replace(circuit("s r", "q", q="~r & (s | q)"), name="one"), circuit("s r", "q", q="s | ~r & q")
    start = Environment(start={"s": 0, "r": 0, "q": 0})
    left, right = states("", "s", "s q", "s q r", "s r"), states("", "s", "s q", "s q r")
    assert offending_pair(one, other, start, None, [trace(one, left), trace(other, right)]) is None
    short = [trace(one, left[:3]), trace(other, right[:3])]
    assert offending_pair(one, other, start, None, short) == "the outputs agree"
    crossed = [trace(one, left), trace(other, states("", "r", "r s", "r s q"))]
    assert offending_pair(one, other, start, None, crossed) == "the runs do not go through the same changes"
    assert offending_pair(one, one, start, None, [trace(one, left)] * 2) == "both start states have good partners"


def test_a_side_that_does_not_settle_and_a_start_state_without_partner() -> None:
    hold, ring = replace(circuit("a", "q", q="q"), name="hold"), circuit("a", "q", q="a & ~q")
    low, high = Environment(start={"a": 0, "q": 0}), Environment(start={"a": 1, "q": 0})
    left = trace(hold, states("", "a"))
    assert offending_pair(hold, ring, low, None, [left, trace(ring, states("", "a", "a q"), 1)]) is None
    assert offending_pair(hold, ring, low, None, [left, trace(ring, states("", "a", "a q"))])
    assert offending_pair(hold, ring, high, None, [trace(hold, states("a"))]) is None
    assert offending_pair(hold, ring, low, None, [trace(hold, states(""))]) == "the start state has partners"


def test_a_lasso_that_avoids_the_goal_is_fair() -> None:
    goal = {"from": var("en"), "to": expression("~en")}
    assert offending(RING, SINGLE, "leads-to", goal, [trace(RING, LASSO, 1)]) is None
    late = {"from": var("en"), "to": var("y")}
    assert offending(RING, SINGLE, "leads-to", late, [trace(RING, LASSO, 1)]) == "`to` is true afterwards"
    wish = {"from": var("d"), "to": var("q")}
    again = trace(FOLLOWER, states("", "d", "d g"), 1)
    assert offending(FOLLOWER, free_start("d g q"), "leads-to", wish, [again]) is None
    wire = circuit("a b", "q", q="a")
    held = trace(wire, states("", "a", "a b"), 1)
    stuck = offending(wire, free_start("a b q"), "leads-to", {"from": var("a"), "to": var("q")}, [held])
    assert stuck == "the loop is not fair"


def free_start(names: str) -> Environment:
    return Environment(mode="input-output", start=dict.fromkeys(names.split(), 0))
