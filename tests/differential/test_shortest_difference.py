"""Refutations by unrolling: never against the naive oracle, lawful and offending, and after the fewest changes."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from random import Random

import oracle_equivalence
import pytest
from random_circuits import forward, pieces, random_case, reset
from random_pairs import Pair, broken, rewritten

from settled.models.states import Run
from settled.verify.engines import shortest_difference
from settled.verify.engines.shortest_difference import differs
from settled.verify.limits import Limits
from settled.verify.questions import Differs, Task
from settled.verify.result import trace

CASES = 800


def faulty(seed: int) -> Pair:
    """A circuit that its first input often resets, from there, and itself rewritten, with one excitation replaced."""
    rng = Random(f"faulty {seed}")
    circuit, environment = random_case(f"faulty {seed}", nodes=4, mode="fundamental", styles=(reset, forward, pieces))
    start = {circuit.inputs[0]: 1} if circuit.inputs else {}
    other = replace(rewritten(rng, broken(rng, circuit)), name="other")
    return Pair(circuit, other, replace(environment, start=start), (rng.choice(circuit.outputs),))


def written(pair: Pair, run: Run) -> dict[str, object]:
    """A run as the result document has it."""
    circuit = pair.original if run.circuit == pair.original.name else pair.other
    steps = [
        {"state": dict(s.state), "excited": list(s.excited), "switched": list(s.switched), "stable": s.stable}
        for s in trace(circuit, run).steps
    ]
    return {"title": run.title, "circuit": run.circuit, "steps": steps, "loop": run.loop}


def test_no_refutation_is_against_the_oracle(share: Callable[[int], int], monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(shortest_difference, "MOST", 6)
    outcome: Counter[str] = Counter()
    for seed in range(share(CASES)):
        pair = faulty(seed)
        answer = differs(Task(pair.original, pair.environment, Limits()), Differs(pair.other, pair.outputs))
        outcome[answer.verdict] += 1
        if answer.verdict != "refuted":
            continue
        expected = oracle_equivalence.equivalent(*pair)
        assert expected.verdict == "refuted", seed
        against = oracle_equivalence.offending_pair(*pair, [written(pair, run) for run in answer.runs])
        assert against is None, (seed, against)
        outcome[pair.environment.changes] += answer.facts["fewest_changes"] > 0
        more = answer.facts["fewest_changes"] - expected.facts["fewest_changes"]
        assert more == 0 or (more > 0 and "perhaps_fewer" in answer.facts), seed
        outcome["perhaps fewer"] += "perhaps_fewer" in answer.facts
        outcome["lonely"] += len(answer.runs) == 1
    assert outcome["refuted"] > share(100), outcome
    assert min(outcome[c] for c in ("single", "simultaneous", "burst")) > share(5), outcome
    assert outcome["lonely"] > share(50), outcome
