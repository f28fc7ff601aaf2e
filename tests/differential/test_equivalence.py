"""Equivalence: verdicts, the fewest changes to a difference, and the runs shown equal the naive oracle's."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from math import inf
from random import Random

import oracle_equivalence
import oracle_traces
from judging import netlist_of, session_of
from oracle import second_changes
from oracle_world import State
from random_pairs import Pair, random_pair

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, and_, not_, or_, var
from settled.models.specification import CircuitSource, Property
from settled.verify.result import Result, document
from settled.verify.session import Session

CASES = 1_500


def session_on(pair: Pair, transients: bool = False) -> Session:
    to = CircuitSource(netlist_of(pair.other), "gate", winners=pair.other.winners)
    options = {"to": to, "outputs": pair.outputs, "transients": transients}
    return session_of(pair.original, pair.environment, (Property("p", "equivalent", options),))


def against(pair: Pair) -> tuple[list[str], str]:
    """What the oracle has against the program's result on a pair, and the verdict."""
    expected = oracle_equivalence.equivalent(*pair)
    session = session_on(pair)
    (result,) = session.results()
    if result.verdict != expected.verdict:
        return [f"{result.verdict} ({result.reason}), but the oracle says {expected.verdict}"], result.verdict
    found = [] if result.vacuous == expected.vacuous else [f"vacuous is {result.vacuous}"]
    if result.verdict == "refuted":
        found += against_refutation(pair, session, result, expected.facts["fewest_changes"])
    return found, result.verdict


def against_refutation(pair: Pair, session: Session, result: Result, fewest: int) -> list[str]:
    written = document([session.report([result])])["files"][0]["results"][0]
    wrong = oracle_equivalence.offending_pair(*pair, written["traces"])
    found = [wrong] if wrong else []
    if result.facts["fewest_changes"] != fewest:
        found.append(f"{result.facts['fewest_changes']} changes, but {fewest} do")
    return found


def made_otherwise(pair: Pair) -> bool:
    return dict(pair.original.excitation) != dict(pair.other.excitation)


class WithTransients(oracle_equivalence.Pairing):
    """Section 4a, and no output of the other circuit has a hazard in a response in which the original has none."""

    def fails(self, a: State, b: State, bad: dict[tuple[State, State], int]) -> bool:
        return super().fails(a, b, bad) or any(
            second_changes(self.right, b, {s}, name) and not second_changes(self.left, a, {s}, name)
            for s in self.left.schedules(a)
            for name in self.outputs
        )


def against_transients(pair: Pair) -> tuple[list[str], str]:
    """What the oracle has against the program's result with `transients`, and the verdict."""
    pairing = WithTransients(*pair)
    bad = pairing.bad_pairs()
    best = [max((bad.get(p, inf) for p in row), default=0) for row in pairing.rows()]
    fewest = min(best, default=inf)
    session = session_on(pair, transients=True)
    (result,) = session.results()
    if (result.verdict == "refuted") != (fewest < inf):
        return [f"{result.verdict}, but the fewest changes to a failure are {fewest}"], result.verdict
    if "hazard" not in result.facts:
        return against_refutation(pair, session, result, fewest) if fewest < inf else [], result.verdict
    found = [] if result.facts["fewest_changes"] == fewest else [f"{fewest} changes do"]
    written = document([session.report([result])])["files"][0]["results"][0]
    options = {"signals": pair.outputs}
    world = pairing.right.circuit, pairing.right.environment
    wrong = oracle_traces.offending(*world, "hazard-free", options, written["traces"][1:], written["facts"])
    return found + ([wrong] if wrong else []), "hazard"


def multiplexer(rng: Random, pins: list[Expr], name: str) -> Circuit:
    """A multiplexer as one node or with a node for each product; with or without the term that covers its hazard."""
    select, one, two = pins
    products = [and_(select, one), and_(not_(select), two)] + ([and_(one, two)] if rng.random() < 0.5 else [])
    excitation = {"z": or_(*products)}
    if rng.random() < 0.7:
        gates = {f"g{i}": product for i, product in enumerate(products)}
        excitation = {**gates, "z": or_(*map(var, gates))}
    return Circuit(name, ("a", "b", "c"), tuple(excitation), excitation, ("z",))


def multiplexers(seed: int) -> Pair:
    """Two multiplexers of one function, which differ in their hazards at most."""
    rng = Random(f"multiplexers {seed}")
    pins = [v if rng.random() < 0.5 else not_(v) for v in map(var, rng.sample("abc", 3))]
    original, other = multiplexer(rng, pins, "original"), multiplexer(rng, pins, "other")
    environment = Environment(changes=rng.choice(("single", "single", "simultaneous", "burst")))
    return Pair(original, other, environment, ("z",))


def test_transients_are_compared_as_the_oracle_compares_them() -> None:
    verdicts: Counter[str] = Counter()
    for seed in range(100):
        for pair in (random_pair(f"transients {seed}"), multiplexers(seed)):
            found, verdict = against_transients(pair)
            assert not found, (seed, found)
            verdicts[verdict] += 1
    assert min(verdicts[v] for v in ("proved", "refuted", "hazard")) > 15, verdicts


def test_every_verdict_is_the_oracles(share: Callable[[int], int]) -> None:
    verdicts: Counter[str] = Counter()
    cases = share(CASES)
    for seed in range(cases):
        pair = random_pair(seed)
        found, verdict = against(pair)
        assert not found, (seed, found)
        verdicts[verdict] += 1
        verdicts["proved though made otherwise"] += verdict == "proved" and made_otherwise(pair)
    assert verdicts["proved though made otherwise"] >= cases / 3 and verdicts["refuted"] > cases / 4, verdicts
