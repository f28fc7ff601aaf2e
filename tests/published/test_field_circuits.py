"""Small circuits met in practice: every input change, every failing one, every hazard, under gate and wire delays.

The verdicts of `field_circuits.json` were found by enumeration of total states: with the general multiple winner
model under gate delays, one signal at a time under wire delays. A gate that reads its own output has no connection
for that pin there, so each such gate stands in the data as a closed cell of its own.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

import pytest
from graph_readings import Response, responses, walk_order
from published_cases import Subject, cases, conjunction

from settled.verify.session import Session

Case = dict[str, Any]
CASES = cases("field_circuits.json")
UNDER_DELAYS = [pytest.param(c, d, id=f"{c['id']}-{d}") for c in CASES for d in ("gate", "wire") if f"{d}_delays" in c]
each_case = pytest.mark.parametrize(("case", "delay"), UNDER_DELAYS)


def subject(case: Case, delay: str) -> Subject:
    """The circuit of a case under the delays and the winner rule with which its verdicts were found."""
    winners = "any" if delay == "gate" else "one"
    return Subject(tuple(case["inputs"]), case["gates"], delay, winners, case["cells"])


def environment(case: Case, from_start: bool = True) -> dict[str, Any]:
    """Single input changes, the forbidden input vectors left out."""
    assume = [f"~({expression})" for expression in case["forbidden_inputs"]]
    start = subject(case, "gate").values(case["initial"]) if from_start else {}
    return {"assume": assume, "start": start}


def named(circuit: Subject, session: Session, watched: Sequence[str] = ()) -> Iterator[tuple[tuple[str, str], Response]]:
    """Every response by its start and change in the notation of the data."""
    for response in responses(session, watched):
        before, after = circuit.notation(session, response.before), circuit.notation(session, response.after)
        moved = [f"{x}={b}" for x, a, b in zip(circuit.inputs, before, after, strict=False) if a != b]
        yield (before, ",".join(moved)), response


def verdict(circuit: Subject, session: Session, response: Response) -> tuple[str, list[str]]:
    """The verdict on one change in the words of the data, and the ends over the gates."""
    ends = sorted(circuit.notation(session, end).split(".")[1] for end in response.ends)
    word = "oscillation possible" if response.oscillates else "critical race" if len(ends) > 1 else "no race"
    return word, ends


@each_case
def test_verdicts_and_extent(case: Case, delay: str) -> None:
    data = case[f"{delay}_delays"]
    circuit = subject(case, delay)
    results = circuit.check(environment(case), {"check": "settles"}, {"check": "race-free"})
    for result in results:
        assert result.ranged["stable_states"] == data["reached_stable_states"]
        assert result.ranged["input_changes"] == data["input_changes_checked"]
    rings = any(f["verdict"] == "oscillation possible" for f in data["failing"])
    races = any(len(f["ends"]) > 1 for f in data["failing"])
    expected = ["refuted" if fails else "proved" for fails in (rings, races)]
    assert [r.verdict for r in results] == expected, case["source"]


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


@each_case
def test_every_failing_change(case: Case, delay: str) -> None:
    data = case[f"{delay}_delays"]
    circuit = subject(case, delay)
    session = circuit.session(environment(case))
    found = dict(named(circuit, session))
    failing = {name: verdict(circuit, session, r) for name, r in found.items() if r.bad}
    assert failing == {(f["start"], f["change"]): (f["verdict"], sorted(f["ends"])) for f in data["failing"]}
    assert max(r.passed for r in found.values()) == data["largest_state_set"]
    for f in data["failing"]:
        response = found[f["start"], f["change"]]
        end = walk_order(session, response.before, f["order"])
        assert response.ends[end] == len(f["order"].split()), "the recorded order is a shortest one to its end"


@pytest.mark.parametrize(("case", "delay"), [p for p in UNDER_DELAYS if p.values[0]["outputs"]])
def test_every_hazard(case: Case, delay: str) -> None:
    """Hazards are listed for the changes that settle in one way only."""
    data = case[f"{delay}_delays"]
    circuit = subject(case, delay)
    found = dict(named(circuit, circuit.session(environment(case)), case["outputs"]))
    some = {output for response in found.values() for output in response.flickers}
    checks = [{"check": "hazard-free", "signals": [output]} for output in case["outputs"]]
    results = circuit.check(environment(case), *checks)
    assert {o for o, r in zip(case["outputs"], results, strict=True) if r.verdict == "refuted"} == some
    hazards = {(*name, output) for name, r in found.items() if not r.bad for output in r.flickers}
    assert {name: hazard(circuit, *name) for name in hazards} == {
        (h["start"], h["change"], h["output"]): (h["kind"], len(h["order"].split())) for h in data["hazards"]
    }


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
