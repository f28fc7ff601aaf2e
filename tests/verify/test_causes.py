"""The ordering decision behind a race or hazard: who was late, and every cause of a failure with --all."""

from __future__ import annotations

import json
import re
from dataclasses import replace
from importlib.resources import files
from typing import Any

import oracle_traces
import pytest
from jsonschema import Draft202012Validator
from judging import session_of
from oracle import resting, second_changes
from oracle_world import World, reach
from random_circuits import random_question
from typer.testing import CliRunner

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import and_, not_, var
from settled.models.specification import Property
from settled.verify import causes, check
from settled.verify.cli import app
from settled.verify.inputs import gallery
from settled.verify.renderers.page import Page
from settled.verify.renderers.text import verdict
from settled.verify.result import Result, document
from settled.verify.session import Settings

RACES = {
    "clock_switch_unruled": ("ca/sel", "ma-", "ca-"),
    "level_latch": ("g", "q-", "keep+"),
    "sample_flip_flop_wires": ("clk", "c-", "clk>c-"),
    "wake_latch_unruled": ("s/r", "q+", "p+"),
}
HAZARDS = {
    "clock_switch_plain": ("out-", "ga+", "ga+"),
    "level_latch": ("q-", "keep+", "keep+"),
    "sample_flip_flop": ("q_n+", "c+", "c+"),
    "wake_latch_unruled": ("q+", "r+", "r+"),
}


@pytest.mark.parametrize("name", RACES)
def test_the_race_of_a_gallery_file(name: str) -> None:
    (result,) = check(gallery()[name], only=["race-free"]).results
    race = result.facts["race"]
    assert (race["fork"], race["events"]["early"], race["events"]["late"]) == RACES[name]
    shown = result.traces[race["trace"]].steps[race["step"]]
    assert race["early"] in shown.switched


@pytest.mark.parametrize("name", HAZARDS)
def test_the_late_gate_of_a_gallery_file(name: str) -> None:
    (result,) = check(gallery()[name], only=["hazard-free"]).results
    events = result.facts["fault"]["events"]
    assert (events["signal"], events["term"], events["late"]) == HAZARDS[name]


def refutations(check: str, cases: int, every: bool = False) -> list[tuple[Circuit, Environment, Any, Result]]:
    found = []
    for seed in range(cases):
        circuit, environment, options = random_question(f"cause {seed}", check, nodes=4, inputs=2)
        session = session_of(circuit, environment, (Property(check, check, options),), Settings(every=every))
        (result,) = session.results()
        if result.verdict == "refuted":
            found.append((circuit, environment, options, result))
    assert len(found) > cases / 12
    return found


def test_a_run_is_decided_from_the_step_on_from_which_only_its_end_can_be_reached() -> None:
    for circuit, environment, _, result in refutations("race-free", 150):
        world = World(circuit, environment)
        for trace, decided in zip(result.traces, result.facts["decided_at"], strict=True):
            run = oracle_traces.Run(world, [frozenset(s for s in circuit.signals if t.state[s]) for t in trace.steps])
            run.begin_at_start()
            before = result.facts["before"]
            change = run.states[before] & set(circuit.inputs) ^ run.last & set(circuit.inputs)
            for place in range(before + 1, len(run.states)):
                now = [at for c, at in run.response_from(before, place + 1) if c == change]
                open_ = {at.state for at in reach(now, world.respond) if world.ended(at)}
                assert (open_ == {run.last}) == (place >= decided)


def test_the_early_event_of_a_race_is_at_its_step_and_the_late_one_is_not_before_it() -> None:
    for circuit, _, _, result in refutations("race-free", 150):
        race, before = result.facts["race"], result.facts["before"]
        steps = result.traces[race["trace"]].steps
        assert race["early"] in steps[race["step"]].switched and race["early"] != race["late"]
        value = steps[race["step"]].state[race["early"]]
        assert race["events"]["early"] == race["early"] + ("+" if value else "-")
        assert set(race["fork"].split("/")) <= set(circuit.signals)
        assert before < race["step"] <= max(result.facts["decided_at"])


def test_the_late_gate_of_a_hazard_was_due_before_the_signal_changed() -> None:
    late = []
    for circuit, _, _, result in refutations("hazard-free", 80):
        fault, signal = result.facts["fault"], result.facts["hazard"]["signal"]
        steps, last, first = result.traces[0].steps, result.facts["offending_step"], fault["step"]
        values = [step.state[signal] for step in steps[: last + 1]]
        assert values[first] != values[first - 1] == values[last]
        assert any(fault["term"] in step.switched for step in steps[result.facts["before"] + 1 : last + 1])
        if fault["late"] in circuit.nodes and first > result.facts["before"] + 1:
            assert fault["late"] in steps[first - 1].excited
            late.append(fault["late"])
    assert len(late) > 5


@pytest.mark.parametrize("kind", ["race-free", "hazard-free"])
def test_every_failing_change_has_a_cause_and_every_cause_is_a_failure(kind: str) -> None:
    several = 0
    for circuit, environment, options, result in refutations(kind, 60, every=True):
        (alone,) = session_of(circuit, environment, (Property(kind, kind, options),)).results()
        causes = result.facts["causes"]
        assert result.facts["causes_reason"] is None
        assert result.traces == alone.traces and causes[0]["id"] == alone.facts["cause"]
        assert len({cause["id"] for cause in causes}) == len(causes)
        written = document_of(circuit, environment, kind, options, result)["traces"]
        for cause in causes:
            traces = [written[i] for i in cause["traces"]]
            assert oracle_traces.offending(circuit, environment, kind, options, traces, cause) is None
        failing = failures(World(circuit, environment), kind, options)
        counts = [cause["explains"] for cause in causes]
        assert max(counts) <= len(failing) <= sum(counts)
        several += len(causes) > 1
    assert several > 2


def document_of(circuit: Circuit, environment: Environment, kind: str, options: Any, result: Result) -> dict[str, Any]:
    session = session_of(circuit, environment, (Property(kind, kind, options),))
    (written,) = document([session.report([result])])["files"][0]["results"]
    return written


def failures(world: World, kind: str, options: Any) -> list[Any]:
    """The input changes that fail, by enumeration."""
    changes = [(s, c, sch) for s in resting(world) for c, sch in world.changes(s).items()]
    if kind == "race-free":
        return [(s, c) for s, c, schedules in changes if len(world.ends(s, schedules)) > 1]
    watched = options.get("signals", world.circuit.outputs)
    return [(s, c) for s, c, sch in changes if any(second_changes(world, s, sch, name) for name in watched)]


LATCH = """
[circuit]
inputs = ["d", "g"]
outputs = ["q"]
[circuit.excitation]
n = "~g"
take = "d & g"
keep = "q & n"
q = "take | keep"
[[property]]
check = "race-free"
[[property]]
check = "hazard-free"
"""


def identities(text: str, **settings: Any) -> dict[str, str]:
    return {r.check: r.facts["cause"] for r in check("latch.toml", text=text, **settings).results}


def test_an_identity_survives_what_does_not_concern_it() -> None:
    """Another order of the lines, a gate more, another start, another name of the property."""
    moved = LATCH.replace('n = "~g"\n', "").replace("q = ", 'lamp = "~q"\nn = "~g"\nq = ')
    held = LATCH.replace("[[property]]", "[environment]\nstart = { q = 1, d = 1 }\n[[property]]\nname = 'lost'", 1)
    assert identities(LATCH) == identities(moved) == identities(held)
    renamed = LATCH.replace("keep", "hold")
    assert not set(identities(LATCH).values()) & set(identities(renamed).values())


def test_of_two_gates_alike_neither_is_preferred_by_its_line() -> None:
    latch = """
[circuit]
inputs = ["s", "r"]
outputs = ["q", "p"]
[circuit.excitation]
q = "~(r | p)"
p = "~(s | q)"
[environment]
changes = "simultaneous"
[[property]]
check = "race-free"
"""
    mirrored = latch.replace('q = "~(r | p)"\np = "~(s | q)"', 'p = "~(s | q)"\nq = "~(r | p)"')
    assert mirrored != latch and identities(mirrored) == identities(latch)


@pytest.mark.parametrize("kind", ["race-free", "hazard-free"])
def test_identities_survive_other_orders_and_a_gate_more(kind: str) -> None:
    several = 0
    for circuit, environment, options, result in refutations(kind, 60, every=True):
        shuffled = replace(circuit, inputs=circuit.inputs[::-1], nodes=circuit.nodes[2:] + circuit.nodes[:2])
        beside = {"beside": not_(var(circuit.inputs[0])), "behind": and_(var(circuit.nodes[-1]), var("beside"))}
        wider = replace(
            circuit, nodes=(*circuit.nodes, "beside", "behind"), excitation={**circuit.excitation, **beside}
        )
        options = {"signals": circuit.outputs, **options} if kind == "hazard-free" else options
        for other in (shuffled, wider):
            session = session_of(other, environment, (Property(kind, kind, options),), Settings(every=True))
            (again,) = session.results()
            assert {c["id"] for c in again.facts["causes"]} == {c["id"] for c in result.facts["causes"]}
        several += len(result.facts["causes"]) > 1
    assert several > 2


def test_a_race_in_a_circuit_too_wide_for_a_search_is_explained_in_its_core() -> None:
    behind = "".join(f'w{i} = "{f"w{i - 1}" if i else "q"} ^ d"\n' for i in range(80))
    wide = LATCH.replace('q = "take | keep"\n', f'q = "take | keep"\n{behind}').split("[[property]]")[0]
    wide += '[environment]\nstart = { q = 1, g = 1 }\n[[property]]\ncheck = "race-free"\n'
    narrow = wide.replace(behind, "")
    (result,), (alone,) = (check("latch.toml", text=text).results for text in (wide, narrow))
    assert len(result.traces[0].steps[0].state) > 80
    assert result.facts["cause"] == alone.facts["cause"]
    race = result.facts["race"]
    assert race["early"] in result.traces[race["trace"]].steps[race["step"]].switched


def test_a_race_whose_core_is_too_wide_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(causes, "STATES", 3)
    report = check("latch.toml", text=LATCH, only=["race-free"])
    (result,) = report.results
    assert "race" not in result.facts and "cause" not in result.facts
    shown = " ".join(verdict(result, report.circuit, Page(100)).split())
    assert "the fault is not singled out: limit of 3 total states reached" in shown


def test_all_on_the_command_line_in_text_and_in_the_document() -> None:
    shown = CliRunner().invoke(app, ["check", "--all", "--only", "hazard-free", "-"], input=LATCH)
    assert shown.exit_code == 1
    assert re.search(r"cause [0-9a-f]{8} \(1 of 2\), explains 1 input change\n", shown.stdout)
    assert shown.stdout.count("did not wait for") == 2
    written = json.loads(CliRunner().invoke(app, ["check", "--all", "--json", "-"], input=LATCH).stdout)
    schema = json.loads(files("settled.verify").joinpath("result.schema.json").read_text())
    Draft202012Validator(schema).validate(written)
    (race, hazard) = written["files"][0]["results"]
    assert [cause["traces"] for cause in hazard["facts"]["causes"]] == [[0], [1]]
    assert [cause["traces"] for cause in race["facts"]["causes"]] == [[0, 1]]


def test_a_limit_that_ends_the_enumeration_is_named() -> None:
    text = LATCH.replace("[[property]]", "[environment]\nstart = { q = 0, d = 0, g = 0 }\n[[property]]", 1)
    shown = CliRunner().invoke(app, ["check", "--all", "--states", "26", "--only", "hazard-free", "-"], input=text)
    assert "there may be further causes: limit of 26 total states reached" in " ".join(shown.stdout.split())
