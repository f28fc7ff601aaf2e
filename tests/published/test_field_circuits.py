"""Small circuits met in practice: every input change, every failing one, every hazard, under gate and wire delays.

The verdicts of `field_circuits.json` were found by enumeration of total states: with the general multiple winner
model under gate delays, one signal at a time under wire delays. A gate that reads its own output has no connection
for that pin there, so each such gate stands in the data as a closed cell of its own.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

import pytest
from graph_readings import Response, responses, walk_order
from published_cases import Subject, cases, conjunction

from settled.verify.result import Result
from settled.verify.session import Session

Case = dict[str, Any]
CASES = cases("field_circuits.json")
UNDER_DELAYS = [pytest.param(c, d, id=f"{c['id']}-{d}") for c in CASES for d in ("gate", "wire") if f"{d}_delays" in c]
each_case = pytest.mark.parametrize(("case", "delay"), UNDER_DELAYS)


def subject(case: Case, delay: str) -> Subject:
    """The circuit of a case under the delays and the winner rule with which its verdicts were found."""
    winners = "any" if delay == "gate" else "one"
    return Subject(tuple(case["inputs"]), case["gates"], delay, winners, case["cells"])


def environment(case: Case) -> dict[str, Any]:
    """Single input changes from the initial state, the forbidden input vectors left out."""
    assume = [f"~({expression})" for expression in case["forbidden_inputs"]]
    return {"assume": assume, "start": subject(case, "gate").values(case["initial"])}


@dataclass(frozen=True)
class Look:
    """What the program says of a case: its verdicts, and every response by its start and change."""

    circuit: Subject
    session: Session
    settles: Result
    race_free: Result
    hazard_free: Mapping[str, Result]
    responses: Mapping[tuple[str, str], Response]

    def failing(self) -> dict[tuple[str, str], tuple[str, list[str]]]:
        """Verdict and ends over the gates of every change that fails, in the words of the data."""
        return {name: self.verdict(response) for name, response in self.responses.items() if response.bad}

    def verdict(self, response: Response) -> tuple[str, list[str]]:
        ends = sorted(self.circuit.notation(self.session, end).split(".")[1] for end in response.ends)
        return ("oscillation possible" if response.oscillates else "critical race"), ends


@cache
def look(name: str, delay: str) -> Look:
    """The look at the case of that name."""
    case = next(c for c in CASES if c["id"] == name)
    circuit, outputs = subject(case, delay), case["outputs"]
    hazards = [{"check": "hazard-free", "signals": [output]} for output in outputs]
    settles, race, *clean = circuit.check(environment(case), {"check": "settles"}, {"check": "race-free"}, *hazards)
    session = circuit.session(environment(case))
    named = {changed(circuit, session, r): r for r in responses(session, outputs)}
    return Look(circuit, session, settles, race, dict(zip(outputs, clean, strict=True)), named)


def changed(circuit: Subject, session: Session, response: Response) -> tuple[str, str]:
    """Start and change of a response in the notation of the data."""
    before, after = circuit.notation(session, response.before), circuit.notation(session, response.after)
    moved = [f"{x}={b}" for x, a, b in zip(circuit.inputs, before, after, strict=False) if a != b]
    return before, ",".join(moved)


@each_case
def test_verdicts_and_extent(case: Case, delay: str) -> None:
    data, found = case[f"{delay}_delays"], look(case["id"], delay)
    for result in (found.settles, found.race_free):
        assert result.ranged["stable_states"] == data["reached_stable_states"]
        assert result.ranged["input_changes"] == data["input_changes_checked"] == len(found.responses)
    rings = any(f["verdict"] == "oscillation possible" for f in data["failing"])
    races = any(len(f["ends"]) > 1 for f in data["failing"])
    assert found.settles.verdict == ("refuted" if rings else "proved"), case["source"]
    assert found.race_free.verdict == ("refuted" if races else "proved"), case["source"]


@each_case
def test_every_failing_change(case: Case, delay: str) -> None:
    data, found = case[f"{delay}_delays"], look(case["id"], delay)
    listed = {(f["start"], f["change"]): (f["verdict"], sorted(f["ends"])) for f in data["failing"]}
    assert found.failing() == listed, case["source"]
    assert max(r.passed for r in found.responses.values()) == data["largest_state_set"]
    for f in data["failing"]:
        response = found.responses[f["start"], f["change"]]
        end = walk_order(found.session, response.before, f["order"])
        assert response.ends[end] == len(f["order"].split()), "the recorded order is a shortest one to its end"


@each_case
def test_every_hazard(case: Case, delay: str) -> None:
    """Hazards are listed for the changes that settle in one way only."""
    data, found = case[f"{delay}_delays"], look(case["id"], delay)
    some = {output for response in found.responses.values() for output in response.flickers}
    assert {output for output, r in found.hazard_free.items() if r.verdict == "refuted"} == some
    hazards = {(*name, output) for name, r in found.responses.items() if not r.bad for output in r.flickers}
    assert {name: hazard(found.circuit, *name) for name in hazards} == {
        (h["start"], h["change"], h["output"]): (h["kind"], len(h["order"].split())) for h in data["hazards"]
    }, case["source"]


@pytest.mark.parametrize("case", [pytest.param(c, id=c["id"]) for c in CASES])
def test_stable_total_states(case: Case) -> None:
    circuit = subject(case, "gate")
    if case["stable_total_states"] == 0:
        (none,) = circuit.check({}, {"check": "stable-states"})
        assert none.verdict == "refuted"
        return
    listed = case.get("stable_list", [])
    either = " | ".join(conjunction(circuit.values(s)) for s in listed) or "1"
    (result,) = circuit.check({}, {"check": "always", "when": "stable", "expr": either})
    assert result.verdict == "proved"
    assert result.ranged["stable_states"] == case["stable_total_states"]
    assert len(set(listed)) in (0, case["stable_total_states"])


def hazard(circuit: Subject, before: str, change: str, output: str) -> tuple[str, int]:
    """The class of the hazard of one output in one change, and the steps to the first wrong value."""
    moved, value = change.split("=")
    old = circuit.values(before)[output]
    result, leaves = circuit.check(
        circuit.one_change(before, {moved: int(value)}),
        {"check": "hazard-free", "signals": [output]},
        {"check": "always", "expr": output if old else f"~{output}"},
    )
    assert result.verdict == leaves.verdict == "refuted"
    kind = result.facts["hazard"]["class"]
    wrong = result.facts["offending_step"] if kind == "dynamic" else len(leaves.traces[0].steps) - 1
    return kind, wrong
