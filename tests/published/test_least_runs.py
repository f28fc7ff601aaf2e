"""Every refutation of the gallery and of published circuits is shown by the runs that brute force finds.

The circuits of `field_circuits.json`, `worked_examples.json` and `data_sheets.json` have their sources beside them.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from itertools import count, product
from math import inf
from typing import Any

import oracle_equivalence
import pytest
from normal_forms import SHOWN
from oracle_world import State, World
from published_cases import Subject, cases

from settled.models.problems import InputError
from settled.verify.inputs import gallery
from settled.verify.questions import Differs
from settled.verify.session import Session, Settings, load

CHECKS = ("stable-states", "settles", "race-free", "hazard-free", "essential-hazard-free", "speed-independent")
FIELD = {case["id"]: case for case in cases("field_circuits.json")}
SMALLER = 8
"""The same where brute force is tried on all checks."""
MANY = 6
"""Nodes of a closed circuit beyond which that takes long."""
PUBLISHED = [
    pytest.param(case, id=case["id"])
    for case in (*cases("worked_examples.json"), *cases("data_sheets.json"))
    if case.get("excitation") and len(case["inputs"]) + len(case["excitation"]) <= SMALLER
]
FILES = sorted(name for name in gallery() if not name.startswith(("equivalence", "realises")) and "." not in name)
SMALL = 12
"""Inputs and nodes of a circuit that brute force is tried on."""


class Known(World):
    """A world whose start states need not be looked for among all total states."""

    def _starts(self) -> set[State]:
        """The stable states, each connection at the value of its source; the one start that is given in full."""
        circuit, given = self.circuit, self.environment.start
        if len(given) == len(circuit.signals):
            return {frozenset(s for s, v in given.items() if v)}
        sources = [n for n in circuit.signals if ">" not in n]
        found = set()
        for values in product((0, 1), repeat=len(sources)):
            now = dict(zip(sources, values, strict=True))
            found.add(frozenset(s for s in circuit.signals if now[s.split(">")[0]]))
        return {s for s in found if self.admits(s) and self.stable(s)}


def agrees(session: Session, kind: type[World] = World) -> Iterator[bool]:
    """For each refutation whether it is shown by the runs that brute force finds."""
    signals = session.circuit.signals
    world = kind(session.circuit, session.specification.environment)
    for prop, result in zip(session.properties, session.results(), strict=True):
        if result.verdict != "refuted" or result.check not in SHOWN:
            continue
        expected, loop = SHOWN[result.check](world, prop.options)
        last = result.facts["offending_step"] + 1 if result.check == "hazard-free" else None
        shown = [tuple(tuple(s.state[x] for x in signals) for s in trace.steps[:last]) for trace in result.traces]
        yield shown == [way.rows for way in expected] and result.traces[-1].loop == loop


def field_session(case: str) -> Session:
    """All checks of a circuit under gate delays, all its nodes watched; without a stable state only the first check."""
    data = FIELD[case]
    circuit = Subject(tuple(data["inputs"]), data["gates"])
    watched = {"hazard-free": {"signals": list(data["gates"])}}
    asked = [{"check": check, **watched.get(check, {})} for check in CHECKS]
    rules = {"assume": [f"~({expression})" for expression in data["forbidden_inputs"]]}
    start = {"start": circuit.values(data["initial"])}
    try:
        return Session(load("case.toml", circuit.file({**rules, **start}, asked)), Settings())
    except InputError:
        return Session(load("case.toml", circuit.file(rules, asked[:1])), Settings())


@pytest.mark.parametrize("case", FIELD)
def test_the_runs_of_a_field_circuit(case: str) -> None:
    session = field_session(case)
    if len(session.circuit.signals) <= SMALL:
        assert all(agrees(session))


def published_session(data: dict[str, Any]) -> Session:
    """All checks of a published circuit, all its nodes watched; without a stable state only the first check."""
    circuit = Subject(tuple(data["inputs"]), data["excitation"])
    watched = {"hazard-free": {"signals": list(data["excitation"])}}
    asked = [{"check": check, **watched.get(check, {})} for check in CHECKS]
    try:
        return Session(load("case.toml", circuit.file({}, asked)), Settings())
    except InputError:
        return Session(load("case.toml", circuit.file({}, asked[:1])), Settings())


@pytest.mark.parametrize("data", PUBLISHED)
def test_the_runs_of_a_published_circuit(data: dict[str, Any], request: pytest.FixtureRequest) -> None:
    if len(data["excitation"]) > MANY and not data["inputs"] and not request.config.getoption("--thorough"):
        pytest.skip("brute force goes round every loop of a closed circuit: only with --thorough")
    assert all(agrees(published_session(data)))


@pytest.mark.parametrize("name", ["equivalence_agreement", "equivalence_flip_flop_together", "equivalence_level_latch"])
def test_the_changes_that_tell_two_circuits_of_the_gallery_apart(name: str) -> None:
    session = Session(load(gallery()[name]), Settings())
    (result,) = (r for r in session.results() if r.verdict == "refuted")
    assert isinstance(result.question, Differs)
    sides = session.circuit, result.question.other, session.specification.environment
    verdict = oracle_equivalence.equivalent(*sides, result.question.outputs)
    assert verdict.facts["fewest_changes"] == result.facts["fewest_changes"] > 0


def test_the_run_of_a_larger_handshake() -> None:
    session = Session(load(gallery()["handshake_arbiter_four"]), Settings())
    assert list(agrees(session, Known)) == [True]


def test_the_length_of_a_race_between_connections() -> None:
    session = Session(load(gallery()["sample_flip_flop_wires"]), Settings(only=["race-free"]))
    ((one, two),) = (result.traces for result in session.results())
    shown = sum(bool(set(s.switched) & set(session.circuit.inputs)) for t in (one, two) for s in t.steps[1:])
    expected = race_length(Known(session.circuit, session.specification.environment))
    assert (shown, len(one.steps) + len(two.steps) - 2) == expected


def race_length(world: World) -> tuple[float, float]:
    """Input changes and steps of the shortest two runs that end apart, single inputs changing (breadth first)."""
    best: tuple[float, float] = (inf, inf)
    before = dict.fromkeys(world.starts(), 0)
    for changes in count():
        found = breadth_first(before, world.held)
        after: dict[State, int] = {}
        for state in filter(world.stable, found):
            for schedule in world.schedules(state):
                first = world.begin(state, schedule).state
                ends = sorted(n for s, n in breadth_first({first: 1}, world.held).items() if world.stable(s))
                if len(ends) > 1:
                    best = min(best, (2 * changes + 2, 2 * found[state] + ends[0] + ends[1]))
                after[first] = min(after.get(first, found[state] + 1), found[state] + 1)
        if best[0] < inf or not after:
            break
        before = after
    return best


def breadth_first(starts: dict[State, int], after: Callable[[State], list[State]]) -> dict[State, int]:
    """The fewest steps to each state, counted on from those that the starts have."""
    seen: dict[State, int] = {}
    layer: set[State] = set()
    for steps in count(min(starts.values())):
        layer = {s for s, n in starts.items() if n == steps} | {w for v in layer for w in after(v)}
        layer -= seen.keys()
        seen |= dict.fromkeys(layer, steps)
        if not layer and steps > max(starts.values()):
            break
    return seen


@pytest.mark.parametrize("name", FILES)
def test_the_runs_of_a_gallery_file(name: str) -> None:
    session = Session(load(gallery()[name]), Settings())
    if len(session.circuit.signals) <= SMALL:
        assert all(agrees(session))


def test_there_is_something_to_compare() -> None:
    assert sum(len(list(agrees(field_session(case)))) for case in ("C01 naive", "C06 flop-and", "C10 three-relay")) > 10
