"""Checks of handshake circuits in either mode: every verdict is the naive oracle's, every run lawful and offending.

A run that goes round for ever must be fair, and one that ends must be allowed to end: the oracle judges both.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable

import oracle
import oracle_traces
import pytest
from judging import ask_only, complaints, session_of
from random_circuits import random_question

from settled.models.specification import Property
from settled.verify.engines import exhaustive
from settled.verify.explicit import fair_cycles
from settled.verify.result import document
from settled.verify.session import Settings

CHECKS = ("speed-independent", "deadlock-free", "leads-to")
CASES = 250


@pytest.mark.parametrize("mode", [None, "input-output"])
@pytest.mark.parametrize("check", CHECKS)
def test_every_verdict_is_the_oracles(check: str, mode: str | None, share: Callable[[int], int]) -> None:
    verdicts: Counter[str] = Counter()
    for seed in range(share(CASES)):
        question = random_question(f"handshake {mode} {seed}", check, mode=mode)
        found, verdict = complaints(*question[:2], check, question.options)
        assert not found, (seed, found)
        verdicts[verdict] += 1
    assert min(verdicts["proved"], verdicts["refuted"]) > share(CASES) / 20, verdicts


@pytest.mark.parametrize("check", ["always", "never", "settles"])
def test_other_checks_in_input_output_mode(check: str) -> None:
    verdicts: Counter[str] = Counter()
    for seed in range(80):
        question = random_question(f"free {seed}", check, mode="input-output")
        found, verdict = complaints(*question[:2], check, question.options)
        assert not found, (seed, found)
        verdicts[verdict] += 1
    assert min(verdicts["proved"], verdicts["refuted"]) > 5, verdicts


@pytest.mark.parametrize("patience", [0, fair_cycles.PATIENCE])
def test_many_lassos_are_shown_and_all_are_fair(patience: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Also when the search for the shortest one is given up at once."""
    monkeypatch.setattr(fair_cycles, "PATIENCE", patience)
    shown: Counter[str] = Counter()
    for seed in range(80):
        case = random_question(f"lasso {seed}", "leads-to", mode="input-output")
        session = session_of(*case[:2], (Property("goal", "leads-to", case.options),))
        (result,) = session.results()
        for trace in document([session.report([result])])["files"][0]["results"][0]["traces"]:
            assert oracle_traces.offending(*case[:2], "leads-to", case.options, [trace]) is None, seed
            shown["end" if trace["loop"] is None else "loop"] += 1
    assert min(shown["loop"], shown["end"]) > 10, shown


@pytest.mark.parametrize("check", [*CHECKS, "settles"])
def test_a_search_that_was_cut_short_proves_nothing_and_refutes_nothing_that_holds(check: str) -> None:
    verdicts: Counter[str] = Counter()
    for seed in range(100):
        case = random_question(f"short {seed}", check, winners="one")
        session = session_of(*case[:2], (Property("cut", check, case.options),), Settings(states=12))
        ask_only(session, exhaustive.NAME)
        (result,) = session.results()
        verdicts[result.verdict] += 1
        if result.verdict != "undecided":
            assert result.verdict == oracle.decide(*case[:2], check, case.options).verdict, seed
    assert min(verdicts["undecided"], verdicts["refuted"]) > 5, verdicts
