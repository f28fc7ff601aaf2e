"""The runs shown are the ones that brute force finds: the shortest, the quietest, the least in values."""

from __future__ import annotations

import pytest
from judging import session_of
from normal_forms import SHOWN, Row
from oracle_world import World
from random_circuits import random_question

from settled.models.specification import Property
from settled.verify.result import Trace

CASES = 60


def rows(trace: Trace, signals: tuple[str, ...], last: int | None = None) -> tuple[Row, ...]:
    return tuple(tuple(step.state[s] for s in signals) for step in trace.steps[:last])


@pytest.mark.parametrize("check", SHOWN)
def test_the_runs_shown_are_the_least(check: str) -> None:
    refuted = 0
    for seed in range(CASES):
        circuit, environment, options = random_question(seed, check, nodes=4, inputs=2)
        (result,) = session_of(circuit, environment, (Property(check, check, options),)).results()
        if result.verdict != "refuted":
            continue
        refuted += 1
        expected, loop = SHOWN[check](World(circuit, environment), options)
        last = result.facts["offending_step"] + 1 if check == "hazard-free" else None
        shown = [rows(trace, circuit.signals, last) for trace in result.traces]
        assert shown == [way.rows for way in expected], seed
        assert result.traces[-1].loop == loop, seed
    assert refuted > CASES / 8
