"""Power-up: verdicts, runs and what is said of three-valued simulation equal the naive oracle's."""

from __future__ import annotations

from collections import Counter
from functools import cache
from itertools import count

import oracle
from judging import complaints, session_of
from oracle import power_up
from oracle_world import World
from random_circuits import Question, random_question

from settled.models.specification import Property
from settled.verify.engines import Engine, engines
from settled.verify.engines import three_valued as ternary
from settled.verify.limits import Limits
from settled.verify.properties.initialises import KIND
from settled.verify.questions import Task

CASES = 500


@cache
def cases() -> list[Question]:
    return [random_question(seed, "initialises") for seed in range(CASES)]


def test_every_verdict_and_run_is_the_oracles() -> None:
    verdicts: Counter[str] = Counter()
    for seed, case in enumerate(cases()):
        found, verdict = complaints(*case[:2], "initialises", case.options)
        assert not found, (seed, found)
        verdicts[verdict] += 1
    assert min(verdicts["proved"], verdicts["refuted"]) > CASES / 8, verdicts


def steps_to_ends(case: Question) -> list[int]:
    """For each end the fewest steps of a run to it; a vector that changes nothing is no step."""
    world = World(case.circuit, case.environment)
    sequence = power_up(world, case.options)
    far = dict.fromkeys(world.completions(sequence[0]), 0)
    for number, vector in enumerate(sequence):
        if number:
            ends = {s: d for s, d in far.items() if world.stable(s)}
            far = {}
            for state, d in ends.items():
                after = state - world.inputs(state) | vector
                far[after] = min(far.get(after, 10**6), d + (after != state))
        for d in count():
            for state in [s for s, known in far.items() if known == d]:
                for after in world.held(state):
                    far[after] = min(far.get(after, 10**6), d + 1)
            if d > max(far.values()):
                break
    return sorted(d for s, d in far.items() if world.stable(s))


def test_no_shorter_runs_end_apart() -> None:
    compared = 0
    for seed, case in enumerate(cases()):
        session = session_of(*case[:2], (Property("p", "initialises", case.options),))
        (result,) = session.results()
        if len(result.traces) == 2:
            compared += 1
            assert sum(len(t.steps) - 1 for t in result.traces) == sum(steps_to_ends(case)[:2]), seed
    assert compared > CASES / 10


def search() -> Engine:
    return next(e for e in engines() if e.name == "exhaustive search from power-up")


def test_three_valued_simulation_proves_only_what_search_proves() -> None:
    decided = 0
    for seed, case in enumerate(cases()):
        question = KIND.question(case.circuit, case.options)
        task = Task(case.circuit, case.environment, Limits())
        if ternary.powers_up(task, question).verdict == "proved":
            decided += 1
            answer = search().answers[type(question)](task, question)
            assert answer.verdict == "proved", seed
            assert answer.facts["end"] == ternary.powers_up(task, question).facts["end"], seed
    assert decided > CASES / 8


def test_what_is_known_open_and_pessimism_node_by_node() -> None:
    findings: Counter[str] = Counter()
    causes = 0
    for seed, case in enumerate(cases()):
        expected = oracle.decide(*case[:2], "initialises", case.options)
        if expected.facts["oscillates"]:
            continue
        session = session_of(*case[:2], (Property("p", "initialises", case.options),))
        (result,) = session.results()
        for node, said in result.facts["ternary"]["nodes"].items():
            values = {node in end for end in expected.facts["ends"]}
            exact = str(int(values.pop())) if len(values) == 1 else "open"
            assert said["exact"] == exact, (seed, node)
            assert said["simulated"] in ("x", exact), (seed, node)
            findings[said["finding"]] += 1
            causes += said.get("cause") is not None
    assert min(findings[f] for f in ("known", "really open", "pessimism")) > 20, findings
    assert causes > findings["pessimism"] / 4
