"""What the cells of a Liberty library become in a netlist: gates, latches, flip-flops, or an error."""

from __future__ import annotations

from itertools import product

import pytest

from settled.models.logic import evaluate, to_text
from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem
from settled.models.readers import verilog
from settled.models.readers.liberty import cells_of
from settled.models.source import Span


def lines(found: list[Problem]) -> list[str]:
    return [f"{p.span.line}:{p.span.column} {p.code}: {p.message}" for p in found if p.span is not None]


def library(*cells: str) -> str:
    return "library (gauge) {\n" + "\n".join(cells) + "\n}\n"


def cell(name: str, inputs: str, outputs: dict[str, str], rest: str = "") -> str:
    pins = [f"pin ({pin}) {{ direction : input; }}" for pin in inputs.split()]
    pins += [f'pin ({pin}) {{ direction : output; function : "{f}"; }}' for pin, f in outputs.items()]
    return f"cell ({name}) {{ {rest} {' '.join(pins)} }}"


def instance(cells: str, text: str, ports: str = "input d, g, r, s, output q, n") -> Netlist:
    return verilog.read_text(
        f"module gauge({ports});\n{text}\nendmodule", "gauge.v", cells=cells_of(cells, "cells.lib")
    )


def functions(netlist: Netlist) -> dict[str, str]:
    return {gate.name: to_text(gate.function) for gate in netlist.gates}


# ---- combinational cells ---------------------------------------------------------------------------------------

ADDER = library(cell("HA", "A B", {"S": "A^B", "C": "A B"}), cell("odd[1]", "A!", {"Y": "0"}).replace('"0"', '"1"'))


def test_each_output_of_a_cell_is_a_gate() -> None:
    netlist = instance(ADDER, "HA u1 (.A(d), .B(g), .S(q), .C(n));")
    assert functions(netlist) == {"q": "d ^ g", "n": "d & g"}
    assert dict(netlist.groups) == {"HA": (("q", "n"),), "u1": (("q", "n"),)}
    assert dict(netlist.cells) == {}
    assert [gate.span for gate in netlist.gates] == [Span("gauge.v", 2, 4, 2)] * 2


def test_open_outputs_of_a_cell_are_left_out() -> None:
    netlist = instance(ADDER, "HA u1 (.A(d), .B(1'b1), .S(q), .C());", "input d, output q")
    assert functions(netlist) == {"q": "d ^ u1.B"}
    assert to_text(netlist.defined["u1.B"]) == "1"


def test_an_open_output_that_another_output_reads_stays() -> None:
    cells = library(cell("C2", "A", {"Y": "!A", "Z": "!Y"}))
    assert functions(instance(cells, "C2 u (.A(d), .Z(q));", "input d, output q")) == {"u.Y": "~d", "q": "~u.Y"}


def test_odd_names_of_cells_and_pins() -> None:
    netlist = instance(ADDER, "\\odd[1] \\u/1 (.\\A! (d), .Y(q));", "input d, output q")
    assert functions(netlist) == {"q": "1"}
    assert list(netlist.groups) == ["odd[1]", "u/1"]


def test_a_module_of_the_netlist_goes_before_a_cell() -> None:
    text = "module HA(input A, B, output S, C); nand (S, A, B); nor (C, A, B); endmodule\n"
    cells = cells_of(ADDER, "cells.lib")
    top = "module gauge(input d, g, output q, n); HA u1 (.A(d), .B(g), .S(q), .C(n)); endmodule"
    assert functions(verilog.read_text(text + top, "gauge.v", cells=cells)) == {"q": "~(d & g)", "n": "~(d | g)"}


# ---- storage ---------------------------------------------------------------------------------------------------


def latch(attributes: str, inputs: str = "D G") -> str:
    group = f"latch (IQ, IQN) {{ {attributes} }}"
    return library(cell("LATCH", inputs, {"Q": "IQ", "QN": "IQN"}, group))


def test_a_latch_is_one_gate_that_follows_or_holds() -> None:
    netlist = instance(latch('enable : "G"; data_in : "D";'), "LATCH u (.D(d), .G(g), .Q(q));", "input d, g, output q")
    assert functions(netlist) == {"q": "g ? d : q"}
    assert dict(netlist.cells) == {}
    assert netlist.notes == ("latch cell `LATCH` of `u`: node `q` follows while it is enabled and holds otherwise",)


def test_both_outputs_of_a_latch_are_one_closed_cell() -> None:
    netlist = instance(latch('enable : "G"; data_in : "D";'), "LATCH u (.D(d), .G(g), .Q(q), .QN(n));")
    assert functions(netlist) == {"q": "g ? d : q", "n": "~q"}
    assert dict(netlist.cells) == {"u": ("q", "n")}


def test_a_latch_with_only_its_complement_connected() -> None:
    netlist = instance(
        latch('enable : "!G"; data_in : "D";'), "LATCH u (.D(d), .G(g), .QN(n));", "input d, g, output n"
    )
    assert functions(netlist) == {"u.Q": "~g ? d : u.Q", "n": "~u.Q"}


def test_a_state_that_no_output_shows_has_a_name_of_its_own() -> None:
    group = 'latch (IQ, IQN) { enable : "G"; data_in : "D"; }'
    cells = library(cell("GATE", "D G", {"Y": "IQ G"}, group))
    netlist = instance(cells, "GATE u (.D(d), .G(g), .Y(q));", "input d, g, output q")
    assert functions(netlist) == {"u.IQ": "g ? d : u.IQ", "q": "u.IQ & g"}
    assert dict(netlist.cells) == {"u": ("u.IQ", "q")}


BOTH = 'enable : "G"; data_in : "D"; clear : "R"; preset : "S"; clear_preset_var1 : {}; clear_preset_var2 : {};'


def expected_latch(v: dict[str, int], var1: str, var2: str) -> tuple[int, int]:
    """Where a latch with clear and preset and its second output are heading, from its attributes.

    The second output follows the state, unless clear and preset together make the two equal.
    """
    if v["r"] and v["s"]:
        state = {"L": 0, "H": 1, "N": v["q"]}[var1]
        return state, {"L": 0, "H": 1}.get(var2, 1 - v["q"]) if var1 in ("N", var2) else 1 - v["q"]
    state = 0 if v["r"] else 1 if v["s"] else v["d"] if v["g"] else v["q"]
    return state, 1 - v["q"]


@pytest.mark.parametrize(("var1", "var2"), [("L", "H"), ("H", "L"), ("L", "L"), ("H", "H"), ("N", "N"), ("N", "H")])
def test_clear_and_preset_of_a_latch(var1: str, var2: str) -> None:
    cells = latch(BOTH.format(var1, var2), "D G R S")
    netlist = instance(cells, "LATCH u (.D(d), .G(g), .R(r), .S(s), .Q(q), .QN(n));")
    for vector in product((0, 1), repeat=5):
        v = dict(zip("dgrsq", vector, strict=True))
        assert tuple(evaluate([g.function for g in netlist.gates], v)) == expected_latch(v, var1, var2)


@pytest.mark.parametrize(
    ("attributes", "expected"),
    [
        ('clear : "!R"; preset : "!S"; clear_preset_var1 : H; clear_preset_var2 : H;', "~s | r & q"),
        ('enable : "G"; data_in : "D"; clear : "R";', "~r & (g ? d : q)"),
        ('enable : "G"; data_in : "D"; preset : "S";', "s | (g ? d : q)"),
    ],
)
def test_latches_of_other_kinds(attributes: str, expected: str) -> None:
    netlist = instance(latch(attributes, "D G R S"), "LATCH u (.D(d), .G(g), .R(r), .S(s), .Q(q), .QN(n));")
    assert functions(netlist)["q"].replace("~~", "") == expected


def flip_flop(attributes: str, inputs: str = "D CK") -> str:
    return library(cell("DFF", inputs, {"Q": "IQ", "QN": "IQN"}, f'ff ("IQ, IQN") {{ {attributes} }}'))


def test_a_flip_flop_is_a_master_and_a_slave_in_one_closed_cell() -> None:
    cells = flip_flop('next_state : "D"; clocked_on : "CK";')
    netlist = instance(cells, "DFF u3 (.D(d), .CK(g), .Q(q), .QN(n));", "input d, g, output q, n")
    assert functions(netlist) == {"u3.master": "g ? u3.master : d", "q": "g ? u3.master : q", "n": "~q"}
    assert dict(netlist.cells) == {"u3": ("u3.master", "q", "n")}
    assert netlist.notes == ("ff cell `DFF` of `u3`: master `u3.master` and slave `q`, one closed cell",)
    assert netlist.groups["DFF"] == netlist.groups["u3"] == (("u3.master", "q", "n"),)


def test_clear_and_preset_reach_master_and_slave() -> None:
    cells = flip_flop('next_state : "D"; clocked_on : "!CK"; clear : "R";', "D CK R")
    netlist = instance(cells, "DFF u (.D(d), .CK(g), .R(r), .Q(q));", "input d, g, r, output q")
    assert functions(netlist) == {
        "u.master": "~r & (~g ? u.master : d)",
        "q": "~r & (~g ? u.master : q)",
    }


def test_the_next_state_may_read_the_state() -> None:
    cells = flip_flop('next_state : "D IQN + D\' IQ"; clocked_on : "CK";')
    netlist = instance(cells, "DFF u (.D(d), .CK(g), .Q(q));", "input d, g, output q")
    assert functions(netlist)["u.master"] == "g ? u.master : d & ~q | ~d & q"


def test_a_flip_flop_takes_its_data_at_the_edge() -> None:
    """Walk the two nodes to rest after each input change: the output changes at rising edges only."""
    cells = flip_flop('next_state : "D"; clocked_on : "CK";')
    netlist = instance(cells, "DFF u (.D(d), .CK(g), .Q(q));", "input d, g, output q")
    state = {"d": 0, "g": 0, "u.master": 0, "q": 0}
    seen = []
    for d, g in [(1, 0), (1, 1), (0, 1), (0, 0), (1, 0), (0, 0), (0, 1), (1, 1), (1, 0), (1, 1)]:
        state |= {"d": d, "g": g}
        for _ in range(3):
            values = evaluate([gate.function for gate in netlist.gates], state)
            state |= dict(zip(["u.master", "q"], values, strict=True))
        seen.append(state["q"])
    assert seen == [0, 1, 1, 1, 1, 1, 0, 0, 0, 1]


# ---- cells that cannot be read ---------------------------------------------------------------------------------


def refused(cells: str, text: str, ports: str = "input d, g, output q") -> list[str]:
    with pytest.raises(InputError) as caught:
        instance(cells, text, ports)
    return lines(list(caught.value.problems))


UNREADABLE = {
    'cell (C) { statetable ("D", "IQ") { table : "L:-:L"; } }': "it has a `statetable` group",
    "cell (C) { bus (D) { bus_type : b; } }": "it has a `bus` group",
    "cell (C) { pin (D) { direction : inout; } }": "pin `D` is neither input nor output",
    "cell (C) { pin (D) { capacitance : 1; } }": "pin `D` is neither input nor output",
    'cell (C) { pin (Q) { direction : output; function : "1"; three_state : "D"; } }': "pin `Q` has `three_state`",
    "cell (C) { pin (Q) { direction : output; } }": "output `Q` has no function",
    "cell (C) { pin (D, D) { direction : input; } }": "it has 2 pins `D`",
    'cell (C) { latch (IQ, IQN) { enable : "D"; } }': "its `latch` has no `data_in`",
    'cell (C) { ff (IQ, IQN) { clocked_on : "D"; } }': "its `ff` has no `next_state`",
    'cell (C) { ff (IQ, IQN) { clocked_on : "D"; next_state : "D"; clocked_on_also : "D"; } }': (
        "its `ff` has `clocked_on_also`"
    ),
    'cell (C) { latch (IQ, IQN) { enable : "D"; data_in : "D"; clear : "D"; preset : "D"; } }': (
        "its `latch` has clear and preset, and no `clear_preset_var1` of L, H or N"
    ),
    'cell (C) { latch (A, B) { clear : "D"; preset : "D"; clear_preset_var1 : X; } }': (
        "its `latch` has clear and preset, and no `clear_preset_var1` of L, H or N"
    ),
}


@pytest.mark.parametrize("text", UNREADABLE)
def test_a_cell_that_cannot_be_read_is_an_error_where_it_is_used(text: str) -> None:
    found = refused(library(text), "C u7 (.D(d), .Q(q));")
    assert found == [f"2:3 unreadable-cell: library cell `C` of instance `u7` cannot be read: {UNREADABLE[text]}"]
    used = instance(library(text, cell("INV", "A", {"Y": "!A"})), "INV u (.A(d), .Y(q));", "input d, output q")
    assert functions(used) == {"q": "~d"}


def test_a_complement_that_the_library_leaves_open() -> None:
    attributes = 'enable : "G"; data_in : "D"; clear : "D"; preset : "G"; clear_preset_var1 : L;'
    message = "its `latch` does not say in `clear_preset_var2` what `IQN` is"
    assert refused(latch(attributes), "LATCH u (.D(d), .G(g), .QN(q));") == [
        f"2:7 unreadable-cell: library cell `LATCH` of instance `u` cannot be read: {message}"
    ]


INVERTER = library(cell("INV", "A", {"Y": "!A"}))


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("INV u (d, q);", "2:5 ordered-pins: pins of library cell `INV` are connected by their order"),
        ("INV u (.Y(q));", "2:5 unconnected-pin: input `A` of instance `u` is connected to nothing"),
        ("INV u (.A(d), .Y(q)), v (.A(g), .Y(q));", "2:23 multiply-driven: net `q` has two drivers"),
        ("wire \\u.n ; INV1 u (.A(d), .Y(q));", None),
    ],
)
def test_instances_of_cells(text: str, expected: str | None) -> None:
    unknown = "2:18 unknown-module: module `INV1` of instance `u` is neither in the netlist nor a cell of a library"
    assert refused(INVERTER, text) == [expected or unknown]


def test_two_outputs_of_a_cell_at_one_net() -> None:
    found = refused(flip_flop('next_state : "D"; clocked_on : "CK";'), "DFF u (.D(d), .CK(g), .Q(q), .QN(q));")
    assert found == ["2:5 multiply-driven: net `q` has two drivers"]


def test_the_nearest_cell_is_named() -> None:
    with pytest.raises(InputError) as caught:
        instance(INVERTER, "INVX u (.A(d), .Y(q));", "input d, output q")
    assert [p.help for p in caught.value.problems] == ["did you mean `INV`?"]


def test_inner_nodes_must_not_take_the_name_of_a_net() -> None:
    cells = flip_flop('next_state : "D"; clocked_on : "CK";')
    found = refused(cells, "wire \\u.master = d; DFF u (.D(d), .CK(g), .Q(q));")
    message = "`u.master` is the name of a net, and of a node inside instance `u`"
    assert found == [f"2:25 duplicate-name: {message}"]


def test_a_function_that_cannot_be_read_is_told_with_its_place_in_the_library() -> None:
    cells = library(cell("C", "A", {"Y": "A +"}))
    (found,) = refused(cells, "C u (.A(d), .Y(q));", "input d, output q")
    assert found.startswith("2:85 expression-syntax: the expression `A +` cannot be read")
