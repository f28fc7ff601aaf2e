"""Pairs searched by one run of each response: what that decides is what the naive oracle says."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable

import oracle_equivalence
from random_pairs import random_pair

from settled.models.states import Behaviour
from settled.verify.engines import attempt
from settled.verify.engines.scheduled_pairs import ENGINE
from settled.verify.limits import Limits
from settled.verify.properties.equivalent import KIND
from settled.verify.questions import Differs, Task
from settled.verify.replay import replay

CASES = 500


def test_every_decision_is_the_oracles(share: Callable[[int], int]) -> None:
    outcome: Counter[str] = Counter()
    for seed in range(share(CASES)):
        pair = random_pair(f"scheduled {seed}")
        question = Differs(pair.other, pair.outputs)
        answer = attempt(ENGINE, Task(pair.original, pair.environment, Limits()), question)
        outcome[answer.verdict] += 1
        if answer.verdict == "undecided":
            continue
        expected = oracle_equivalence.equivalent(*pair)
        assert (answer.verdict, not answer.exercised and answer.verdict == "proved") == (
            expected.verdict,
            expected.vacuous,
        ), seed
        if answer.verdict == "refuted":
            more = answer.facts["fewest_changes"] - expected.facts["fewest_changes"]
            assert more == 0 or (more > 0 and "perhaps_fewer" in answer.facts), seed
            outcome["shortest"] += answer.facts["fewest_changes"] == expected.facts["fewest_changes"]
            replay(KIND, Behaviour(pair.original, pair.environment), question, answer)
    assert min(outcome["proved"], outcome["refuted"]) > share(CASES) / 8, outcome
    assert outcome["shortest"] > 0.9 * outcome["refuted"], outcome
