"""Flow tables: the notation, everything that can be wrong with a text, and Unger's rule."""

from __future__ import annotations

from pathlib import Path

import pytest

from settled.models.flow_table import Entry, FlowTable
from settled.models.problems import InputError, Problem
from settled.models.readers.flow_table import parse, read
from settled.models.source import span_at

LATCH = """# a latch that follows d while g is 1
d g / q, 00,    01,    11,    10
a,       (a)/0, (a)/0, b,     (a)/0
b,       (b)/1, a,     (b)/1, (b)/1
"""


def table(text: str) -> FlowTable:
    return parse(text, "t", lambda start, end: span_at("t.csv", text, start, end))


def problems(text: str) -> tuple[Problem, ...]:
    with pytest.raises(InputError) as caught:
        table(text)
    return caught.value.problems


def test_rows_columns_entries_and_outputs_are_read() -> None:
    found = table(LATCH)
    assert (found.inputs, found.outputs, found.rows, found.notes) == (("d", "g"), ("q",), ("a", "b"), ())
    d, g = 1, 2
    assert found.entries["a", 0] == Entry("a", (0,)) and found.entries["a", d | g] == Entry("b", (None,))
    assert found.entries["b", g] == Entry("a", (None,)) and found.is_stable("b", d)


@pytest.mark.parametrize(
    "written, meant",
    [
        ("(a)/01", Entry("a", (0, 1))),
        ("(a/0-)", Entry("a", (0, None))),
        ("( a ) / 1 1", Entry("a", (1, 1))),
        ('"(a)/00"', Entry("a", (0, 0))),
        ("b", Entry("b", (None, None))),
        ("b/1-", Entry("b", (1, None))),
        ("-", Entry(None, (None, None))),
        ("-/-", Entry(None, (None, None))),
    ],
)
def test_ways_to_write_an_entry(written: str, meant: Entry) -> None:
    found = table(f"x / y z, 0, 1\na, {written}, b\nb, (b)/00, (b)/00\n")
    assert found.entries["a", 0] == meant


def test_marks_may_be_left_out_altogether() -> None:
    assert table("x / z, 0, 1\na, a/0, b\nb, a, b/1\n").is_stable("b", 1)


def test_names_in_the_escaped_form_of_verilog() -> None:
    assert table("\\a/b x / \\q/1 , 00, 01, 11, 10\na, (a)/0, (a)/0, (a)/0, (a)/0\n").inputs == ("a/b", "x")


def test_rows_that_are_not_reached_are_named() -> None:
    (note,) = table(LATCH + "c, a, a, b, (c)/0\n").notes
    assert note == "no input changes lead from row a, the first, to c"


@pytest.mark.parametrize(
    "broken, code, line, column",
    [
        (LATCH.replace("b,     (a)/0\nb", "(b)/1, (a)/0\nb"), "unstable-entry", 3, 24),
        (LATCH.replace("(b)/1, (b)/1", "b/1,   (b)/1"), "unmarked-entry", 4, 24),
        (LATCH.replace("b,     (a)/0\n", "c,     (a)/0\n"), "unknown-row", 3, 24),
        (LATCH.replace(",    10", "").replace(", (a)/0\nb", "\nb").replace(", (b)/1\n", "\n"), "missing-column", 2, 1),
        (LATCH.replace("b,     (a)/0\n", "b\n"), "missing-entry", 3, 1),
        (LATCH.replace("(a)/0, b", "(a)/00, b"), "bad-entry", 3, 17),
        (LATCH.replace("(a)/0, b", "(a/0, b"), "bad-entry", 3, 17),
        (LATCH.replace("  11", "  1x"), "bad-table", 2, 24),
        (LATCH.replace("  11", "  01"), "bad-table", 2, 24),
        (LATCH.replace("\nb,", "\na,"), "bad-table", 4, 1),
        (LATCH.replace("\nb,", "\nb(,"), "bad-table", 4, 1),
        (LATCH.replace("d g / q", "d d / q"), "bad-table", 2, 1),
        ("", "empty-table", None, None),
        ("x / z, 0, 1\n", "empty-table", 1, 1),
        (LATCH.replace("(a)/0, b", "b, b").replace("(b)/1, a", "(b)/1, a"), "endless-entry", 3, 1),
    ],
)
def test_what_is_wrong_is_said_at_its_place(broken: str, code: str, line: int | None, column: int | None) -> None:
    found = [p for p in problems(broken) if p.code == code]
    assert found, [p.message for p in problems(broken)]
    span = found[0].span
    assert (span and span.line, span and span.column) == (line, column)


def test_all_problems_of_a_text_come_at_once_in_its_order() -> None:
    found = problems(LATCH.replace("b,     (a)/0\n", "c,     (b)/0\n").replace("(b)/1, a", "(b)/1, a/01"))
    assert [p.code for p in found] == ["unknown-row", "unstable-entry", "bad-entry"]


def test_a_file_is_read_and_a_missing_one_is_named(tmp_path: Path) -> None:
    (tmp_path / "latch.csv").write_text(LATCH)
    assert read(tmp_path / "latch.csv").name == "latch"
    with pytest.raises(InputError, match="there is no file"):
        read(tmp_path / "lach.csv")


def test_a_change_that_meets_an_unspecified_entry_has_no_response() -> None:
    found = table("x y / z, 00, 01, 11, 10\na, (a)/0, -, b, (a)/0\nb, a, (b)/1, (b)/1, a\n")
    x, y = 1, 2
    assert found.respond("a", 0, [x | y]) == {"b"}
    assert found.respond("a", 0, [x, y]) == {"b"} and found.respond("a", 0, [y, x]) is None


def test_the_table_as_a_circuit_is_stable_where_the_table_is() -> None:
    from settled.models.states import excited

    found = table(LATCH)
    for row in found.rows:
        for vector in found.vectors:
            moving = excited(found.circuit, found.state(row, vector))
            assert (moving == 0) == found.is_stable(row, vector)
            assert moving.bit_count() in (0, 2)
