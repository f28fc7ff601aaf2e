"""Liberty text, the expressions in it, and what its cells become in a netlist."""

from __future__ import annotations

from pathlib import Path

import pytest

from settled.models.logic import to_text
from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem
from settled.models.readers import verilog
from settled.models.readers.liberty import cells_of, read_cells
from settled.models.readers.liberty_functions import Words, parse
from settled.models.source import Span


def problems(text: str) -> list[str]:
    with pytest.raises(InputError) as caught:
        cells_of(text, "cells.lib")
    return lines(list(caught.value.problems))


def lines(found: list[Problem]) -> list[str]:
    return [f"{p.span.line}:{p.span.column} {p.code}: {p.message}" for p in found if p.span is not None]


def library(*cells: str) -> str:
    return "library (gauge) {\n" + "\n".join(cells) + "\n}\n"


def cell(name: str, inputs: str, outputs: dict[str, str], rest: str = "") -> str:
    pins = [f"pin ({pin}) {{ direction : input; }}" for pin in inputs.split()]
    pins += [f'pin ({pin}) {{ direction : output; function : "{f}"; }}' for pin, f in outputs.items()]
    return f"cell ({name}) {{ {rest} {' '.join(pins)} }}"


def functions(netlist: Netlist) -> dict[str, str]:
    return {gate.name: to_text(gate.function) for gate in netlist.gates}


# ---- expressions -----------------------------------------------------------------------------------------------

# Liberty reference manual, attribute `function` (recalled): inversion first, then XOR, then AND, then OR.
EXPRESSIONS = {
    "A": "A",
    "A'": "~A",
    "!A": "~A",
    "!A'": "A",
    "A''": "A",
    "(A B)'": "~(A & B)",
    "A B C": "A & B & C",
    "A*B&C": "A & B & C",
    "A + B | C": "A | B | C",
    "A B + C": "A & B | C",
    "A + B C": "A | B & C",
    "A B'": "A & ~B",
    "A !B": "A & ~B",
    "A(B+C)": "A & (B | C)",
    "(A+B)(B+C)": "(A | B) & (B | C)",
    "A ^ B C": "(A ^ B) & C",
    "A ^ !B + C": "A ^ ~B | C",
    "A*1 + 0": "A",
    '\\"A\\" B': "A & B",
    " ( A ) ": "A",
}


def read_expression(text: str) -> str:
    return to_text(parse(Words(text, Span("cells.lib", 1, 1)), ["A", "B", "C"]))


@pytest.mark.parametrize("text", EXPRESSIONS)
def test_expressions(text: str) -> None:
    assert read_expression(text) == EXPRESSIONS[text]


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "unexpected its end at character 1"),
        ("A +", "unexpected its end at character 4"),
        ("A + * B", "unexpected `*` at character 5"),
        ("(A", "unexpected its end at character 3"),
        ("A)", "unexpected `)` at character 2"),
        ("A @ B", "unexpected `@` at character 2"),
        ("'A", "unexpected `'` at character 1"),
        ("()", "unexpected `)` at character 2"),
        ("A 2", "unexpected `2` at character 2"),
    ],
)
def test_expressions_that_cannot_be_read(text: str, message: str) -> None:
    with pytest.raises(InputError) as caught:
        read_expression(text)
    (problem,) = caught.value.problems
    assert problem.code == "expression-syntax"
    assert problem.message == f"the expression `{text}` cannot be read: {message}"


def test_unknown_names_in_expressions() -> None:
    with pytest.raises(InputError) as caught:
        parse(Words("A1 * RSTN", Span("cells.lib", 1, 1)), ["A1", "RST_N"])
    (problem,) = caught.value.problems
    assert (problem.code, problem.help) == ("unknown-name", "did you mean `RST_N`?")


def test_deep_expressions() -> None:
    assert read_expression("(" * 20_000 + "A" + ")" * 20_000) == "A"
    assert read_expression("!" * 20_001 + "A") == "~A"


# ---- the text of a library -------------------------------------------------------------------------------------

TEXT = """/* cells of the gauge */
library ("gauge") {
  delay_model : table_lookup ;
  capacitive_load_unit (1, pf);
  nom_voltage : 1.0 * VDD + 0.5;
  lu_table_template (t) { index_1 ("0.1, \\
     0.2"); }
  cell (AOI21) { // and-or-invert
    area : 1.5;
    pin (A) { direction : input; capacitance : 0.01; }
    pin (B, C) { direction : "input"; }
    pin ("Y") { direction : output; function : "!(A*B + C)";
      timing () { related_pin : "A B"; cell_rise (t) { values ("0.1, 0.2", \\
        "0.3, 0.4"); } } };
  }
  cell (odd+name) { pin (A) { direction : input } }
}
"""


def test_cells_pins_and_places() -> None:
    cells = cells_of(TEXT.replace("input }", "input; }"), "cells.lib")
    assert list(cells) == ["AOI21", "odd+name"]
    aoi = cells["AOI21"]
    assert aoi.span == Span("cells.lib", 8, 3, 4)
    assert [(pin.name, pin.direction) for pin in aoi.pins] == [
        ("A", "input"),
        ("B", "input"),
        ("C", "input"),
        ("Y", "output"),
    ]
    function = aoi.pins[3].function
    assert function is not None
    assert (function.text, function.span) == ("!(A*B + C)", Span("cells.lib", 12, 48, 12))


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (TEXT, "16:49 syntax: expected `;` after the value, found `}`"),
        ("library (l) { area : ; }", "1:22 syntax: expected a value after `:`, found `;`"),
        ("library (l) { area 3; }", "1:20 syntax: expected `:` or `(` after `area`, found `3`"),
        (
            "library (l) { cell (A) {",
            "1:25 syntax: expected `}` that closes group `cell` of line 1, found the end of the file",
        ),
        ("library (l) { } }", "1:17 syntax: expected nothing after the library, found `}`"),
        ('library (l) { a : "b; }', '1:19 syntax: expected a value after `:`, found `"`'),
        ("library (l) { a (b; }", "1:19 syntax: expected `)` after the arguments, found `;`"),
        ("library (l) { cell () { } }", "1:15 syntax: group `cell` has no readable name"),
        ("library (l) { { } }", "1:15 syntax: expected an attribute or a group, found `{`"),
        ("", "1:1 syntax: `cells.lib` holds no `library` group"),
        ("module gauge; endmodule", "1:8 syntax: expected `:` or `(` after `module`, found `gauge`"),
        ("library (l) { include_file (x); }", "1:15 include: `include_file` is not accepted"),
        ("}", "1:1 syntax: expected an attribute or a group, found `}`"),
    ],
)
def test_text_that_cannot_be_read(text: str, expected: str) -> None:
    assert problems(text) == [expected]


def test_deep_groups_and_long_nonsense() -> None:
    assert problems("library (l) { " + "a () { " * 20_000)[0].endswith("found the end of the file")
    assert cells_of("library (l) { " + "a () { " * 20_000 + "}" * 20_001, "cells.lib") == {}
    for unit in ("(", "a ", '"', "/*", "\\", "a:b;", "é"):
        assert len(problems(unit * 100_000)) == 1


def test_two_definitions_of_a_cell() -> None:
    one, two = cell("INV", "A", {"Y": "!A"}), cell("INV", "A", {"Y": "A"})
    assert list(cells_of(library(one, one), "cells.lib")) == ["INV"]
    assert problems(library(one, two)) == ["3:1 duplicate-name: cell `INV` has two different definitions"]


def test_several_library_files(tmp_path: Path) -> None:
    (tmp_path / "one.lib").write_text(library(cell("INV", "A", {"Y": "!A"})))
    (tmp_path / "two.lib").write_text(library(cell("BUF", "A", {"Y": "A"}), cell("INV", "A", {"Y": "A'"})))
    netlist = tmp_path / "gauge.v"
    netlist.write_text("module gauge(input a, output y); wire n; INV u1(.A(a), .Y(n)); BUF u2(.A(n), .Y(y)); endmodule")
    one, two = str(tmp_path / "one.lib"), str(tmp_path / "two.lib")
    assert list(read_cells(two)) == ["BUF", "INV"]
    with pytest.raises(InputError) as caught:
        verilog.read(str(netlist), library=[one, two])
    assert [p.message for p in caught.value.problems] == ["cell `INV` is defined differently in two libraries"]
    with pytest.raises(InputError) as caught:
        verilog.read(str(netlist), library=[one, str(tmp_path / "none.lib")])
    assert [p.code for p in caught.value.problems] == ["file-not-found"]
    (tmp_path / "two.lib").write_text(library(cell("BUF", "A", {"Y": "A"})))
    assert functions(verilog.read(str(netlist), library=[one, two])) == {"n": "~a", "y": "n"}
