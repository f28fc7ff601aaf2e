"""Property files: what they mean, and that every problem is found at its place, all at once."""

from __future__ import annotations

import json
import os
import tomllib
from collections.abc import Callable
from importlib.resources import files
from pathlib import Path

import pytest
from jsonschema import Draft202012Validator

from settled.models.environment import Environment, Guard
from settled.models.logic import STABLE, TRUE, and_, excited, not_, or_, to_text, var
from settled.models.problems import InputError, Problem
from settled.models.property_files import circuit_table, environment_table, reader
from settled.models.property_files.property_table import OPTIONS
from settled.models.property_files.reader import read, read_circuit
from settled.models.property_files.toml_document import PROBLEM_LIMIT
from settled.models.property_files.toml_loading import SIZE_LIMIT
from settled.models.source import Span
from settled.models.specification import CircuitSource, Shape, Specification

KINDS = {
    "stable-states": Shape(optional={"at-least", "at-most"}),
    "settles": Shape(),
    "race-free": Shape(mode="fundamental"),
    "hazard-free": Shape(optional={"signals"}, mode="fundamental", watches=True),
    "speed-independent": Shape(optional={"except"}),
    "never": Shape(required={"expr"}, optional={"when"}),
    "leads-to": Shape(required={"from", "to"}),
    "initialises": Shape(required={"sequence"}),
    "equivalent": Shape(required={"to"}, optional={"outputs", "transients"}, mode="fundamental"),
}
SCHEMA = json.loads(files("settled.models.property_files").joinpath("property-file.schema.json").read_text())

WAKE = """\
title = "Wake latch of the river gauge"
[circuit]
inputs = ["wake", "sleep"]
outputs = ["on"]
[circuit.excitation]
q = "wake | q & ~sleep"
"q-n" = "~q"
[circuit.define]
on = "q & ~both"
both = 'q & \\q-n '
[environment]
changes = "burst"
assume = ["~(wake & sleep)"]
start = { wake = 0, on = 0 }
[environment.inputs]
wake = { rises = "~on" }
"""
NOR = """\
module latch(input set, reset, output q);
  wire q_n;
  core c(set, reset, q, q_n);
endmodule
module core(input s, r, output o, o_n);
  nor g1(o, r, o_n);
  nor g2(o_n, s, o);
endmodule
"""


def spec(text: str, path: str = "gauge.toml") -> Specification:
    return read(path, kinds=KINDS, text=text)


def problems(text: str, path: str = "gauge.toml") -> list[Problem]:
    with pytest.raises(InputError) as caught:
        spec(text, path)
    return list(caught.value.problems)


def marked(text: str, problem: Problem) -> str:
    """What the problem's span marks in `text`."""
    assert problem.span is not None
    line = text.split("\n")[problem.span.line - 1]
    return line[problem.span.column - 1 :][: problem.span.length]


def found(text: str) -> list[tuple[str, str]]:
    return [(problem.code, marked(text, problem)) for problem in problems(text)]


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "nor.v").write_text(NOR)
    (tmp_path / "wake.toml").write_text(WAKE)
    return tmp_path


# ---- what a file means -------------------------------------------------------------------------------------------


def test_equations() -> None:
    circuit = spec(WAKE).circuit
    netlist = circuit.netlist
    q, wake = var("q"), var("wake")
    assert (netlist.name, netlist.inputs, netlist.outputs) == ("gauge", ("wake", "sleep"), ("on",))
    assert [(gate.name, gate.function) for gate in netlist.gates] == [
        ("q", or_(wake, and_(q, not_(var("sleep"))))),
        ("q-n", not_(q)),
    ]
    assert dict(netlist.defined) == {"on": and_(q, not_(var("both"))), "both": and_(q, var("q-n"))}
    assert netlist.equations and netlist.gates[0].span == Span("gauge.toml", 6, 1)
    assert circuit == CircuitSource(netlist, "feedback", None, "any", (), (), Span("gauge.toml", 2, 1, 9))


def test_the_environment() -> None:
    wake, sleep, on = var("wake"), var("sleep"), var("on")
    guards = {"wake": Guard(rises=not_(on), falls=TRUE)}
    expected = Environment("fundamental", "burst", (not_(and_(wake, sleep)),), {"wake": 0, "on": 0}, guards)
    assert spec(WAKE).environment == expected
    assert spec(WAKE).spans == {"assume": Span("gauge.toml", 13, 10, 19), "start": Span("gauge.toml", 14, 9, 20)}
    assert spec('[circuit]\nexcitation = { q = "~q" }').environment == Environment()


def test_properties_with_their_options() -> None:
    text = """
        [[property]]
        check = "never"
        expr = "stable & excited(q)"
        when = "stable"
        [[property]]
        name = "few"
        check = "stable-states"
        at-most = 2
        [[property]]
        check = "initialises"
        sequence = [{ wake = 0, sleep = 1 }, { wake = 0, sleep = 0 }]
        [[property]]
        check = "hazard-free"
        signals = ["on", "q-n"]"""
    never, few, initialises, hazard_free = spec(WAKE + text).properties
    assert never.options == {"expr": and_(STABLE, excited("q")), "when": "stable"}
    assert never.span == Span("gauge.toml", 19, 17, 7) and never.spans["expr"] == Span("gauge.toml", 20, 16, 21)
    assert (few.name, few.options) == ("few", {"at-most": 2})
    assert initialises.options["sequence"] == ({"wake": 0, "sleep": 1}, {"wake": 0, "sleep": 0})
    assert hazard_free.options["signals"] == ("on", "q-n")


def test_properties_without_a_name_are_called_by_their_check() -> None:
    names = ["", "", 'name = "settles 3"', "", 'name = "x"']
    text = WAKE + "".join(f'[[property]]\ncheck = "settles"\n{name}\n' for name in names)
    assert [prop.name for prop in spec(text).properties] == ["settles", "settles 2", "settles 3", "settles 4", "x"]


def test_a_netlist_file(folder: Path) -> None:
    text = '[circuit]\nfile = "nor.v"\ndelay = "wire"\nisochronic = ["c.s", "q"]\nclosed = ["core"]\nwinners = "one"'
    circuit = spec(text).circuit
    assert (circuit.netlist.name, circuit.netlist.inputs) == ("latch", ("set", "reset"))
    assert (circuit.delay, circuit.winners, circuit.closed) == ("wire", "one", ("core",))
    assert circuit.isochronic == ("set", "q"), "other names of a net stand for the net"
    assert not circuit.netlist.equations


def test_default_delays_and_feedback(folder: Path) -> None:
    assert spec('[circuit]\nfile = "nor.v"').circuit.delay == "gate"
    for line, lines in [("", "auto"), ('feedback = "auto"', "auto"), ('feedback = ["c.o"]', ("q",))]:
        circuit = spec(f'[circuit]\nfile = "nor.v"\ndelay = "feedback"\n{line}').circuit
        assert circuit.feedback == lines


def test_excited_takes_any_name_of_a_node(folder: Path) -> None:
    text = '[circuit]\nfile = "nor.v"\n[[property]]\ncheck = "never"\nexpr = "excited(c.o) & c.o"'
    (prop,) = spec(text).properties
    assert to_text(prop.options["expr"]) == "excited(q) & c.o"


def test_a_circuit_to_compare_with(folder: Path) -> None:
    text = WAKE + '[[property]]\ncheck = "equivalent"\nto = '
    other = spec(text + '{ file = "nor.v" }').properties[0].options["to"]
    assert other.netlist.name == "latch" and other.delay == "gate"
    other = spec(text + '{ inputs = ["wake", "sleep"], excitation = { on = "wake | on & ~sleep" } }').properties[0]
    assert [gate.name for gate in other.options["to"].netlist.gates] == ["on"]
    assert spec(text + '{ file = "wake.toml" }').properties[0].options["to"].netlist.outputs == ("on",)


def test_paths_are_relative_to_the_file(folder: Path) -> None:
    (folder / "sub").mkdir()
    (folder / "sub" / "one.toml").write_text('[circuit]\nfile = "../nor.v"')
    assert read("sub/one.toml", kinds=KINDS).circuit.netlist.name == "latch"
    (folder / "two.toml").write_text('[circuit]\nfile = "sub/one.toml"')
    assert read_circuit("two.toml").netlist.name == "latch"


def test_a_bare_circuit(folder: Path) -> None:
    assert read_circuit("nor.v").delay == "gate"
    assert read_circuit("wake.toml").delay == "feedback"


def test_a_byte_order_mark_and_carriage_returns_change_nothing(folder: Path) -> None:
    (folder / "dos.toml").write_bytes(b"\xef\xbb\xbf" + WAKE.replace("\n", "\r\n").encode())
    assert read("dos.toml", kinds=KINDS).environment == spec(WAKE).environment


# ---- problems at their places ------------------------------------------------------------------------------------


def test_all_problems_of_a_file_come_at_once_in_its_order() -> None:
    text = """\
titel = "x"
[circuit]
inputs = ["a", "b", "a"]
outputs = ["zz", "q"]
delay = "wiring"
feedback = ["q"]
[circuit.excitation]
q = "a & qq | ~(b & r"
a = "q & r2"
r = 'q &'
[environment]
mode = "fundamental"
assume = ["~(a & q)"]
start = { a = 2, nix = 0 }
[environment.inputs]
q = { rises = "a" }
b = { rise = "a", must = true }
[[property]]
check = "nevr"
expr = "q & excited(b)"
[[property]]
check = "race-free"
expr = "q"
[[property]]
check = "never"
"""
    assert found(text) == [
        ("unknown-key", "titel"),
        ("duplicate-name", '"a"'),
        ("unknown-name", '"zz"'),
        ("bad-value", '"wiring"'),
        ("conflict", "feedback"),
        ("expression-syntax", '"'),
        ("duplicate-name", "a"),
        ("unknown-name", "r2"),
        ("expression-syntax", "'"),
        ("not-an-input", "q"),
        ("bad-value", "2"),
        ("unknown-name", "nix"),
        ("unknown-name", "q"),
        ("unknown-key", "rise"),
        ("conflict", "must"),
        ("unknown-check", '"nevr"'),
        ("not-a-node", "b"),
        ("unknown-key", "expr"),
        ("missing-key", '"never"'),
    ]


CIRCUIT = '[circuit]\ninputs = ["a", "b"]\noutputs = ["q"]\nexcitation.q = "a & b | q"\n'


@pytest.mark.parametrize(
    ("text", "code", "spot"),
    [
        ('title = 1\n[circuit]\nexcitation.q = "q"', "wrong-type", "1"),
        ('title = "x"', "missing-key", "t"),
        ("circuit = 3", "wrong-type", "3"),
        ("[circuit]\ninputs = []", "missing-key", "[circuit]"),
        ("[circuit]\nexcitation = {}", "bad-value", "{}"),
        ('[circuit]\nexcitation = { q = "~q" }\ntop = "x"', "conflict", "top"),
        ('[circuit]\nexcitation = { q = "~q" }\ndelay = "gate"\ncells = { c = ["q"] }', "conflict", "cells"),
        ('[circuit]\nexcitation = { q = "~q" }\nclosed = ["q"]\ndelay = "wire"', "conflict", "closed"),
        ('[circuit]\nexcitation = { stable = "1" }', "reserved-name", "stable"),
        ("[circuit]\nexcitation = { '\\q ' = \"1\" }", "bad-name", "'\\q '"),
        ('[circuit]\nexcitation = { q = "q" }\ndefine = { q = "0" }', "duplicate-name", "q"),
        ("[circuit]\nexcitation = { q = 1 }", "wrong-type", "1"),
        ('[circuit]\nexcitation = { q = "stable" }', "expression-syntax", "stable"),
        (CIRCUIT + 'delay = "wire"\ncells = { c = ["q"], d = ["q"] }', "duplicate-name", '["q"]'),
        (CIRCUIT + 'delay = "wire"\ncells = { c = ["a"] }', "unknown-name", '"a"'),
        (CIRCUIT + "environment = 1", "unknown-key", "environment"),
        (CIRCUIT + '[environment]\nmode = "input-output"\nchanges = "single"', "conflict", "changes"),
        (CIRCUIT + "[environment]\nstart = { a = true }", "wrong-type", "true"),
        (CIRCUIT + '[environment]\nassume = ["a", "c"]', "unknown-name", "c"),
        (CIRCUIT + '[environment.inputs]\na = { rises = "q2" }', "unknown-name", "q2"),
        (CIRCUIT + '[property]\ncheck = "settles"', "wrong-type", "[property]"),
        (CIRCUIT + '[[property]]\nname = "x"', "missing-key", "[[property]]"),
        (CIRCUIT + '[[property]]\ncheck = "stable-states"\nat-most = 0', "bad-value", "0"),
        (CIRCUIT + '[[property]]\ncheck = "stable-states"\nat-least = 3\nat-most = 2', "bad-value", "2"),
        (CIRCUIT + '[[property]]\ncheck = "stable-states"\nat-least = -1', "bad-value", "-1"),
        (CIRCUIT + '[[property]]\ncheck = "stable-states"\nat-least = true', "wrong-type", "true"),
        (CIRCUIT + f'[[property]]\ncheck = "stable-states"\nat-least = 0x{"f" * 300}', "bad-value", f"0x{'f' * 300}"),
        (CIRCUIT + '[[property]]\ncheck = "never"\nexpr = "a"\nwhen = "later"', "bad-value", '"later"'),
        (CIRCUIT + '[[property]]\ncheck = "hazard-free"\nsignals = []', "nothing-to-watch", "[]"),
        (CIRCUIT + '[[property]]\ncheck = "hazard-free"\nsignals = ["q", "q"]', "duplicate-name", '"q"'),
        (CIRCUIT + '[[property]]\ncheck = "speed-independent"\nexcept = ["a"]', "unknown-name", '"a"'),
        (
            CIRCUIT + '[[property]]\ncheck = "leads-to"\nfrom = "a"\nto = { file = "x.v" }',
            "wrong-type",
            '{ file = "x.v" }',
        ),
        (CIRCUIT + '[[property]]\ncheck = "initialises"\nsequence = []', "bad-value", "[]"),
        (CIRCUIT + '[[property]]\ncheck = "initialises"\nsequence = [{ a = 1 }]', "missing-key", "{ a = 1 }"),
        (CIRCUIT + '[[property]]\ncheck = "equivalent"\nto = { file = "nix.v" }', "file-not-found", '"nix.v"'),
        (CIRCUIT + '[[property]]\ncheck = "equivalent"\nto = 1', "wrong-type", "1"),
    ],
)
def test_one_problem_and_its_place(text: str, code: str, spot: str) -> None:
    assert found(text) == [(code, spot)]


def test_properties_of_fundamental_mode_are_refused_in_input_output_mode() -> None:
    text = (
        CIRCUIT
        + '[environment]\nmode = "input-output"\n[[property]]\ncheck = "race-free"\n[[property]]\ncheck = "settles"'
    )
    (problem,) = problems(text)
    assert problem.message == "`race-free` is a property of fundamental mode; this environment is in input-output mode"
    assert marked(text, problem) == '"race-free"'


def test_nothing_to_watch_without_outputs() -> None:
    text = '[circuit]\nexcitation.q = "~q"\n[[property]]\ncheck = "hazard-free"'
    assert found(text) == [("nothing-to-watch", '"hazard-free"')]
    spec(text + '\nsignals = ["q"]')


def test_a_vector_that_the_assumptions_forbid() -> None:
    text = WAKE + '[[property]]\ncheck = "initialises"\nsequence = [{ wake = 0, sleep = 0 }, { wake = 1, sleep = 1 }]'
    assert found(text) == [("violates-assume", "{ wake = 1, sleep = 1 }")]


def test_every_cycle_of_definitions_is_named() -> None:
    text = (
        '[circuit]\nexcitation.n = "~n"\n[circuit.define]\n'
        'a = "n | b"\nb = "~c"\nc = "a & n"\nd = "a"\ne = "e"\nf = "n"'
    )
    first, second = problems(text)
    assert first.message == "definitions form a cycle: `a` reads `b` reads `c` reads `a`"
    assert second.message == "definitions form a cycle: `e` reads `e`"
    assert [marked(text, problem) for problem in (first, second)] == ["a", "e"]


def test_the_nearest_name_or_all_names_are_given() -> None:
    def cure(name: str) -> str:
        return problems(CIRCUIT.replace("| q", f"| {name}"))[0].help

    assert cure("qq") == "did you mean `q`?"
    assert cure("reset") == "the known names are `q`, `a` and `b`"


def test_a_first_place_is_pointed_to() -> None:
    text = CIRCUIT + 2 * '[[property]]\nname = "x"\ncheck = "settles"\n'
    (problem,) = problems(text)
    assert problem.notes == ("the first one stands at line 6, column 8",) and problem.span == Span(
        "gauge.toml", 9, 8, 3
    )


@pytest.mark.parametrize(
    ("string", "spot"),
    [
        ('"a & nix | b"', "nix"),
        ("'a & nix | b'", "nix"),
        ('"\\u0061\\t& \\U0000006eix"', "\\U0000006eix"),
        ('"""\n   a &\n      nix\n"""', "nix"),
        ('"""a & \\\n      nix"""', "nix"),
        ("'''\na & \\n+x | q'''", "\\n+x"),
        ('"a & \\\\nix+ "', "\\\\nix+"),
    ],
)
def test_places_inside_strings_survive_escapes_and_line_ends(string: str, spot: str) -> None:
    text = CIRCUIT + f'[[property]]\ncheck = "never"\nexpr = {string}'
    assert marked(text, problems(text)[0]) == spot


@pytest.mark.parametrize("escape", ["b", "t", "n", "f", "r"])
def test_a_backslash_that_toml_has_swallowed_is_pointed_out(escape: str) -> None:
    text = CIRCUIT + f'[[property]]\ncheck = "never"\nexpr = "a & \\{escape}us+1 "'
    (problem,) = problems(text)
    assert (
        problem.help == f"`\\{escape}` in double quotes is a control character; write the expression in single quotes"
    )


def test_names_are_not_checked_against_a_circuit_that_cannot_be_read() -> None:
    text = '[circuit]\ninputs = 3\nexcitation.q = "x & (y"\n[environment]\nassume = ["z"]\nstart = { nix = 7 }'
    assert found(text) == [("wrong-type", "3"), ("expression-syntax", '"'), ("bad-value", "7")]


def test_there_are_not_more_problems_than_one_can_read() -> None:
    text = "[circuit]\n" + "".join(f'excitation.q{i} = "nix{i}"\n' for i in range(10_000))
    listed = problems(text)
    assert len(listed) == PROBLEM_LIMIT + 1 and listed[-1].code == "too-many-problems"


# ---- netlist files -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("lines", "expected"),
    [
        ('excitation.q = "~q"\noutputs = []', [("conflict", "excitation"), ("conflict", "outputs")]),
        ('feedback = ["q"]', [("conflict", "feedback")]),
        ('isochronic = ["q"]\nclosed = ["core"]', [("conflict", "isochronic"), ("conflict", "closed")]),
        ('delay = "wire"\nisochronic = ["nix"]', [("unknown-name", '"nix"')]),
        ('delay = "wire"\nclosed = ["core", "cor"]', [("unknown-name", '"cor"')]),
        ('delay = "feedback"\nfeedback = ["set"]', [("unknown-name", '"set"')]),
        ('delay = "feedback"\nfeedback = "q"', [("wrong-type", '"q"')]),
        (
            'library = ["nix.lib", "."]\nwinners = 1',
            [("file-not-found", '"nix.lib"'), ("unreadable", '"."'), ("wrong-type", "1")],
        ),
    ],
)
def test_problems_of_a_circuit_from_a_file(folder: Path, lines: str, expected: list[tuple[str, str]]) -> None:
    assert found(f'[circuit]\nfile = "nor.v"\n{lines}') == expected


def test_feedback_lines_must_cut_every_loop(folder: Path) -> None:
    ring = "nand g1(x, x, a);\n nand g2(y, y, x);\n endmodule"
    (folder / "two.v").write_text(f"module two(input a, output x, y);\n {ring}")
    text = '[circuit]\nfile = "two.v"\ndelay = "feedback"\nfeedback = ["x"]'
    (problem,) = problems(text)
    assert problem.message == "a loop without a feedback line remains: `y` reads `y`"
    assert (problem.code, marked(text, problem)) == ("uncut-loop", '["x"]')
    assert spec(text.replace('["x"]', '["y", "x"]')).circuit.feedback == ("y", "x")


def test_problems_of_another_file_follow_with_their_own_places(folder: Path) -> None:
    (folder / "bad.v").write_text("module bad(input a, output q);\n  initial q = 0;\nendmodule\n")
    (folder / "bad.toml").write_text('[circuit]\nexcitation.q = "nix"')
    text = '[[property]]\ncheck = "equivalent"\nto = { file = "bad.toml" }\n[circuit]\nfile = "bad.v"\ntypo = 1'
    spans = [problem.span for problem in problems(text)]
    assert spans[0] == Span("gauge.toml", 6, 1, 4)
    assert spans[1] == Span("bad.toml", 2, 17, 3)
    assert spans[2] is not None and (spans[2].file, spans[2].line) == ("bad.v", 2)


def test_another_property_file_says_all_about_its_circuit(folder: Path) -> None:
    text = '[circuit]\nfile = "wake.toml"\ndelay = "wire"'
    assert found(text) == [("conflict", "delay")]


def test_files_in_a_circle(folder: Path) -> None:
    (folder / "a.toml").write_text('[circuit]\nfile = "b.toml"')
    (folder / "b.toml").write_text('[circuit]\nfile = "./a.toml"')
    with pytest.raises(InputError) as caught:
        read("a.toml", kinds=KINDS)
    assert [problem.code for problem in caught.value.problems] == ["circular-file"]


def test_a_file_may_compare_its_circuit_with_itself(folder: Path) -> None:
    text = WAKE + '[[property]]\ncheck = "equivalent"\nto = { file = "wake.toml" }'
    (folder / "wake.toml").write_text(text)
    assert read("wake.toml", kinds=KINDS).properties[0].options["to"].netlist.outputs == ("on",)


@pytest.mark.parametrize("name", ["circuit.vhd", "circuit"])
def test_files_of_no_known_kind(folder: Path, name: str) -> None:
    (folder / name).write_text("")
    (problem,) = problems(f'[circuit]\nfile = "{name}"')
    assert problem.code == "unknown-suffix" and "`.sv`, `.v` and `.toml`" in problem.help.replace(
        "`.v`, `.sv`", "`.sv`, `.v`"
    )


# ---- what is no TOML, no text, no file ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "code", "line", "column"),
    [
        ("", "empty-file", 1, 1),
        ("\n \n", "empty-file", 1, 1),
        ('a = "x', "toml-syntax", 1, 7),
        ("a = [1,\n 2", "toml-syntax", 2, 3),
        ('a = """x\ny', "toml-syntax", 2, 2),
        ("[circuit]\ndelay = gate", "toml-syntax", 2, 9),
        ("a = 1 b", "toml-syntax", 1, 7),
        ("\nkey", "toml-syntax", 2, 4),
        ('a = "x\\q"', "toml-syntax", 1, 7),
        ("a = 1\nb = 2\na = 3", "duplicate-key", 3, 1),
        ("[circuit]\n[environment]\n[circuit]", "duplicate-key", 3, 2),
        (f"a = 1\nb = {'9' * 5000}", "bad-value", 2, 5),
        ("a = " + "[" * 20_000, "too-deep", 1, 37),
        ("a = " + "{a=" * 20_000, "too-deep", 1, 101),
        ("a" + ".a" * 100_000 + " = 1", "too-deep", 1, 65),
    ],
)
def test_what_is_no_toml(text: str, code: str, line: int, column: int) -> None:
    (problem,) = problems(text)
    assert problem.span is not None
    assert (problem.code, problem.span.line, problem.span.column) == (code, line, column)


def test_unquoted_words_and_lone_backslashes_are_explained() -> None:
    (problem,) = problems("[circuit]\ndelay = gate")
    assert problem.message == "expected a value after `=`, found `gate`"
    assert problem.help == 'text stands in quotes: `"gate"`'
    (problem,) = problems('expr = "\\data+ "')
    assert "in single quotes it stands for itself" in problem.help


@pytest.mark.parametrize(
    ("raw", "code", "line", "column"),
    [
        (b'title = "\xe9"', "not-text", 1, 10),
        ("title = 'é'\n# \0".encode(), "not-text", 2, 3),
        (b"\xff\xfet\0", "not-text", 1, 1),
        (b"#" * (SIZE_LIMIT + 1), "too-large", 1, 1),
        (b"", "empty-file", 1, 1),
    ],
)
def test_what_is_no_text(folder: Path, raw: bytes, code: str, line: int, column: int) -> None:
    (folder / "raw.toml").write_bytes(raw)
    with pytest.raises(InputError) as caught:
        read("raw.toml", kinds=KINDS)
    (problem,) = caught.value.problems
    assert (problem.code, problem.span) == (code, Span("raw.toml", line, column))


@pytest.mark.parametrize("reader", [lambda path: read(path, kinds=KINDS), read_circuit])
def test_what_is_no_file(folder: Path, reader: Callable[[str], object]) -> None:
    (folder / "loop.v").symlink_to(folder / "loop.v")
    for path in (".", "wak.toml", "nor.w", "loop.v", "a\0b.toml", "x" * 300 + ".v", "nix/nor.v"):
        with pytest.raises(InputError) as caught:
            reader(path)
        (problem,) = caught.value.problems
        assert problem.code in ("file-not-found", "unreadable") and problem.span == Span(path, 1, 1)
    assert problem.help == "there is no directory `nix`"


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read every file")
def test_a_file_that_may_not_be_read(folder: Path) -> None:
    (folder / "wake.toml").chmod(0)
    with pytest.raises(InputError, match="permission denied"):
        read("wake.toml", kinds=KINDS)


# ---- the schema --------------------------------------------------------------------------------------------------


def valid(text: str) -> bool:
    document = json.loads(json.dumps(tomllib.loads(text), default=str))
    return bool(Draft202012Validator(SCHEMA).is_valid(document))


def test_the_schema_knows_the_same_keys() -> None:
    Draft202012Validator.check_schema(SCHEMA)
    defs = SCHEMA["$defs"]
    assert set(SCHEMA["properties"]) == set(reader.KEYS)
    assert set(defs["circuit"]["properties"]) == set(circuit_table.KEYS)
    assert set(defs["environment"]["properties"]) == set(environment_table.KEYS)
    assert set(defs["guard"]["properties"]) == set(environment_table.GUARD_KEYS)
    options = {option.partition(" of ")[0] for option in OPTIONS}
    assert set(defs["property"]["properties"]) == {"name", "check", *options}


@pytest.mark.parametrize(
    "text",
    [
        WAKE,
        CIRCUIT + '[[property]]\ncheck = "leads-to"\nfrom = "a"\nto = "q"',
        CIRCUIT + '[[property]]\ncheck = "equivalent"\nto = { excitation = { q = "0" } }\ntransients = true',
        CIRCUIT + '[environment]\nmode = "input-output"\ninputs.a = { must = true }',
        '[circuit]\ndelay = "wire"\nisochronic = ["q"]\nexcitation = { q = "q" }\ncells = { c = ["q"] }',
    ],
)
def test_the_schema_admits_what_is_read(text: str) -> None:
    spec(text)
    assert valid(text)


@pytest.mark.parametrize(
    "text",
    [
        "title = 1\n" + CIRCUIT,
        'title = "x"',
        '[circuit]\nfile = "x.v"\nexcitation = { q = "q" }',
        '[circuit]\nfile = "x.v"\nfeedback = ["q"]',
        '[circuit]\nfile = "x.toml"\ndelay = "gate"',
        CIRCUIT + "typo = 1",
        CIRCUIT + 'feedback = ["q"]',
        CIRCUIT + 'top = "x"',
        CIRCUIT + 'isochronic = ["a"]',
        CIRCUIT + 'cells = { c = ["q"] }',
        CIRCUIT + 'delay = "wires"',
        CIRCUIT + 'define = { stable = "1" }',
        CIRCUIT + 'define = { "a b" = "1" }',
        CIRCUIT + "[environment]\nstart = { a = 2 }",
        CIRCUIT + '[environment]\nmode = "input-output"\nchanges = "burst"',
        CIRCUIT + "[environment]\ninputs.a = { must = true }",
        CIRCUIT + '[environment]\nassume = "a"',
        CIRCUIT + '[property]\ncheck = "settles"',
        CIRCUIT + '[[property]]\nname = "x"',
        CIRCUIT + '[[property]]\ncheck = "leads-to"\nfrom = "a"\nto = { file = "x.v" }',
        CIRCUIT + '[[property]]\ncheck = "equivalent"\nto = "a"',
        CIRCUIT + '[[property]]\ncheck = "hazard-free"\nsignals = ["q", "q"]',
        CIRCUIT + '[[property]]\ncheck = "stable-states"\nat-most = -1',
        CIRCUIT + '[[property]]\ncheck = "initialises"\nsequence = []',
    ],
)
def test_the_schema_refuses_what_is_refused(text: str) -> None:
    assert problems(text) and not valid(text)


def test_the_gallery_is_read_and_admitted() -> None:
    gallery = [Path(str(path)) for path in files("settled.models.gallery").iterdir() if path.name.endswith(".toml")]
    assert len(gallery) >= 6
    for path in gallery:
        assert read_circuit(str(path)).netlist.gates and valid(path.read_text()), path
