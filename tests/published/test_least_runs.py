"""Every refutation of the gallery and of the field circuits is shown by the runs that brute force finds.

The circuits of `field_circuits.json` have their sources beside them.
"""

from __future__ import annotations

from collections.abc import Iterator

import pytest
from normal_forms import SHOWN
from oracle_world import World
from published_cases import Subject, cases

from settled.models.problems import InputError
from settled.verify.inputs import gallery
from settled.verify.session import Session, Settings, load

CHECKS = ("stable-states", "settles", "race-free", "hazard-free", "essential-hazard-free", "speed-independent")
FIELD = {case["id"]: case for case in cases("field_circuits.json")}
FILES = sorted(name for name in gallery() if not name.startswith(("equivalence", "realises")) and "." not in name)
SMALL = 12
"""Inputs and nodes of a circuit that brute force is tried on."""


def agrees(session: Session) -> Iterator[bool]:
    """For each refutation whether it is shown by the runs that brute force finds."""
    signals = session.circuit.signals
    world = World(session.circuit, session.specification.environment)
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


@pytest.mark.parametrize("name", FILES)
def test_the_runs_of_a_gallery_file(name: str) -> None:
    session = Session(load(gallery()[name]), Settings())
    if len(session.circuit.signals) <= SMALL:
        assert all(agrees(session))


def test_there_is_something_to_compare() -> None:
    assert sum(len(list(agrees(field_session(case)))) for case in ("C01 naive", "C06 flop-and", "C10 three-relay")) > 10
