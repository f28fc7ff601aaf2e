"""Hazards of circuits without feedback by random orders and by a formula: never against exhaustive search."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable

from random_circuits import forward, random_case

from settled.models.states import Behaviour
from settled.verify.engines import exhaustive
from settled.verify.engines.waveforms import flickers
from settled.verify.limits import Limits
from settled.verify.properties.hazard_free import KIND
from settled.verify.questions import Flickers, Task
from settled.verify.replay import replay

CASES = 1_000


def test_no_decision_is_against_exhaustive_search(share: Callable[[int], int]) -> None:
    outcome: Counter[str] = Counter()
    for seed in range(share(CASES)):
        circuit, environment = random_case(f"waveforms {seed}", mode="fundamental", nodes=6, styles=(forward,))
        task, question = Task(circuit, environment, Limits()), Flickers((circuit.nodes[-1],))
        answer, expected = flickers(task, question), exhaustive.flickers(task, question)
        outcome[f"{expected.verdict}, {answer.verdict}, {environment.changes}"] += 1
        if answer.verdict == "undecided":
            continue
        assert answer.verdict == expected.verdict, seed
        if answer.verdict == "refuted":
            replay(KIND, Behaviour(circuit, environment), question, answer)
        else:
            assert answer.exercised == expected.exercised, seed
            assert all("(check-sat)" in text for text in answer.scripts.values())
    for how, refuted in (("single", 10), ("simultaneous", 30), ("burst", 30)):
        assert outcome[f"proved, proved, {how}"] > 2 * outcome[f"proved, undecided, {how}"], outcome
        assert outcome[f"refuted, refuted, {how}"] > share(refuted), outcome
