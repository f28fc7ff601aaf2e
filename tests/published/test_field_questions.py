"""The further questions of `field_circuits.json`: several inputs at once, sequences, invariants, every start state.

* `mic`: inputs change in one instant; `steps`: one change after the other, each settling in one way;
* `always`, `never_reached`: inputs with guards, some of which wait until the circuit is stable (`STABLE`) or never
  move (`NEVER`), the others free to move at any moment: input-output mode;
* `closed`: circuits without inputs; `allstart`, `powerup`: held inputs, every total state as a start.

`gate_single` and `gate_multi` are the rules that one signal, or any of those that may, switches in a step.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import pytest
from graph_readings import Response, graph_of, response, responses, walk_order
from published_cases import Subject, cases, frozen, transition

from settled.models.states import pack, unpack, value
from settled.verify.session import Session

Case = dict[str, Any]
Question = dict[str, Any]
CASES = cases("field_circuits.json")
WORDS = {"no_race": "no race", "noncritical_race": "no race", "critical_race": "critical race"}


def each(*kinds: str) -> pytest.MarkDecorator:
    """Every question of these kinds, called by its case and what it asks."""
    found = [
        pytest.param(case, question, id=f"{case['id']}: {question['label']}")
        for case in CASES
        for question in case["extra"]
        if question["kind"] in kinds
    ]
    return pytest.mark.parametrize(("case", "question"), found)


def subject(case: Case, delay: str = "gate", winners: str = "any") -> Subject:
    """The circuit of a case."""
    return Subject(tuple(case["inputs"]), case["gates"], delay, winners, case["cells"])


@each("mic")
@pytest.mark.parametrize("delay", ["gate", "wire"])
def test_inputs_change_together(case: Case, question: Question, delay: str) -> None:
    expected = question["result"][f"{delay}_delays"]
    circuit = subject(case, delay, "any" if delay == "gate" else "one")
    ends = [dict(zip(question["proj"], map(int, bits), strict=True)) for bits in expected["ends"]]
    found = transition(circuit, question["from"], question["set"], ends)
    assert WORDS.get(found.word, "oscillation possible") == expected["verdict"]
    session = circuit.session(circuit.one_change(question["from"], question["set"]))
    (only,) = responses(session)
    assert only.passed == expected["states"]
    if "order" in expected:
        end = walk_order(session, only.before, expected["order"])
        assert only.ends[end] == len(expected["order"].split())


@each("steps")
def test_sequence_of_changes(case: Case, question: Question) -> None:
    """Every change settles in one way, and the signals looked at then have the values of the data."""
    circuit, now = subject(case), subject(case).values(case["initial"])
    for goal, text in zip(question["seq"], question["result"], strict=True):
        values = dict(word.split("=") for word in text.split(" -> ")[1].split())
        expected = {name: int(value) for name, value in values.items()}
        found = transition(circuit, now, goal, [expected])
        assert found.word in ("no_race", "noncritical_race"), text
        reached = found.results[-1].traces[0].steps[-1].state
        now = {name: reached[name] for name in now}


def guarded(case: Case, question: Question) -> dict[str, Any]:
    """The environment of a question with guards, in input-output mode."""
    circuit = subject(case)
    words = {"STABLE": circuit.stable(), "NEVER": "0"}
    inputs = {}
    for x in case["inputs"]:
        guard = question["guards"].get(x, "1")
        inputs[x] = dict.fromkeys(("rises", "falls"), words.get(guard, guard))
    return {"mode": "input-output", "start": circuit.values(question["from"]), "inputs": inputs}


def always(wanted: str) -> pytest.MarkDecorator:
    """Every question of the kind `always` that has the key `wanted`, with each rule that the data answers it for."""
    found = [
        pytest.param(case, question, model, id=f"{case['id']}: {question['label']}-{model}")
        for case in CASES
        for question in case["extra"]
        if question["kind"] == "always" and wanted in question
        for model in question["models"]
    ]
    return pytest.mark.parametrize(("case", "question", "model"), found)


@always("expr")
def test_always(case: Case, question: Question, model: str) -> None:
    expected = question["result"][model]
    circuit = subject(case, winners="one" if model == "gate_single" else "any")
    environment, asked = guarded(case, question), {"check": "always", "expr": question["expr"]}
    (result,) = circuit.check(environment, asked)
    assert result.verdict == ("proved" if expected["holds"] else "refuted")
    if expected["holds"]:
        assert result.ranged["total_states"] == expected["states"]
    else:
        session = circuit.session(environment, asked)
        last = walk_order(session, pack(session.circuit, environment["start"]), expected["order"])
        assert value(session.circuit, [session.properties[0].options["expr"]], last) == [0]
        moved = [[s for s in step.switched if s in case["inputs"]] for step in result.traces[0].steps]
        recorded = [[e for e in step.split("/") if e[:-1] in case["inputs"]] for step in expected["order"].split()]
        assert sum(map(bool, moved)) <= sum(map(bool, recorded)), "no run with more input changes than the recorded one"


@always("withdrawn")
def test_withdrawn_excitations(case: Case, question: Question, model: str) -> None:
    """A node loses its excitation without having switched: those of the data (`node by event`) and no others."""
    circuit = subject(case, winners="one" if model == "gate_single" else "any")
    nodes = list(case["gates"])
    alone = [{"check": "speed-independent", "except": [m for m in nodes if m != n]} for n in nodes]
    results = circuit.check(guarded(case, question), *alone)
    found = {n for n, result in zip(nodes, results, strict=True) if result.verdict == "refuted"}
    assert found == {entry.split()[0] for entry in question["result"][model]["excitation_withdrawn"]}


@each("never_reached")
def test_never_reached(case: Case, question: Question) -> None:
    (result,) = subject(case).check(guarded(case, question), {"check": "never", "expr": question["expr"]})
    assert (result.verdict == "proved") == question["result"]["never_reached"]
    assert result.ranged["total_states"] == question["result"]["states"]


@each("closed")
def test_closed_circuit(case: Case, question: Question) -> None:
    """Counted one switching node at a time."""
    expected = question["result"]
    circuit = subject(case, winners="one")
    environment = {"mode": "input-output", "start": circuit.values(case["initial"])}
    checks = [{"check": "always", "expr": "1"}, {"check": "deadlock-free"}, {"check": "speed-independent"}]
    counted, live, semimodular = circuit.check(environment, *checks)
    assert counted.ranged["total_states"] == expected["states"]
    assert counted.ranged["stable_states"] == expected["deadlocks"]
    assert live.verdict == ("refuted" if expected["deadlocks"] else "proved")
    assert semimodular.verdict == ("refuted" if expected["withdrawn_excitations"] else "proved")


def held(circuit: Subject, inputs: Mapping[str, int]) -> tuple[Session, list[Response]]:
    """What follows in each total state with these inputs, all of them held."""
    environment = {"mode": "input-output", "start": inputs, "inputs": frozen(circuit.inputs)}
    session = circuit.session(environment)
    graph = graph_of(session)
    found = [response(graph, vertex, vertex) for vertex in range(len(graph))]
    (settles,) = circuit.check(environment, {"check": "settles"})
    assert settles.verdict == ("refuted" if any(r.oscillates for r in found) else "proved")
    return session, found


@each("allstart")
def test_from_every_total_state(case: Case, question: Question) -> None:
    expected, circuit = question["result"], subject(case)
    session, found = held(circuit, {})
    assert len(found) == expected["start_states"]
    assert max(len(r.ends) for r in found) == expected["max_ends"]
    assert sum(r.oscillates for r in found) == expected["can_oscillate"]
    stable = {circuit.notation(session, end) for r in found for end in r.ends}
    listed = {f"{vector}.{node}" for vector, nodes in expected["stable_per_input"].items() for node in nodes}
    assert stable == listed


@each("powerup")
def test_power_up(case: Case, question: Question) -> None:
    expected, circuit = question["result"], subject(case)
    session, found = held(circuit, question["inputs"])
    assert len(found) == expected["start_states"]
    assert sum(r.oscillates for r in found) == expected["start_states_that_can_oscillate"]
    values = [unpack(session.circuit, end) for r in found for end in r.ends]
    assert {"".join(str(v[n]) for n in question["proj"]) for v in values} == set(expected["ends"])
