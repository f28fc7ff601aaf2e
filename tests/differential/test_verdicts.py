"""Every verdict of the program equals that of the naive oracle, and every run shown is lawful and offending."""

from __future__ import annotations

from collections import Counter

import pytest
from judging import complaints
from random_circuits import random_question

CHECKS = ("stable-states", "settles", "race-free", "hazard-free", "essential-hazard-free", "always", "never")
CASES = 300


@pytest.mark.parametrize("check", CHECKS)
def test_every_verdict_is_the_oracles(check: str) -> None:
    verdicts: Counter[str] = Counter()
    for seed in range(CASES):
        question = random_question(seed, check)
        found, verdict = complaints(*question[:2], check, question.options)
        assert not found, (seed, found)
        verdicts[verdict] += 1
    assert min(verdicts["proved"], verdicts["refuted"]) > CASES / 20, verdicts
