"""`settled table --flow`, and flow tables in property files."""

from __future__ import annotations

import json
import tomllib
from importlib.resources import files
from pathlib import Path

import pytest
from jsonschema import Draft202012Validator
from typer.testing import CliRunner, Result

from settled.models.problems import InputError
from settled.verify import check
from settled.verify.cli import app

LATCH = """
[circuit]
inputs = ["d", "g"]
outputs = ["q"]
[circuit.excitation]
n = "g & d"
k = "q & (~g | d)"
q = "n | k"
"""
FLOW = """# a: n=0 k=0 q=0
# b: n=0 k=1 q=1; n=1 k=1 q=1
d g / q, 00,    01,    11,    10
a,       (a)/0, (a)/0, b,     (a)/0
b,       (b)/1, a,     (b)/1, (b)/1
"""
ASKED = LATCH + '[[property]]\ncheck = "realises"\ntable = { file = "latch.csv" }\n'


@pytest.fixture(autouse=True)
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    Path("latch.toml").write_text(LATCH)


def run(*arguments: str) -> Result:
    return CliRunner().invoke(app, list(arguments), catch_exceptions=False)


def test_equivalent_internal_states_share_a_row() -> None:
    result = run("table", "--flow", "latch.toml")
    assert (result.exit_code, result.stdout) == (0, FLOW)


def test_what_is_printed_is_realised_when_it_is_read_back() -> None:
    Path("latch.csv").write_text(run("table", "--flow", "latch.toml").stdout)
    Path("asked.toml").write_text(ASKED)
    assert run("check", "asked.toml").exit_code == 0


def test_a_table_of_something_else_is_refuted_with_the_fewest_changes() -> None:
    Path("latch.csv").write_text(FLOW.replace("b,       (b)/1, a", "b,       (b)/1, (b)/1").replace("# ", "#"))
    Path("asked.toml").write_text(ASKED + "[environment]\nstart = { d = 0, g = 0, q = 0 }\n")
    result = run("check", "--json", "asked.toml")
    found = json.loads(result.stdout)["files"][0]["results"][0]
    assert result.exit_code == 1
    assert found["claim"] == (
        "After d+; g+; d- from d=0 g=0 row a and d=0 g=0 n=0 k=0 q=0: q is 1 in latch and 0 in asked."
    )
    assert found["facts"]["fewest_changes"] == 3


def test_what_the_table_leaves_open_is_not_compared() -> None:
    Path("latch.csv").write_text(
        FLOW.replace("b,       (b)/1, a", "b,       (b)/-, -").replace("(b)/1, (b)/1", "(b)/1, (b)/-")
    )
    Path("asked.toml").write_text(ASKED)
    assert run("check", "asked.toml").exit_code == 0


def test_problems_of_a_table_in_a_property_file_stand_at_their_places() -> None:
    table = 'table.text = """\nd g / q, 00, 01, 11, 10\na, (b)/0, a, a, a\n"""\n'
    text = LATCH + '[[property]]\ncheck = "realises"\n' + table
    with pytest.raises(InputError) as caught:
        check("case.toml", text=text)
    places = [(p.code, p.span and p.span.line, p.span and p.span.column) for p in caught.value.problems]
    assert places[0] == ("unknown-row", 13, 4)


def test_a_table_with_other_ports_is_refused() -> None:
    Path("latch.csv").write_text(FLOW.replace("d g / q", "d en / z"))
    Path("asked.toml").write_text(ASKED)
    result = run("check", "asked.toml")
    assert result.exit_code == 2
    for part in ("the flow table has no input `g`", "`asked` has no input `en`", "`asked` has no signal `z`"):
        assert part in result.stderr


@pytest.mark.parametrize("table", ["{}", '{ file = "a.csv", text = "b" }', '"a.csv"', '{ path = "a.csv" }'])
def test_neither_the_reader_nor_the_schema_takes_other_tables(table: str) -> None:
    text = ASKED.replace('{ file = "latch.csv" }', table)
    with pytest.raises(InputError):
        check("case.toml", text=text)
    schema = json.loads(files("settled.models.property_files").joinpath("property-file.schema.json").read_text())
    assert not Draft202012Validator(schema).is_valid(tomllib.loads(text))
    assert Draft202012Validator(schema).is_valid(tomllib.loads(ASKED))


@pytest.mark.parametrize(
    "change, said",
    [
        (('q = "n | k"', 'q = "n | k & ~q"'), "it need not settle: "),
        (("[circuit.excitation]", '[circuit.excitation]\nm = "d & ~w"\nw = "d & ~m"'), "need not settle"),
        (("[circuit]", '[environment]\nchanges = "burst"\n[circuit]'), "its inputs change while it moves"),
        (("[circuit]", "[environment]\nstart = { n = 1, k = 0 }\n[circuit]"), "no stable total state satisfies"),
    ],
)
def test_a_circuit_without_a_flow_table_is_refused_with_the_reason(change: tuple[str, str], said: str) -> None:
    Path("odd.toml").write_text(LATCH.replace(*change))
    result = run("table", "--flow", "odd.toml")
    assert result.exit_code == 2 and said.rstrip(": ") in result.stderr


GUARDED = (
    LATCH
    + """
[environment]
start = { d = 0, g = 0, k = 0 }
[environment.inputs]
d = { falls = "~k" }
[[property]]
check = "realises"
table = { file = "latch.csv" }
"""
)


def test_guards_that_the_table_cannot_tell_are_in_its_unspecified_entries() -> None:
    Path("asked.toml").write_text(GUARDED)
    Path("latch.csv").write_text("d g / q, 00, 01, 11, 10\na, (a)/0, (a)/0, (a)/1, (a)/0\n")
    printed = run("table", "--flow", "asked.toml").stdout
    assert printed.splitlines()[-1].split() == ["b,", "-,", "-,", "(b)/1,", "(b)/1"]
    Path("latch.csv").write_text(printed)
    assert run("check", "asked.toml").exit_code == 0


def test_a_difference_that_such_a_guard_may_forbid_is_none() -> None:
    Path("asked.toml").write_text(GUARDED)
    Path("latch.csv").write_text(FLOW.replace("b,       (b)/1, a", "b,       (b)/0, a"))
    result = run("check", "asked.toml")
    assert result.exit_code == 3
    assert "the guard of d reads `k`, which the flow table does not have" in " ".join(result.stdout.split())
