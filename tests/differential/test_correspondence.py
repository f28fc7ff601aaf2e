"""Equivalence by corresponding nodes: no proof is against the naive oracle, and most refactorings are proved."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable

import oracle_equivalence
from random_pairs import Pair, random_pair

from settled.models.circuit import loops
from settled.verify.engines.correspondence import differs
from settled.verify.limits import Limits
from settled.verify.questions import Answer, Differs, Task

CASES = 1_500


def asked(pair: Pair) -> Answer:
    task = Task(pair.original, pair.environment, Limits())
    return differs(task, Differs(pair.other, pair.outputs))


def cuts_all_loops(pair: Pair, answer: Answer) -> bool:
    assert answer.certificate is not None
    pairs = answer.certificate["pairs"]
    for circuit, cut in ((pair.original, {n for n, _, _ in pairs}), (pair.other, {p for _, _, p in pairs})):
        rest = [n for n in circuit.nodes if n not in cut]
        if len(cut) < len(pairs) or loops(rest, {n: circuit.excitation[n] for n in rest}):
            return False
    return True


def test_no_proof_is_against_the_oracle(share: Callable[[int], int]) -> None:
    outcome: Counter[str] = Counter()
    cases = share(CASES)
    for seed in range(cases):
        pair = random_pair(f"correspondence {seed}")
        answer = asked(pair)
        if answer.verdict != "proved" and seed % 3:
            continue
        expected = oracle_equivalence.equivalent(*pair)
        outcome[f"{expected.verdict}, {answer.verdict}"] += 1
        if answer.verdict == "proved":
            assert expected.verdict == "proved", seed
            assert expected.vacuous != answer.exercised, seed
            assert cuts_all_loops(pair, answer), seed
            outcome["made otherwise"] += pair.original.excitation != pair.other.excitation
            outcome["inverse"] += any(sign == "~" for _, sign, _ in answer.certificate["pairs"])
    assert outcome["refuted, undecided"] > cases / 20, outcome
    assert outcome["made otherwise"] > cases / 2 and outcome["inverse"] > cases / 30, outcome
    assert outcome["proved, proved"] > 10 * outcome["proved, undecided"], outcome
