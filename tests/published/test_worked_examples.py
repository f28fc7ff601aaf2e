"""Worked examples of textbooks and papers; source and status stand beside each case in `worked_examples.json`.

The kinds of checks, as the data names them, and how each is put to the program:

* `stable`: all stable total states; `tr`: one input change from a stable state, what it can end in and how;
* `sic`: every single input change from every stable state, how many of them race or can oscillate;
* `haz`, `hazsic`: the hazard of a node in one change, in every change of one input;
* `ess`, `ess_net`: one change against three, of a flow table and of a network of gates;
* `quiet`: changes of some inputs never move a signal;
* `semi`, `inv`: closed circuits, the environment written as nodes; what is counted, what always holds.

`model`: GMW is the rule that any excited nodes may switch at once, GSW that one does. `wires`: connections carry
delays.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import product
from typing import Any

import pytest
from graph_readings import graph_of, responses
from published_cases import Subject, cases, conjunction, frozen, transition

from settled.verify.explicit.changes_thrice import ThreeChanges
from settled.verify.result import Result

Case = dict[str, Any]
Check = dict[str, Any]
CASES = cases("worked_examples.json")


def each(kind: str) -> pytest.MarkDecorator:
    """Every check of one kind, called by its case and its number there."""
    found = [
        pytest.param(case, check, id=f"{case['id']}-{number}")
        for case in CASES
        for number, check in enumerate(case["checks"])
        if check["k"] == kind
    ]
    return pytest.mark.parametrize(("case", "check"), found)


def subject(case: Case, check: Check) -> Subject:
    """The circuit of a case under the delays and the winner rule of a check."""
    delay = "wire" if check.get("wires") else "gate"
    winners = "one" if check.get("model") == "GSW" else "any"
    return Subject(tuple(case["inputs"]), case["excitation"], delay, winners)


@each("stable")
def test_stable_total_states(case: Case, check: Check) -> None:
    circuit = subject(case, check)
    listed = check.get("expect", [])
    either = " | ".join(conjunction(circuit.values(s)) for s in listed) or "1"
    (result,) = circuit.check({}, {"check": "always", "when": "stable", "expr": either})
    assert result.verdict == "proved", case["source"]
    assert result.ranged["stable_states"] == check.get("count", len(set(listed)))


@each("tr")
def test_one_change(case: Case, check: Check) -> None:
    names = check.get("proj", list(case["excitation"]))
    ends = [dict(zip(names, map(int, bits), strict=True)) for bits in check["outs"]]
    found = transition(subject(case, check), check["from"], check["set"], ends)
    assert found.word == check["verdict"], case["source"]
    if found.word == "oscillation":
        assert found.results[0].facts["some_run_settles"] is False


@each("sic")
def test_every_single_change(case: Case, check: Check) -> None:
    circuit = subject(case, check)
    session = circuit.session({})
    bad = [r for r in responses(session) if r.bad]
    if "nbad" in check:
        assert len(bad) == check["nbad"], case["source"]
    if "bad" in check:
        named = [[circuit.notation(session, r.before), r.before ^ r.after] for r in bad]
        assert named == [[state, 1 << session.circuit.place[x]] for state, x in check["bad"]], case["source"]
    settles, race = circuit.check({}, {"check": "settles"}, {"check": "race-free"})
    assert settles.verdict == ("refuted" if any(r.oscillates for r in bad) else "proved")
    assert race.verdict == ("refuted" if any(len(r.ends) > 1 for r in bad) else "proved")


@each("haz")
def test_hazard_of_one_change(case: Case, check: Check) -> None:
    circuit = subject(case, check)
    assert hazard_in(circuit, check["from"], check["set"], check["out"])["class"] == check["expect"], case["source"]
    if "kind" in check:
        environment = circuit.one_change(check["from"], check["set"])
        del environment["assume"]
        (result,) = circuit.check(environment, {"check": "hazard-free", "signals": [check["out"]]})
        assert result.facts["hazard"]["kind"] == check["kind"], "every order of the inputs alone counts"


def hazard_in(circuit: Subject, before: str | Mapping[str, int], goal: Mapping[str, int], out: str) -> dict[str, Any]:
    """The hazard of one node in one change, its class in the words of the data."""
    (result,) = circuit.check(circuit.one_change(before, goal), {"check": "hazard-free", "signals": [out]})
    if result.verdict == "proved":
        return {"class": "none"}
    hazard: dict[str, Any] = dict(result.facts["hazard"])
    return hazard | {"class": (hazard["class"] or "undetermined").replace("-", "")}


@each("hazsic")
def test_every_hazard(case: Case, check: Check) -> None:
    circuit = subject(case, check)
    (whole,) = circuit.check({}, {"check": "hazard-free", "signals": [check["out"]]})
    assert whole.verdict == ("refuted" if check["expect"] else "proved"), case["source"]
    if check["expect"]:
        found = {static_or_ordered(*hazard) for hazard in hazards(circuit, check["out"])}
        assert found == {static_or_ordered(*hazard) for hazard in check["expect"]}, case["source"]


def hazards(circuit: Subject, out: str) -> Iterator[tuple[str, str, str]]:
    """Every hazard of a node of a circuit without feedback in a single change: both input vectors, the class."""
    for vector in product("01", repeat=len(circuit.inputs)):
        before = dict(zip(circuit.inputs, map(int, vector), strict=True))
        for x in circuit.inputs:
            goal = {**before, x: 1 - before[x]}
            word = hazard_in(circuit, before, goal, out)["class"]
            if word != "none":
                yield "".join(vector), "".join(str(goal[i]) for i in circuit.inputs), word


def static_or_ordered(first: str, second: str, word: str) -> tuple[str, str, str]:
    """The hazard with its vectors in order of value when it is static, as the data counts them."""
    if word.startswith("static"):
        first, second = sorted((first, second))
    return first, second, word


@each("ess")
def test_flow_table(case: Case, check: Check) -> None:
    """The table's codes make every transition a change of one variable, so the circuit settles as the table does."""
    circuit = realised(case)
    rows = {code: row for row, code in case["codes"].items()}
    table = case["flow_table"]
    found = set()
    for state, x in essential_hazards(circuit, case["inputs"]):
        column, code = state.split(".")
        place = case["inputs"].index(x)
        other = column[:place] + str(1 - int(column[place])) + column[place + 1 :]
        walk = [rows[code]]
        for now in (other, column, other):
            walk.append(table[walk[-1]][now])
        found.add((walk[0], column, other, *walk[1:]))
    assert found == {tuple(row) for row in check["expect"]}, case["source"]


def realised(case: Case) -> Subject:
    """A flow table as excitation equations: the code of the next row, as a sum of minterms."""
    codes, inputs = case["codes"], tuple(case["inputs"])
    width = len(next(iter(codes.values())))
    nodes = [f"y{i}" for i in range(1, width + 1)]
    terms: dict[str, list[str]] = {n: [] for n in nodes}
    for row, entries in case["flow_table"].items():
        for column, after in entries.items():
            assert sum(a != b for a, b in zip(codes[row], codes[after], strict=True)) <= 1
            here = dict(zip((*inputs, *nodes), map(int, column + codes[row]), strict=True))
            for node, bit in zip(nodes, codes[after], strict=True):
                terms[node] += [conjunction(here)] if bit == "1" else []
    return Subject(inputs, {n: " | ".join(t) for n, t in terms.items()})


@each("ess_net")
def test_one_change_against_three(case: Case, check: Check) -> None:
    found = essential_hazards(subject(case, check), case["inputs"])
    assert found == {tuple(row) for row in check["expect"]}, case["source"]


def essential_hazards(circuit: Subject, inputs: list[str]) -> set[tuple[str, str]]:
    """The stable states and inputs where one change and three end apart; the verdict must say the same."""
    session = circuit.session({})
    three = ThreeChanges(graph_of(session))
    bits = {1 << session.circuit.place[x]: x for x in inputs}
    words = three.graph.vertices
    found = {(circuit.notation(session, int(words[s])), bits[b]) for b in bits for s in three.clashing(b).owner}
    (result,) = circuit.check({}, {"check": "essential-hazard-free"})
    assert result.verdict == ("refuted" if found else "proved")
    return found


@each("quiet")
def test_quiet_output(case: Case, check: Check) -> None:
    """With the other inputs held, an output that starts at a value keeps it."""
    circuit = subject(case, check)
    held = frozen(x for x in case["inputs"] if x not in check["inputs"])
    verdicts = set()
    for value in (0, 1):
        environment = {"start": {check["out"]: value}, "inputs": held}
        (result,) = circuit.check(environment, {"check": "always", "expr": conjunction({check["out"]: value})})
        assert result.ranged["input_changes"] > 0
        verdicts.add(result.verdict)
    assert ("refuted" not in verdicts) == check["holds"], case["source"]


def closed(circuit: Subject, start: str, *properties: Check) -> tuple[Result, ...]:
    """Results for a circuit without inputs, from a start that need not be stable."""
    return circuit.check({"mode": "input-output", "start": circuit.values(start)}, *properties)


@each("semi")
def test_closed_circuit(case: Case, check: Check) -> None:
    """The states were counted one switching node at a time; a semi-modular circuit reaches no more of them by pairs."""
    withdrawn = {"check": "speed-independent", "except": check.get("env", [])}
    counted, semimodular, live = closed(
        subject(case, check), check["from"], {"check": "always", "expr": "1"}, withdrawn, {"check": "deadlock-free"}
    )
    assert counted.ranged["total_states"] == check["states"], case["source"]
    assert semimodular.verdict == ("proved" if check["semimodular"] else "refuted"), case["source"]
    if "deadlocks" in check:
        assert counted.ranged["stable_states"] == check["deadlocks"]
        assert live.verdict == ("refuted" if check["deadlocks"] else "proved")
    if check["semimodular"] and "env" not in check:
        (together,) = closed(subject(case, {}), check["from"], {"check": "always", "expr": "1"})
        assert together.ranged["total_states"] == check["states"]


@each("inv")
def test_invariant(case: Case, check: Check) -> None:
    (result,) = closed(subject(case, check), check["from"], {"check": "always", "expr": check["expr"]})
    assert result.verdict == ("proved" if check["holds"] else "refuted"), case["source"]


def test_data_names_its_sources() -> None:
    for case in CASES:
        assert case["source"] and case["status"] in ("read", "from memory", "constructed"), case["id"]
