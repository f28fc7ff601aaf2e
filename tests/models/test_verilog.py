"""What the Verilog reader makes of gates, assignments, hierarchy and vectors."""

from __future__ import annotations

from itertools import product

import pytest

from settled.models.logic import evaluate, to_text
from settled.models.netlist import Delay, Netlist
from settled.models.readers import verilog
from settled.models.source import Span


def read(text: str, suffix: str = ".v", top: str | None = None) -> Netlist:
    return verilog.read_text(text, "gauge" + suffix, top=top)


def body(items: str, ports: str = "input a, b, c, output y") -> Netlist:
    """The netlist of one module with some items."""
    return read(f"module gauge({ports});\n{items}\nendmodule\n")


def functions(netlist: Netlist) -> dict[str, str]:
    return {gate.name: to_text(gate.function) for gate in netlist.gates}


def definitions(netlist: Netlist) -> dict[str, str]:
    return {name: to_text(e) for name, e in netlist.defined.items()}


# ---- gates -----------------------------------------------------------------------------------------------------

TABLES = {  # IEEE 1364-2005, clause 7.2 (recalled): tables of two inputs, extended to more
    "and": lambda pins: all(pins),
    "nand": lambda pins: not all(pins),
    "or": lambda pins: any(pins),
    "nor": lambda pins: not any(pins),
    "xor": lambda pins: sum(pins) % 2 == 1,
    "xnor": lambda pins: sum(pins) % 2 == 0,
}


@pytest.mark.parametrize("kind", TABLES)
@pytest.mark.parametrize("count", [1, 2, 3, 4])
def test_gate_with_many_inputs(kind: str, count: int) -> None:
    names = [f"i{k}" for k in range(count)]
    netlist = body(f"{kind} g (y, {', '.join(names)});", f"input {', '.join(names)}, output y")
    (gate,) = netlist.gates
    assert gate.name == "y"
    for vector in product((0, 1), repeat=count):
        assert evaluate([gate.function], dict(zip(names, vector, strict=True))) == [int(TABLES[kind](vector))]


def test_gates_with_many_outputs() -> None:
    netlist = body("buf g1 (y, z, a); not (n, m, b);", "input a, b, output y, z, n, m")
    assert functions(netlist) == {"y": "a", "z": "a", "n": "~b", "m": "~b"}


def test_several_gates_in_one_statement_stand_in_their_order() -> None:
    netlist = body("wire p, q; nand g2 (q, p, b), g1 (p, q, a); or (y, p, q);")
    assert list(functions(netlist).items()) == [("q", "~(p & b)"), ("p", "~(q & a)"), ("y", "p | q")]


def test_gate_reads_a_net_twice_and_constants() -> None:
    assert functions(body("xor (y, a, a, 1'b1);")) == {"y": "~(a ^ a)"}


def test_arrays_of_gates_take_bits_from_the_right() -> None:
    netlist = body("nor g[5:4] (y, d[3:2], a);", "input [3:0] d, input a, output [0:1] y")
    assert functions(netlist) == {"y[1]": "~(d[2] | a)", "y[0]": "~(d[3] | a)"}


def test_combinational_primitive_of_the_user() -> None:
    text = """
    primitive majority(o, a, b, c); output o; input a, b, c;
      table 1 1 ? : 1; 1 ? 1 : 1; ? 1 1 : 1; 0 0 ? : 0; 0 b 0 : 0; ? 0 0 : 0; x 0 1 : x; endtable
    endprimitive
    module gauge(input a, b, c, output y); majority #3 m (y, a, b, c); endmodule
    """
    (gate,) = read(text).gates
    for a, b, c in product((0, 1), repeat=3):
        assert evaluate([gate.function], {"a": a, "b": b, "c": c}) == [int(a + b + c >= 2)]
    assert gate.delay == Delay((3, 3), (3, 3))


# ---- assignments -----------------------------------------------------------------------------------------------

EXPRESSIONS = {
    "~a": "~a",
    "!a && b || c": "~a & b | c",
    "a & b & c": "a & b & c",
    "a ^ b ~^ c": "~(a ^ b ^ c)",
    "a ^~ b": "~(a ^ b)",
    "a ? b : c": "a ? b : c",
    "a == b": "~(a ^ b)",
    "a != b": "a ^ b",
    "&d": "d[2] & d[1] & d[0]",
    "~&d": "~(d[2] & d[1] & d[0])",
    "|d": "d[2] | d[1] | d[0]",
    "~|d": "~(d[2] | d[1] | d[0])",
    "^d": "d[2] ^ d[1] ^ d[0]",
    "~^d": "~(d[2] ^ d[1] ^ d[0])",
    "!d": "~(d[2] | d[1] | d[0])",
    "d && a": "(d[2] | d[1] | d[0]) & a",
    "d == 3'b101": "d[2] & ~d[1] & d[0]",
    "d == 5": "d[2] & ~d[1] & d[0]",
    "~a == 1": "0",
    "d[1] & ~d[0]": "d[1] & ~d[0]",
    "d[2:1] == {b, c}": "~(d[2] ^ b) & ~(d[1] ^ c)",
    "{2{a}} == d[1 +: 2]": "~(a ^ d[2]) & ~(a ^ d[1])",
    "d[2 -: 2] != 2'd2": "~d[2] | d[1]",
    "a & 1": "a",
    "a & P[0]": "a",
    "y & a | b": "y & a | b",
}


@pytest.mark.parametrize("text", EXPRESSIONS)
def test_an_assignment_with_an_operator_is_one_gate(text: str) -> None:
    netlist = body(f"parameter P = 3; assign y = {text};", "input a, b, c, input [2:0] d, output y")
    assert functions(netlist) == {"y": EXPRESSIONS[text]}


def test_the_widening_of_operands_follows_the_standard() -> None:
    """IEEE 1364-2005, clause 5.4 (recalled): `~a == 1` widens `a` to the 32 bits of `1` before it is negated."""
    assert functions(body("assign y = ~a == 1;")) == {"y": "0"}
    assert functions(body("assign y = ~a == 1'b1;")) == {"y": "~a"}


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("b", "b"),
        ("(b)", "b"),
        ("d[1]", "d[1]"),
        ("1'b1", "1"),
        ("0", "0"),
        ("~1'b0", "1"),
        ("P == 3", "1"),
        ("P + 1 > 4", "0"),
        ("P == 3 ? b : c", "b"),
    ],
)
def test_an_assignment_without_operators_on_nets_is_a_definition(text: str, expected: str) -> None:
    netlist = body(f"parameter P = 3; assign y = {text};", "input a, b, c, input [2:0] d, output y")
    assert netlist.gates == ()
    assert definitions(netlist) == {"y": expected}


def test_each_bit_of_an_assignment_is_a_gate_or_a_definition() -> None:
    netlist = body("assign {y, z[0]} = {a & b, c}, z[1] = a;", "input a, b, c, output y, output [1:0] z")
    assert functions(netlist) == {"y": "a & b"}
    assert definitions(netlist) == {"z[0]": "c", "z[1]": "a"}


def test_an_operator_whose_result_is_one_operand_still_is_a_gate() -> None:
    assert functions(body("assign y = a & 1'b1;")) == {"y": "a"}


def test_declaration_assignments_and_supplies() -> None:
    netlist = body("wire n = a | b; supply0 gnd; supply1 vdd; tri m = gnd; nand (y, n, vdd, m);")
    assert functions(netlist) == {"n": "a | b", "y": "~(n & vdd & m)"}
    assert definitions(netlist) == {"gnd": "0", "vdd": "1", "m": "gnd"}


def test_a_latch_may_be_one_gate_that_reads_itself() -> None:
    assert functions(body("assign y = a ? b : y;")) == {"y": "a ? b : y"}


# ---- places and delays -----------------------------------------------------------------------------------------


def test_gates_know_their_places() -> None:
    head = "module gauge(input a, b, output y, z, w);"
    text = f"{head}\n  nand  g1 (y, a, b);\n  /* é */ not (z, a);\n  assign w = a & b;\nendmodule"
    spans = [gate.span for gate in read(text).gates]
    file = "gauge.v"
    assert spans == [Span(file, 2, 9, 2), Span(file, 3, 11, 3), Span(file, 4, 10, 9)]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("#3", Delay((3, 3), (3, 3))),
        ("#(3)", Delay((3, 3), (3, 3))),
        ("#(1.5, 2)", Delay((1.5, 1.5), (2, 2))),
        ("#(1:2:3)", Delay((1, 3), (1, 3))),
        ("#(1:2:3, 4:5:6)", Delay((1, 3), (4, 6))),
        ("#(P, P + 1)", Delay((7, 7), (8, 8))),
    ],
)
def test_delays_of_gates(text: str, expected: Delay) -> None:
    netlist = body(f"parameter P = 7; nand {text} (y, a, b);")
    assert netlist.gates[0].delay == expected
    assert any("typical" in note for note in netlist.notes) == (":" not in text)


def test_delays_of_assignments() -> None:
    netlist = body("wire #(1:1:2) n = a & b; assign #(1, 2, 3) y = n;")
    assert [gate.delay for gate in netlist.gates] == [Delay((1, 2), (1, 2)), Delay((1, 1), (2, 2))]
    assert functions(netlist) == {"n": "a & b", "y": "n"}


def test_gates_without_delay_have_none() -> None:
    netlist = body("nand (y, a, b);")
    assert netlist.gates[0].delay is None
    assert netlist.notes == ()
