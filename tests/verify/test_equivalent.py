"""Comparing two circuits: what a refutation says, ports that do not match, renaming, and the command."""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner, Result

from settled.models.problems import InputError
from settled.verify import check
from settled.verify.cli import app

NOR = """
title = "Trip latch of the flood alarm"
[circuit]
inputs = ["s", "r"]
outputs = ["q"]
[circuit.excitation]
q = "~(r | n)"
n = "~(s | q)"
[environment]
assume = ["~(s & r)"]
"""
PLAIN = """
[circuit]
inputs = ["s", "r"]
outputs = ["q"]
[circuit.excitation]
q = "s | ~r & q"
"""
RENAMED = PLAIN.replace("s |", "set |").replace('"s"', '"set"')
ONCE = """
[circuit]
inputs = ["s", "r"]
outputs = ["q"]
[circuit.excitation]
q = "s & ~used | ~r & q"
seen = "seen | q"
used = "used | seen & ~q & ~s"
"""
RESTING = NOR + "start = { s = 0, r = 0, q = 0 }\n"
CALM = NOR + "start = { s = 0, r = 0, n = 1 }\n"
RING = PLAIN.replace('"s | ~r & q"', '"s & ~q"')


@pytest.fixture(autouse=True)
def files(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    for name, text in {
        "nor": NOR,
        "plain": PLAIN,
        "renamed": RENAMED,
        "once": ONCE,
        "resting": RESTING,
        "calm": CALM,
        "ring": RING,
    }.items():
        Path(f"{name}.toml").write_text(text)


def run(*arguments: str) -> Result:
    return CliRunner().invoke(app, ["equivalent", *arguments], catch_exceptions=False)


def document(*arguments: str) -> dict[str, Any]:
    return json.loads(run("--json", *arguments).stdout)["files"][0]["results"][0]


def test_equivalent_circuits_are_proved_with_the_relation_as_certificate() -> None:
    assert run("nor.toml", "plain.toml").exit_code == 0
    found = document("nor.toml", "plain.toml")
    assert found["verdict"] == "proved"
    relation = found["certificate"]
    assert relation["signals"] == [["s", "r", "q", "n"], ["s", "r", "q"]]
    assert sorted(relation["relation"]) == [["0001", "000"], ["0010", "001"], ["0101", "010"], ["1010", "101"]]


def test_the_environment_is_the_originals_unless_another_file_gives_it() -> None:
    assert run("plain.toml", "nor.toml").exit_code == 1
    assert run("plain.toml", "nor.toml", "--environment", "nor.toml").exit_code == 0


def test_start_values_that_only_the_original_has_leave_the_other_free_to_have_more_start_states() -> None:
    assert document("nor.toml", "once.toml", "--environment", "resting.toml")["facts"]["fewest_changes"] == 1


def test_a_difference_is_shown_by_both_runs_in_step() -> None:
    found = document("nor.toml", "once.toml", "--environment", "calm.toml")
    assert found["claim"] == (
        "After s+; s-; r+; r-; s+ from s=0 r=0 q=0 n=1 and s=0 r=0 q=0 seen=0 used=0: q is 1 in nor and 0 in once."
    )
    facts, traces = found["facts"], found["traces"]
    assert facts["fewest_changes"] == 5 and facts["difference"] == {"q": [1, 0]}
    assert [t["circuit"] for t in traces] == ["nor", "once"]
    for places in facts["in_step"]:
        steps = [t["steps"][at] for t, at in zip(traces, places, strict=True)]
        assert all(s["stable"] for s in steps)
        assert steps[0]["state"]["q"] == steps[1]["state"]["q"]


def test_input_changes_of_both_runs_have_the_same_numbers_and_times() -> None:
    said = run("nor.toml", "once.toml", "--environment", "calm.toml", "--out", "out").stdout
    changes = [line.split()[1] for line in said.splitlines() if "input change " in line]
    assert changes == ["s+", "s-", "r+", "r-", "s+"] * 2 and said.count("input change 5") == 2
    dumps = [Path(f"out/nor/equivalent-{number}.vcd").read_text() for number in (1, 2)]
    times = [re.findall(r"#(\d+)\n[01][!\"]", dump) for dump in dumps]
    assert times[0] == times[1] and len(times[0]) == 5


def test_ports_that_do_not_match_are_named_together_with_the_nearest_names() -> None:
    Path("odd.toml").write_text(
        RENAMED.replace('outputs = ["q"]', 'outputs = ["p"]').replace('q = "', 'p = "').replace("& q", "& p")
    )
    result = run("nor.toml", "odd.toml")
    assert result.exit_code == 2 and "Traceback" not in result.stderr
    for part in ("`odd` has no input `s`", "`nor` has no input `set`", "`odd` has no signal `q`", "--rename a=b"):
        assert part in result.stderr


def test_circuits_of_one_name_are_told_apart_and_the_only_name_left_is_near() -> None:
    Path("other").mkdir()
    Path("other/nor.toml").write_text(NOR.replace('"s"', '"trip"').replace("(s ", "(trip "))
    said = run("nor.toml", "other/nor.toml").stderr
    assert "`nor` has no input `trip`; did you mean `s`?" in said
    assert "`nor (other)` has no input `s`; did you mean `trip`?" in said


def test_names_can_be_mapped() -> None:
    assert run("nor.toml", "renamed.toml", "--rename", "set=s").exit_code == 0


@pytest.mark.parametrize(
    "renaming, said",
    [
        ("sett=s", "did you mean `set`?"),
        ("set", "is no renaming"),
        ("set=r", "two signals of `renamed` would be called `r`"),
    ],
)
def test_renamings_that_make_no_sense_are_input_errors(renaming: str, said: str) -> None:
    result = run("nor.toml", "renamed.toml", "--rename", renaming)
    assert result.exit_code == 2 and said in result.stderr


def test_an_environment_of_other_signals_is_an_input_error() -> None:
    Path("rules.toml").write_text(RENAMED + '[environment]\nassume = ["~(set & r)"]\n')
    result = run("nor.toml", "plain.toml", "--environment", "rules.toml")
    assert result.exit_code == 2 and "the environment speaks of `set`, which `nor` does not have" in result.stderr


def test_a_circuit_whose_own_race_leaves_its_output_open_is_not_equivalent_to_itself() -> None:
    racy = PLAIN.replace('q = "s | ~r & q"', 'm = "s & ~q"\nq = "s & ~m"').replace(
        "outputs", 'winners = "one"\noutputs'
    )
    Path("racy.toml").write_text(racy)
    found = document("racy.toml", "racy.toml", "--environment", "resting.toml")
    assert found["claim"] == (
        "After s+ from s=0 r=0 m=0 q=0 and s=0 r=0 m=0 q=0: q is 0 in racy and 1 in racy (other) "
        "(racy and racy (other) can each end in different states on the way: see the property `race-free`)."
    )


def test_a_side_that_does_not_settle_is_shown_going_round() -> None:
    found = document("plain.toml", "ring.toml", "--environment", "resting.toml")
    assert found["claim"] == (
        "After s+ from s=0 r=0 q=0 and s=0 r=0 q=0: ring can go round for ever: see the property `settles`."
    )


def test_a_start_state_without_a_partner_is_a_refutation() -> None:
    found = document("plain.toml", "ring.toml")
    assert found["claim"] == (
        "The start state s=1 r=0 q=1 of plain has no partner: ring has no start state under that input vector."
    )


def test_a_transient_that_the_original_does_not_have_is_refused_on_request() -> None:
    multiplexer = '[circuit]\ninputs = ["c", "a", "b"]\noutputs = ["z"]\n[circuit.excitation]\n'
    Path("one.toml").write_text(multiplexer + 'z = "c ? a : b"\n')
    Path("gates.toml").write_text(multiplexer + 'n = "~c"\np = "c & a"\nq = "n & b"\nz = "p | q"\n')
    assert run("one.toml", "gates.toml").exit_code == 0
    found = document("one.toml", "gates.toml", "--transients")
    assert found["verdict"] == "refuted"
    assert found["claim"].endswith("z of gates has a static-1 logic hazard: z-, z+; one has no hazard there.")
    assert run("gates.toml", "one.toml", "--transients").exit_code == 0


def test_problems_of_the_question_stand_at_its_place_in_the_file() -> None:
    text = NOR + '[[property]]\ncheck = "equivalent"\nto = { inputs = ["s"], excitation = { q = "s" } }\n'
    with pytest.raises(InputError) as caught:
        check("case.toml", text=text)
    (problem,) = caught.value.problems
    assert problem.code == "ports-differ" and problem.span is not None and problem.span.line == 13
