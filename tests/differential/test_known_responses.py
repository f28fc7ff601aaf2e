"""Settling and freedom from races by three-valued simulation of all responses: never against exhaustive search."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable

from random_circuits import random_case

from settled.verify.engines.all_responses import all_known
from settled.verify.engines.exhaustive import diverges, oscillates
from settled.verify.limits import Limits
from settled.verify.questions import Diverges, Oscillates, Task

CASES = 1_000


def test_no_proof_is_against_exhaustive_search(share: Callable[[int], int]) -> None:
    outcome: Counter[str] = Counter()
    for seed in range(share(CASES)):
        circuit, environment = random_case(f"known responses {seed}", mode="fundamental", nodes=4)
        task = Task(circuit, environment, Limits())
        answer = all_known(task, Diverges())
        settling, racing = oscillates(task, Oscillates()), diverges(task, Diverges())
        sound = settling.verdict == racing.verdict == "proved"
        outcome[f"{'sound' if sound else 'not sound'}, {answer.verdict}, {environment.changes}"] += 1
        if answer.verdict == "proved":
            assert sound, seed
            assert answer.exercised == racing.exercised, seed
    for how in ("single", "simultaneous", "burst"):
        assert outcome[f"sound, proved, {how}"] > 2 * outcome[f"sound, undecided, {how}"], outcome
        assert outcome[f"not sound, undecided, {how}"] > share(20), outcome
