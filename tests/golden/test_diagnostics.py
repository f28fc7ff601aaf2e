"""Diagnostics as users see them: the whole text, and the cases in which a caret is easily off."""

from __future__ import annotations

import re

import pytest

from settled.models.problems import InputError, Problem
from settled.models.property_files.reader import read
from settled.models.source import Span
from settled.models.specification import Shape
from settled.verify.renderers.problems import WIDTH, as_json, render

KINDS = {"settles": Shape(), "never": Shape(required={"expr"}, optional={"when"})}

SLUICE = """\
title = "Sluice interlock of the river gauge"

[circuit]
inputs = ["up", "down"]
outputs = ["motor_up", "motor_dn"]
dealy = "gate"

[circuit.excitation]
motor_up = "up & ~motor_down"
motor_down = "down & (~motor_up"

[environment]
start = { up = 0, down = off }
"""

TOML_ERROR = """\
error[toml-syntax]: expected a value after `=`, found `off`
  --> sluice.toml:13:26
   |
13 | start = { up = 0, down = off }
   |                          ^ not TOML from here on
   = help: text stands in quotes: `"off"`"""

ALL_ERRORS = """\
error[unknown-name]: unknown signal `motor_dn`
 --> sluice.toml:5:24
  |
5 | outputs = ["motor_up", "motor_dn"]
  |                        ^^^^^^^^^^ not known
  = help: did you mean `motor_down`?

error[unknown-key]: unknown key `dealy` in a circuit
 --> sluice.toml:6:1
  |
6 | dealy = "gate"
  | ^^^^^ not a key here
  = help: did you mean `delay`?

error[expression-syntax]: expected `)` after `motor_up`, found the end of the expression
  --> sluice.toml:10:32
   |
10 | motor_down = "down & (~motor_up"
   |                                ^ expected `)` here
   = note: the `(` stands at line 10, column 22

error[bad-value]: the value of `down` must be 0 or 1
  --> sluice.toml:13:26
   |
13 | start = { up = 0, down = 10 }
   |                          ^^ neither 0 nor 1"""


def problems(text: str) -> tuple[Problem, ...]:
    with pytest.raises(InputError) as caught:
        read("sluice.toml", kinds=KINDS, text=text)
    return caught.value.problems


def shown(text: str, color: bool = False) -> str:
    return render(problems(text), color=color, sources=lambda file: text)


def excerpt(line: str, column: int, length: int, spot: str = "") -> tuple[str, str]:
    """The shown line and the line with the caret, both without the margin."""
    problem = Problem("code", "message", Span("f", 1, column, length), spot)
    _, _, _, source, caret = render([problem], color=False, sources=lambda file: line).split("\n")
    assert source.startswith("1 | ") and caret.startswith("  | ")
    return source[4:], caret[4:]


def test_an_error_of_toml_stands_alone() -> None:
    assert shown(SLUICE) == TOML_ERROR


def test_all_problems_of_a_file() -> None:
    assert shown(SLUICE.replace("off", "10")) == ALL_ERRORS


def test_colour_adds_nothing_but_colour() -> None:
    colored = shown(SLUICE, color=True)
    assert "\x1b[" in colored
    assert re.sub(r"\x1b\[[0-9;]*m", "", colored) == TOML_ERROR


@pytest.mark.parametrize(
    ("line", "column", "length", "source", "caret"),
    [
        ("\tq = x", 6, 1, "    q = x", "        ^"),
        ("é = x", 5, 1, "é = x", "    ^"),
        ("e\u0301 = x", 6, 1, "e\u0301 = x", "    ^"),
        ("河川 = x", 6, 1, "河川 = x", "       ^"),
        ("a河川b", 2, 2, "a河川b", " ^^^^"),
        ("a\x1bb = x", 7, 1, r"a\u{1b}b = x", "           ^"),
        ("a\u202eb", 3, 1, r"a\u{202e}b", "         ^"),
        ("q =", 4, 1, "q =", "   ^"),
        ("q = x\r", 5, 1, "q = x", "    ^"),
        ("", 1, 1, "", "^"),
        ("q = xyz", 5, 100, "q = xyz", "    ^^^"),
    ],
)
def test_the_caret_stands_below_its_spot(line: str, column: int, length: int, source: str, caret: str) -> None:
    problem = Problem("code", "message", Span("f", 2, column, length))
    text = render([problem], color=False, sources=lambda file: f"first\n{line}\nlast").split("\n")
    assert text[3:] == [f"2 | {source}".rstrip(), f"  | {caret}"]


@pytest.mark.parametrize("column", [1, 40, 1_000, 4_990, 5_000, 5_001])
def test_of_a_long_line_the_part_around_the_spot_is_shown(column: int) -> None:
    line = "".join(chr(97 + i % 26) for i in range(5_000))
    source, caret = excerpt(line, column, 3)
    assert len(source) <= WIDTH + 6
    width = len(caret.strip())
    assert source[caret.index("^") :][:width] == line[column - 1 :][:width]
    assert width == max(1, min(3, 5_001 - column))


def test_a_spot_longer_than_the_page_is_cut() -> None:
    source, caret = excerpt("a = " + "9" * 5_000, 5, 5_000, "too large")
    assert len(source) <= WIDTH + 6 and len(caret) <= WIDTH + len(" too large")


def test_messages_are_made_harmless_and_short() -> None:
    problem = Problem("code", "`\x1b[31m\n" + "x" * 5_000 + "` is bad", None, notes=("a\x07",), help="b\x9b")
    text = render([problem], color=False, sources=lambda file: None)
    assert text.startswith(r"error[code]: `\u{1b}[31m\u{a}xxx") and text.count("\n") == 2
    assert len(text) < 1_000 and "` is bad" in text


def test_without_the_source_the_place_is_given() -> None:
    problem = Problem("file-not-found", "there is no file `x`", Span("x", 1, 1), "named here", help="look")
    text = render([problem], color=False, sources=lambda file: None)
    assert text == "error[file-not-found]: there is no file `x`\n --> x:1:1\n  = help: look"


def test_a_place_behind_the_end_of_the_file() -> None:
    text = render([Problem("code", "message", Span("f", 9, 1))], color=False, sources=lambda file: "one line")
    assert text == "error[code]: message\n --> f:9:1"


def test_problems_for_programs() -> None:
    (first, second) = as_json([Problem("a", "m", Span("f", 2, 3, 4), "spot", ("note",), "help"), Problem("b", "n")])
    assert first == {"file": "f", "line": 2, "column": 3, "code": "a", "message": "m", "help": "help"}
    assert second == {"file": None, "line": None, "column": None, "code": "b", "message": "n", "help": None}
