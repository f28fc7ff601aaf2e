"""Concrete delays: simulated with them, a circuit makes the very run; where there are none, a search finds none."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from itertools import pairwise, product
from random import Random

import pytest
from judging import session_of
from random_circuits import random_case, random_question
from timed import Event, simulate

from settled.models.circuit import Circuit
from settled.models.logic import and_, not_, or_, var
from settled.models.specification import Property
from settled.models.states import Run, excited, members
from settled.verify import check, timing
from settled.verify.inputs import gallery
from settled.verify.result import Trace, trace
from settled.verify.session import Settings
from settled.verify.timing import Schedule, schedule

PAIR = Circuit("pair", ("x",), ("p", "q"), {"p": var("x"), "q": var("x")})
PULSE = Circuit("pulse", ("x",), ("n", "g"), {"n": not_(var("x")), "g": and_(var("x"), var("n"))})


def run_of(circuit: Circuit, start: str, *steps: str, loop: int | None = None) -> Trace:
    """A run from the signals that are 1 at its start and what switches in each step."""
    states = [sum(1 << circuit.place[s] for s in start.split())]
    for step in steps:
        states.append(states[-1] ^ sum(1 << circuit.place[s] for s in step.split()))
    return trace(circuit, Run("a run", tuple(states), loop, circuit.name))


def events_of(circuit: Circuit, found: Schedule, made: Trace) -> list[Event]:
    """What the schedule says will happen."""
    states = [made.steps[place].state for place in found.positions]
    moved = [frozenset(s for s in circuit.signals if a[s] != b[s]) for a, b in pairwise(states)]
    return list(zip(found.times[1:], moved, strict=True))


def assert_happens(circuit: Circuit, made: Trace, found: Schedule) -> None:
    expected = events_of(circuit, found, made)
    changes = {time: moved & set(circuit.inputs) for time, moved in expected if moved & set(circuit.inputs)}

    def delay(node: str, rises: bool, number: int) -> int:
        delays = found.delay(node, rises)
        return delays[min(number, len(delays) - 1)]

    end = found.times[-1]
    assert simulate(circuit, made.steps[0].state, changes, delay, end) == expected


def possible(circuit: Circuit, made: Trace, keys: Sequence[tuple[str, bool]], longest: int) -> bool:
    """Whether delays up to `longest`, one for each of `keys`, make a run whose inputs change at rest; by trying."""
    choices = product(range(1, longest + 1), repeat=len(keys))
    return any(_happens(circuit, made, dict(zip(keys, numbers, strict=True)), longest) for numbers in choices)


def _happens(circuit: Circuit, made: Trace, table: dict[tuple[str, bool], int], longest: int) -> bool:
    """Play the run step by step; an input changes one unit after the step before it."""

    def delay(node: str, rises: bool, _: int) -> int:
        return table[(node, rises) if (node, rises) in table else (node, True)]

    time, changes = 0, {}
    for i, step in enumerate(made.steps[1:]):
        moved = frozenset(step.switched)
        if moved <= set(circuit.inputs):
            assert made.steps[i].stable
            changes[time + 1] = moved
        got = simulate(circuit, made.steps[0].state, changes, delay, time + longest)
        if len(got) <= i or got[i][1] != moved:
            return False
        time = got[i][0]
    return True


def wander(rng: Random, circuit: Circuit, state: int, length: int) -> Trace:
    """A run at random: one input changes where nothing is excited, else some excited nodes switch."""
    states = [state]
    for _ in range(length):
        waiting = list(members(excited(circuit, states[-1]) or circuit.input_mask & -circuit.input_mask))
        states.append(states[-1] ^ sum(rng.sample(waiting, rng.randint(1, len(waiting)))))
    return trace(circuit, Run("a walk", tuple(states), None, circuit.name))


@pytest.mark.parametrize("name", ["level_latch", "wake_latch_unruled", "float_chatter", "sample_flip_flop_wires"])
def test_runs_of_the_gallery_happen_with_their_delays(name: str) -> None:
    report = check(gallery()[name])
    traces = [made for result in report.results for made in result.traces]
    assert traces
    for made in traces:
        assert_happens(report.circuit, made, schedule(made, report.circuit.nodes))


@pytest.mark.parametrize("name", ["race-free", "hazard-free", "settles", "speed-independent", "leads-to"])
def test_random_runs_happen_with_their_delays(name: str) -> None:
    seen = 0
    for seed in range(40):
        question = random_question(f"timing {seed}", name)
        options = (Property(name, name, question.options),)
        (result,) = session_of(*question[:2], options, Settings(seconds=20)).results()
        for made in result.traces:
            assert_happens(question.circuit, made, schedule(made, question.circuit.nodes))
            seen += 1
    assert seen >= 10


def test_one_delay_a_gate_when_that_is_enough_and_small_numbers() -> None:
    made = run_of(PAIR, "", "x", "p", "q", "x", "p", "q")
    found = schedule(made, PAIR.nodes)
    assert (found.kind, found.delay("p", True), found.delay("q", False)) == ("gate", (1,), (2,))
    assert found.times == (0, 1, 2, 3, 4, 5, 6)


def test_a_delay_an_edge_when_the_order_turns_round() -> None:
    made = run_of(PAIR, "", "x", "p", "q", "x", "q", "p")
    found = schedule(made, PAIR.nodes)
    assert found.kind == "edge"
    assert [found.delay(n, r) for n, r in (("p", True), ("q", True), ("p", False), ("q", False))] == [
        (1,), (2,), (2,), (1,)
    ]  # fmt: skip
    assert not possible(PAIR, made, [("p", True), ("q", True)], 4)
    assert possible(PAIR, made, [(n, r) for n in "pq" for r in (True, False)], 2)


def test_a_delay_a_firing_when_one_edge_contradicts_itself() -> None:
    made = run_of(PAIR, "", "x", "p", "q", "x", "p q", "x", "q", "p")
    found = schedule(made, PAIR.nodes)
    assert found.kind == "firing"
    assert (found.delay("p", True), found.delay("q", True)) == ((1, 2), (2, 1))
    assert not possible(PAIR, made, [(n, r) for n in "pq" for r in (True, False)], 3)
    assert_happens(PAIR, made, found)


def test_a_swallowed_pulse_is_shorter_than_the_delay() -> None:
    made = run_of(PULSE, "n", "x", "n")
    found = schedule(made, PULSE.nodes)
    assert found.kind == "gate" and found.delay("g", True)[0] > found.delay("n", False)[0]


def test_only_the_part_that_matters_is_kept_rather_than_more_delays() -> None:
    made = run_of(PAIR, "", "x", "p", "q", "x", "q", "p")
    found = schedule(made, PAIR.nodes, least=3)
    assert found.kind == "gate" and found.positions == (0, 1, 2, 3)
    assert schedule(made, PAIR.nodes, least=6).kind == "edge"


def test_without_the_effort_for_small_numbers_there_are_larger_ones(monkeypatch: pytest.MonkeyPatch) -> None:
    made = run_of(PULSE, "n", "x", "n", "x", "n", "x", "n")
    monkeypatch.setattr(timing, "EFFORT", 1)
    found = schedule(made, PULSE.nodes)
    assert found.kind == "gate"
    assert_happens(PULSE, made, found)


def test_a_loop_goes_round_in_equal_times() -> None:
    ring = Circuit("ring", (), ("a", "b", "c"), {"a": not_(var("c")), "b": not_(var("a")), "c": not_(var("b"))})
    made = run_of(ring, "a b", "b", "c", "a", "b", "c", loop=0)
    found = schedule(made, ring.nodes)
    assert found.kind == "gate" and found.positions == (0, 1, 2, 3, 4, 5) * 3 + (0,)
    assert found.times[-1] - found.times[12] == found.times[12] - found.times[6]
    assert_happens(ring, made, found)


def test_what_z3_calls_impossible_is_not_found_by_trying() -> None:
    """Circuits of three nodes, so that every choice of small delays can be tried."""
    kinds: Counter[str] = Counter()
    for seed in range(60):
        circuit, _ = random_case(f"small {seed}", nodes=3, inputs=1, mode="fundamental")
        stable = [s for s in range(1 << len(circuit.signals)) if not excited(circuit, s)]
        if circuit.inputs and stable:
            made = wander(Random(seed), circuit, stable[0], 8)
            kind = schedule(made, circuit.nodes).kind
            kinds[kind] += 1
            if kind != "gate":
                assert not possible(circuit, made, [(n, True) for n in circuit.nodes], 5)
            if kind == "firing":
                assert not possible(circuit, made, [(n, r) for n in circuit.nodes for r in (True, False)], 3)
    assert kinds["gate"] > 5 and kinds["edge"] > 1 and kinds["firing"] > 5


def test_a_latch_whose_gates_fire_together_needs_equal_delays() -> None:
    gates = {"p": not_(or_(var("x"), var("q"))), "q": not_(or_(var("x"), var("p")))}
    latch = Circuit("latch", ("x",), ("p", "q"), gates)
    made = run_of(latch, "x", "x", "p q", "p q", loop=1)
    found = schedule(made, latch.nodes)
    assert found.kind == "gate" and found.delay("p", True) == found.delay("q", True)
