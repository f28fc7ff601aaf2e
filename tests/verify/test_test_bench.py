"""Test benches: an ordinary simulator shows each failure, with exactly the events of the run, at their times."""

from __future__ import annotations

import operator
from collections import Counter
from itertools import accumulate
from pathlib import Path

import pytest
from judging import netlist_of, session_of
from random_circuits import forward, mixed, pieces, random_question
from random_pairs import random_pair
from simulator import complaint, needs_simulator, run_bench, schedules

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import and_, not_, or_, var, xor
from settled.models.specification import CircuitSource, Property
from settled.models.states import Run
from settled.verify import check
from settled.verify.inputs import gallery
from settled.verify.questions import Reaches
from settled.verify.renderers.cause_text import groups
from settled.verify.renderers.test_bench import NEEDED, files, to_verilog
from settled.verify.result import FileReport, Result, trace
from settled.verify.session import Session, Settings, load

pytestmark = needs_simulator

GATES = (forward, pieces, pieces, mixed)
GALLERY = sorted(name for name in gallery() if name.endswith(".toml"))
OTHERS = (
    "essential-hazard-free", "settles", "stable-states", "speed-independent", "deadlock-free", "leads-to",
    "initialises",
)  # fmt: skip


def report_of(circuit: Circuit, environment: Environment, *properties: Property) -> FileReport:
    session = session_of(circuit, environment, properties, Settings(seconds=20))
    return session.report(list(session.results()))


@pytest.mark.parametrize("name", GALLERY)
def test_every_refuted_property_of_the_gallery_fails_in_the_simulator(name: str, tmp_path: Path) -> None:
    report = check(gallery()[name])
    for result in report.results:
        text = to_verilog(report, result)
        assert (text is not None) == (result.verdict == "refuted"), result.name
        if text is not None:
            assert complaint(report, result, run_bench(text, tmp_path)) is None


@pytest.mark.parametrize("name", ["race-free", "hazard-free", "never"])
def test_random_gate_level_circuits_fail_in_the_simulator(name: str, tmp_path: Path) -> None:
    """Every one does; nine in ten with one delay for each node, the others after the proof that this cannot be."""
    kinds: Counter[str] = Counter()
    for seed in range(100):
        question = random_question(f"bench {seed}", name, styles=GATES)
        report = report_of(*question[:2], Property(name, name, question.options))
        (result,) = report.results
        if result.verdict == "refuted":
            text = to_verilog(report, result)
            assert text is not None
            assert complaint(report, result, run_bench(text, tmp_path)) is None, seed
            found = [run.kind for run in schedules(report, result)]
            assert all(NEEDED[kind] in text for kind in found)
            kinds["gate" if set(found) == {"gate"} else "more"] += 1
    assert kinds["gate"] >= 15 and kinds["gate"] >= 0.8 * kinds.total()


@pytest.mark.parametrize("name", OTHERS)
def test_failures_of_other_properties_are_shown_too(name: str, tmp_path: Path) -> None:
    shown = 0
    for seed in range(30):
        question = random_question(f"bench {seed}", name)
        report = report_of(*question[:2], Property(name, name, question.options))
        (result,) = report.results
        text = to_verilog(report, result)
        moves = any(len(made.steps) > 1 or made.steps[0].stable for made in result.traces)
        if result.verdict == "refuted" and name != "stable-states":
            assert text is not None or not moves
        if text is not None:
            assert complaint(report, result, run_bench(text, tmp_path)) is None, seed
            shown += 1
    assert shown >= 4


def test_each_cause_has_a_bench_that_shows_it(tmp_path: Path) -> None:
    session = Session(load(gallery()["clock_switch_plain"]), Settings(every=True, only=["hazard-free"]))
    report = session.report(list(session.results()))
    causes = [group for _, group in groups(report.results[0])]
    written = files([report], {})
    assert len(written) == len(causes) > 1
    for group, text in zip(causes, written.values(), strict=True):
        assert complaint(report, group, run_bench(text, tmp_path)) is None


def test_two_circuits_that_differ_are_seen_to_differ(tmp_path: Path) -> None:
    shown = 0
    for seed in range(60):
        pair = random_pair(f"bench {seed}")
        to = CircuitSource(netlist_of(pair.other), "gate", winners=pair.other.winners)
        options = {"to": to, "outputs": pair.outputs, "transients": bool(seed % 2)}
        report = report_of(pair.original, pair.environment, Property("e", "equivalent", options))
        (result,) = report.results
        text = to_verilog(report, result)
        if result.verdict == "refuted":
            assert text is not None or len(result.traces) == 1
        if text is not None:
            assert complaint(report, result, run_bench(text, tmp_path)) is None, seed
            shown += 1
    assert shown >= 10


def test_a_node_that_sees_a_tie_is_not_disturbed_by_it(tmp_path: Path) -> None:
    """`p` and `q` switch together while `g` stays excited: a simulator must not start its delay again in between."""
    p, q, w, x = map(var, "pqwx")
    late = or_(and_(or_(and_(p, w), not_(w)), w), not_(w))
    circuit = Circuit("tie", ("w", "x"), ("p", "q", "g"), {"p": x, "q": x, "g": and_(w, not_(xor(late, q)))}, ("g",))
    moves = ("", "w", "x", "pq", "g")
    states = list(accumulate((sum(1 << circuit.place[s] for s in move) for move in moves), operator.xor))
    made = trace(circuit, Run("a tie", tuple(states), None, "tie"))
    bad = Reaches(and_(var("g"), p, q))
    result = Result("never g", "never", "refuted", "", "", 0.0, traces=(made,), question=bad)
    report = FileReport("tie.toml", "", circuit, Environment(), (), (result,))
    text = to_verilog(report, result)
    assert text is not None and complaint(report, result, run_bench(text, tmp_path)) is None


def test_names_of_any_kind_compile(tmp_path: Path) -> None:
    names = ("wire", "hold", "u1.q", 'a>"b%d', "x[3]", "\u00e9", "q\\n", "run_1", "now")
    excitation = {name: var("begin") for name in names}
    circuit = Circuit("names", ("begin",), names, excitation, ("wire",))
    report = report_of(circuit, Environment(start={"begin": 0}), Property("</x>\n*/", "never", {"expr": var("now")}))
    (result,) = report.results
    text = to_verilog(report, result)
    assert text is not None
    printed = run_bench(text, tmp_path)
    assert any(line.startswith("FAIL at ") and line.endswith("now is true in a total state") for line in printed)
    assert {line.split()[2] for line in printed if " run_1 " in line} >= {r"\begin+", "now+"}


@pytest.mark.parametrize(
    ("name", "before", "after"),
    [
        ("level_latch/race-free.v", "circuit_2 run_2", "circuit_1 run_2"),
        ("clock_switch_plain/hazard-free.v", "assign #1 gb", "assign #9 gb"),
        ("sluice_interlock_buttons/never-both-main-contacts.v", "assign #4 kl", "assign #1 kl"),
        ("float_chatter/settles.v", "~coil", "1'b1"),
    ],
)
def test_with_the_cause_taken_away_nothing_fails(name: str, before: str, after: str, tmp_path: Path) -> None:
    text = files([check(gallery()[name.split("/")[0]])], {})[name]
    assert any(line.startswith("FAIL") for line in run_bench(text, tmp_path))
    assert before in text
    assert run_bench(text.replace(before, after), tmp_path)[-1] == "not shown"
