"""Decision diagrams by themselves against the naive oracle: every verdict the same, every run lawful and offending."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from random import Random
from typing import Any

import pytest
from judging import complaints
from random_circuits import RACY, Question, random_case, random_question

from settled.models.states import Behaviour, Situation, walk
from settled.verify.limits import Limits

pytest.importorskip("dd.cudd")

from settled.verify.diagrams import closure  # noqa: E402
from settled.verify.diagrams.answers import Reading  # noqa: E402
from settled.verify.diagrams.certificate import scripts  # noqa: E402
from settled.verify.diagrams.manager import ordered  # noqa: E402
from settled.verify.diagrams.moves import Moves  # noqa: E402
from settled.verify.diagrams.world import World  # noqa: E402
from settled.verify.questions import Task  # noqa: E402
from settled.verify.symbolic.certificates import impossible  # noqa: E402

CHECKS = ("never", "always", "deadlock-free", "settles", "race-free", "hazard-free", "speed-independent", "leads-to")
MODES: dict[str, dict[str, Any]] = {
    "single": {"mode": "fundamental", "changes": "single"},
    "simultaneous": {"mode": "fundamental", "changes": "simultaneous"},
    "burst": {"mode": "fundamental", "changes": "burst"},
    "input-output": {"mode": "input-output"},
}
FUNDAMENTAL_ONLY = ("race-free", "hazard-free")
CASES = 25


def judged(check: str, questions: list[Question]) -> Counter[str]:
    """How often each verdict came; every one has been judged."""
    verdicts: Counter[str] = Counter()
    for number, question in enumerate(questions):
        found, verdict = complaints(*question[:2], check, question.options, shortest=False, engine="decision diagrams")
        assert not found, (number, found)
        verdicts[verdict] += 1
    return verdicts


@pytest.mark.parametrize("mode", MODES)
@pytest.mark.parametrize("check", CHECKS)
def test_every_verdict_is_the_oracles(check: str, mode: str) -> None:
    if check in FUNDAMENTAL_ONLY and mode == "input-output":
        pytest.skip("a property of fundamental mode")
    questions = [random_question(f"diagrams {mode} {seed}", check, **MODES[mode]) for seed in range(CASES)]
    verdicts = judged(check, questions)
    assert min(verdicts["proved"], verdicts["refuted"]) > 0, verdicts


def paired(check: str, seed: int) -> Question:
    """A random question about a circuit with pairs of nodes that exclude one another."""
    question = random_question(f"diagrams, pairs {seed}", check, styles=RACY)
    nodes = list(question.circuit.nodes)
    Random(seed).shuffle(nodes)
    pairs = tuple(zip(nodes[::2], nodes[1::2], strict=False))
    return question._replace(circuit=replace(question.circuit, exclusive=pairs))


@pytest.mark.parametrize("check", CHECKS)
def test_every_verdict_with_exclusive_pairs_is_the_oracles(check: str) -> None:
    judged(check, [paired(check, seed) for seed in range(25)])


# ---- the parts that every verdict stands on --------------------------------------------------------------------------


def situations(world: World, states: Any) -> set[Situation]:
    """The members of a set."""
    d, low = world.diagrams, len(world.circuit.signals)
    words = (w for w in range(1 << len(d.variables)) if d.holds(states, w))
    return {Situation(w & (1 << low) - 1, w >> low) for w in words}


def point(world: World, at: Situation) -> Any:
    return world.diagrams.point(at.state | at.outstanding << len(world.circuit.signals))


def image(world: World, moves: Moves, at: Situation) -> set[Situation]:
    return situations(world, world.diagrams.union(move.image(point(world, at)) for move in moves.all))


def preimage(world: World, moves: Moves, at: Situation) -> set[Situation]:
    return situations(world, world.diagrams.union(move.preimage(point(world, at)) for move in moves.all))


@pytest.mark.parametrize("mode", MODES)
@pytest.mark.parametrize("winners", ["any", "one"])
def test_moves_are_those_of_the_executable_meaning(mode: str, winners: str) -> None:
    for seed in range(6):
        circuit, environment = random_case(f"moves {seed}", nodes=3, inputs=2, winners=winners, **MODES[mode])
        behaviour, world = Behaviour(circuit, environment), World(circuit, environment, Limits())
        starts = {s for s in range(1 << len(circuit.signals)) if behaviour.may_start(s)}
        assert {at.state for at in situations(world, world.start)} == starts
        todo = [Situation(s) for s in sorted(starts)]
        seen = set(todo)
        while todo:
            at = todo.pop()
            steps = behaviour.free if mode == "input-output" else behaviour.responses
            assert image(world, world.response, at) | {at} == {*steps(at), at}
            assert image(world, world.held, at) | {at} == {*behaviour.held(at), at}
            begun = image(world, world.changes, at)
            if mode == "burst":
                begun = {after for picked in begun for after in image(world, world.response, picked) - {picked}}
            assert begun | {at} == {*behaviour.changes(at), at}
            for after in behaviour.held(at):
                assert at in preimage(world, world.held, after)
            fresh = set(behaviour.moves(at)) - seen
            seen |= fresh
            todo += sorted(fresh)


@pytest.mark.parametrize("kept", [3, closure.KEPT])
@pytest.mark.parametrize("mode", MODES)
def test_the_reached_set_is_exact_and_its_paths_are_runs(mode: str, kept: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Also when few rings are kept and much has to be found again."""
    monkeypatch.setattr(closure, "KEPT", kept)
    for seed in range(12):
        circuit, environment = random_case(f"reached {seed}", nodes=4, inputs=2, **MODES[mode])
        behaviour = Behaviour(circuit, environment)
        reading = Reading(Task(circuit, environment, Limits()))
        expected = {Situation(s) for s in range(1 << len(circuit.signals)) if behaviour.may_start(s)}
        todo = sorted(expected)
        while todo:
            fresh = set(behaviour.moves(todo.pop())) - expected
            expected |= fresh
            todo += sorted(fresh)
        found = situations(reading.world, reading.all.reached)
        assert {at.state for at in found} == {at.state for at in expected} and expected <= found
        d = reading.d
        for at in expected:
            word = at.state | at.outstanding << len(circuit.signals)
            path = reading.all.path(word)
            assert path[-1] == word and d.holds(reading.world.start, path[0])
            walk(behaviour, reading.run("", path))
        signals = circuit.signals
        states = d.without(reading.all.reached, set(d.variables) - set(signals))
        assert d.count(states, signals) == len({at.state for at in expected})


def test_a_set_that_is_not_inductive_is_not_confirmed() -> None:
    refused = 0
    for seed in range(15):
        circuit, environment = random_case(f"certificate {seed}", nodes=3, inputs=2, **MODES["single"])
        reading = Reading(Task(circuit, environment, Limits()))
        d, whole = reading.d, reading.all.reached
        assert all(impossible(text, Limits()) for text in scripts(reading.world, d.expression(whole)).values())
        for at in sorted(situations(reading.world, whole))[:3]:
            fewer = whole & ~point(reading.world, at)
            confirmed = [impossible(t, Limits()) for t in scripts(reading.world, d.expression(fewer)).values()]
            assert not all(confirmed)
            refused += 1
    assert refused > 20


def test_what_is_read_stands_near_its_reader() -> None:
    circuit, _ = random_case("order", nodes=5, inputs=3)
    assert sorted(ordered(circuit)) == sorted(circuit.signals)
