"""The random circuits, environments and questions: both verdicts of every check come up often."""

from __future__ import annotations

import tomllib
from collections import Counter
from dataclasses import replace
from functools import cache

import pytest
from circuit_strategies import cases
from hypothesis import given, settings
from oracle import CHECKS, decide, reachable
from oracle_equivalence import equivalent
from oracle_world import World
from property_text import to_property_file
from random_circuits import Question, random_case, random_question
from random_pairs import random_pair
from worked import expression

from settled.models.circuit import Circuit
from settled.models.environment import Environment


@cache
def questions(check: str) -> list[Question]:
    return [random_question(seed, check) for seed in range(100)]


@pytest.mark.parametrize("check", CHECKS)
def test_each_verdict_is_frequent_and_few_proofs_are_vacuous(check: str) -> None:
    verdicts = [decide(q.circuit, q.environment, check, q.options) for q in questions(check)]
    found = Counter(v.verdict for v in verdicts)
    assert min(found["proved"], found["refuted"]) >= len(verdicts) // 10
    assert sum(v.vacuous for v in verdicts) <= len(verdicts) // 4


def test_a_third_of_the_pairs_is_equivalent_and_not_identical() -> None:
    pairs = [random_pair(seed) for seed in range(90)]
    equal = [p for p in pairs if equivalent(*p).verdict == "proved" and p.original.excitation != p.other.excitation]
    assert 30 <= len(equal) <= 70


def test_random_cases_cover_the_environment_and_come_again() -> None:
    cases_seen = [random_case(seed) for seed in range(200)]
    kinds = Counter((e.mode, e.changes) for _, e in cases_seen)
    assert min(kinds.values()) >= 20 and len(kinds) == 4
    assert sum(bool(e.guards) for _, e in cases_seen) >= 50 and sum(bool(e.assume) for _, e in cases_seen) >= 30
    assert {c.winners for c, _ in cases_seen} == {"any", "one"}
    assert max(len(c.nodes) for c, _ in cases_seen) == 5 and max(len(c.inputs) for c, _ in cases_seen) == 3
    again, environment = random_case(7)
    assert (again.excitation, environment) == (cases_seen[7][0].excitation, cases_seen[7][1])


@given(cases())
@settings(max_examples=80, derandomize=True, deadline=None)
def test_drawn_cases_can_be_asked(case: tuple[Circuit, Environment]) -> None:
    circuit, environment = case
    states = reachable(circuit, environment)
    assert World(circuit, environment).starts() <= states
    stuck = decide(circuit, environment, "deadlock-free", {}).verdict == "refuted"
    assert stuck <= any(World(circuit, environment).stable(s) for s in states)


def test_a_case_is_written_as_a_property_file() -> None:
    for check in CHECKS:
        for q in questions(check)[:6]:
            written = tomllib.loads(to_property_file(q.circuit, q.environment, [(check, q.options)]))
            assert tuple(written["circuit"]["inputs"]) == q.circuit.inputs
            back = {n: expression(e) for n, e in written["circuit"]["excitation"].items()}
            back_defined = {n: expression(e) for n, e in written["circuit"].get("define", {}).items()}
            same = World(replace(q.circuit, excitation=back, defined=back_defined), q.environment)
            assert same.reachable == World(q.circuit, q.environment).reachable
            assert written["property"][0]["check"] == check and len(written["property"][0]) == 1 + len(q.options)
