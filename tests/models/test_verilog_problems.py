"""What the Verilog reader says against netlists that it does not accept: code, place and words of each problem."""

from __future__ import annotations

from pathlib import Path

import pytest

from settled.models.problems import InputError, Problem
from settled.models.readers import verilog, verilog_hierarchy
from settled.models.readers.liberty import cells_of


def problems(text: str, suffix: str = ".v", top: str | None = None, library: str = "") -> list[Problem]:
    cells = cells_of(library, "cells.lib") if library else None
    with pytest.raises(InputError) as caught:
        verilog.read_text(text, "gauge" + suffix, top=top, cells=cells)
    return list(caught.value.problems)


def lines(found: list[Problem]) -> list[str]:
    """Place, code and message of each problem."""
    return [f"{p.span.line}:{p.span.column} {p.code}: {p.message}" for p in found if p.span is not None]


def against(items: str, ports: str = "input a, b, c, output y") -> list[str]:
    """The problems of one module with some items, which begin in line 2."""
    return lines(problems(f"module gauge({ports});\n{items}\nendmodule\n"))


GOLDEN = {
    "reg r; always @(posedge a) r = b; buf (y, b);": ["2:8 procedural-block: `always` block is not made of gates"],
    "initial begin end buf (y, b);": ["2:1 procedural-block: `initial` block is not made of gates"],
    "bufif1 (y, a, b);": ["2:1 tri-state: `bufif1` is no logic gate"],
    "notif0 n (y, a, b);": ["2:8 tri-state: `notif0` is no logic gate"],
    "pullup (y);": ["2:1 pull: `pullup` is no logic gate"],
    "nmos (y, a, b);": ["2:1 switch: `nmos` is no logic gate"],
    "wire n; tranif1 (y, n, b);": ["2:9 switch: `tranif1` is no logic gate"],
    "assign y = 1'bz;": ["2:12 literal: `1'bz` has the value x or z"],
    "assign y = a ? b : 1'bx;": ["2:20 literal: `1'bx` has the value x or z"],
    "tri0 n; buf (y, n);": ["2:6 net-type: `n` is a tri0 net"],
    "wand n; buf (y, n), (n, a);": ["2:6 net-type: `n` is a wand net"],
    "trireg n; buf (y, a);": ["2:8 net-type: `n` is a trireg net"],
    "nand (weak0, strong1) g (y, a, b);": ["2:23 strength: drive strength `(weak0, strong1)` is not accepted"],
    "assign (pull1, pull0) y = a;": ["2:23 strength: drive strength `(pull1, pull0)` is not accepted"],
    "wire #3 n; buf (n, a), (y, n);": ["2:9 net-delay: net `n` has a delay of its own"],
    "nand #(3:2:1) (y, a, b);": ["2:1 delay: a delay from 3 to 1 is not possible"],
    "nand #a (y, a, b);": ["2:1 delay: a delay is not a constant number"],
    "specify (a => y) = 1; endspecify buf (y, a);": ["2:1 specify-block: a specify block is not accepted"],
    "function f; input x; f = x; endfunction buf (y, a);": ["2:10 construct: a function or task is not accepted"],
    "integer i; buf (y, a);": ["2:9 construct: `i` is of type integer"],
    "reg r = 1; buf (y, r);": ["2:5 initial-value: variable `r` is given an initial value"],
    "assign y = a + b;": ["2:12 operator: operator `+` in `a + b` is not a function of gates"],
    "assign y = a < b;": ["2:12 operator: operator `<` in `a < b` is not a function of gates"],
    "assign y = a === b;": ["2:12 operator: operator `===` in `a === b` is not a function of gates"],
    "assign y = a >> 1;": ["2:12 operator: operator `>>` in `a >> 1` is not a function of gates"],
    "assign y = $signed(a);": ["2:12 operator: `$signed(a)` is not a function of gates"],
    "wire [1:0] d = {a, b}; assign y = d[c];": ["2:37 expression: `c` is not a constant number"],
    "wire [1:0] d = {a, b}; assign y = d[2];": ["2:37 index-out-of-range: cannot refer to element 2 of `logic[1:0]`"],
    "nand (y, a & b, c);": [
        "2:10 expression: an input of gate `nand` is connected to an expression with operators: `a & b`"
    ],
    "nand (y, a, );": ["2:13 unconnected-pin: a pin of a gate is connected to nothing, or by name"],
    "nand (y, n, b);": ["2:10 implicit-net: implicit net `n` created"],
    "assign y = n;": ["2:12 unknown-name: use of undeclared identifier `n`"],
    "wire n; wire n; buf (y, a);": ["2:14 redefined-name: redefinition of `n`"],
    "wire [1:0] d = a; assign y = d[0];": ["2:16 width-mismatch: implicit conversion expands from 1 to 2 bits"],
    "wire [1:0] d = {a, b}; assign y = d;": ["2:35 width-mismatch: implicit conversion truncates from 2 to 1 bits"],
    "wire [1:0] d = {a, b}; assign y = &(d & c);": [
        "2:39 width-mismatch: bitwise operation between operands of different types (`logic[1:0]` and `logic`)"
    ],
    "wire [1:0] d = 5; assign y = d[0];": [
        "2:14 width-mismatch: implicit conversion from `logic signed[31:0]` to `logic[1:0]` "
        "changes value from 5 to 2'b1"
    ],
    "wire n; nand (y, n, b);": ["2:6 undriven-net: nothing drives net `n`"],
    "wire [3:0] d; assign d[2] = a, y = &d;": ["2:12 undriven-net: nothing drives net `d[3]`, `d[1]`, `d[0]`"],
    "nand (n, a, b); wire n;": ["2:7 unknown-name: identifier `n` used before its declaration"],
    "buf (y, a); not (y, b);": ["2:13 multiply-driven: net `y` has two drivers"],
    "buf (a, b), (y, a);": ["2:1 multiply-driven: net `a` has two drivers"],
    "assign {y, y} = {a, b};": ["2:8 multiply-driven: net `y` has two drivers"],
    "supply0 n; buf (n, a), (y, b);": ["2:12 multiply-driven: net `n` has two drivers"],
    "wire n, m; assign n = m, m = n, y = n;": [
        "2:19 assignment-loop: assignments without a gate form a loop: `n` reads `m` reads `n`"
    ],
    "nand2x u (a, y);": [
        "2:8 unknown-module: module `nand2x` of instance `u` is neither in the netlist nor a cell of a library"
    ],
}


@pytest.mark.parametrize("items", GOLDEN)
def test_what_is_not_gates_is_named_with_its_place(items: str) -> None:
    assert against(items) == GOLDEN[items]


def test_an_undriven_net_is_no_problem_while_others_may_be_its_cause() -> None:
    found = against("wire n; bufif1 (n, a, b); nand (y, n, c);")
    assert found == ["2:9 tri-state: `bufif1` is no logic gate"]


def test_all_problems_of_a_file_come_at_once_in_its_order() -> None:
    found = against("wire n;\npullup (n);\nassign y = a + b;\nassign y = n;\ninitial begin end\nbuf (y, c);")
    assert [line.split(":")[0] + line.split(" ")[1] for line in found] == [
        "3pull:",
        "4operator:",
        "6procedural-block:",
        "7multiply-driven:",
    ]


def test_both_drivers_of_a_net_are_named() -> None:
    (found,) = problems("module gauge(input a, b, output y);\nbuf g (y, a);\nassign y = b;\nendmodule")
    assert found.notes == ("one is gate `buf` at gauge.v:2:5", "the other one is an assignment at gauge.v:3:8")


def test_an_undriven_net_names_its_reader() -> None:
    (found,) = problems("module gauge(input a, output y);\nwire n;\nnand g (y, a, n);\nendmodule")
    assert found.notes == ("it is read by gate `nand` at gauge.v:3:6",)


def test_outputs_must_be_driven() -> None:
    assert against("wire n = a;") == ["1:36 undriven-net: nothing drives net `y`"]
    inner = "module cell2(input p, output q); endmodule\n"
    text = inner + "module gauge(input a, output y);\nwire n;\ncell2 u (a, n);\nbuf (y, a);\nendmodule"
    (found,) = problems(text)
    assert lines([found]) == ["3:6 undriven-net: nothing drives net `n`"]
    assert found.notes == ("it is read by output `q` of instance `u` at gauge.v:4:7",)


HALF = "module half(input p, output q); not (q, p); endmodule\n"


@pytest.mark.parametrize(
    ("items", "expected"),
    [
        ("half u (.q(y));", "unconnected-pin: input `p` of instance `u` is connected to nothing"),
        ("half u (, y);", "unconnected-pin: input `p` of instance `u` is connected to nothing"),
        ("half u (.p(a), .q(y), .z(a));", "unknown-port: port `z` does not exist in `half`"),
        ("wire [1:0] d = {a, a}; half u (d, y);", None),
        ("half u (a, b);", "multiply-driven: net `b` has two drivers"),
        ("half u (a, 1'b0); buf (y, a);", "elaboration: expression is not assignable"),
    ],
)
def test_connections_of_instances(items: str, expected: str | None) -> None:
    text = f"{HALF}module gauge(input a, b, output y);\n{items}\nendmodule"
    (found,) = problems(text)
    words = f"{found.code}: {found.message}"
    assert words == (expected or "width-mismatch: implicit conversion of port connection truncates from 2 to 1 bits")


def test_delays_in_different_units() -> None:
    inner = "`timescale 1ns/1ps\nmodule cell2(input p, output q); not #1 (q, p); endmodule\n"
    text = "`timescale 1ps/1ps\nmodule gauge(input a, output y);\nwire n; cell2 u (a, n); buf #9 (y, n);\nendmodule"
    assert lines(problems(inner + text)) == [
        "5:25 mixed-timescale: delays of this design are in different units of time"
    ]


def test_an_input_must_not_be_driven_from_inside() -> None:
    text = "module half(input p, output q); not (q, p); buf (p, q); endmodule\n"
    found = lines(problems(text + "module gauge(output y); wire n; half u (n, y); endmodule"))
    assert found == ["1:50 driven-input: `u.p` is an input of its module, and is driven inside it"]


def test_an_instance_must_not_join_two_nets() -> None:
    text = "module tie(.p(n), .q(n)); input n; endmodule\nmodule gauge(input a, b);\ntie u (a, b);\nendmodule"
    found = lines(problems(text))
    assert found == ["3:5 joined-nets: instance `u` joins nets `a` and `b`"]


def test_inouts() -> None:
    assert lines(problems("module gauge(inout p, input a, output y); buf (y, a); endmodule")) == [
        "1:20 inout: port `p` is neither input nor output"
    ]


def test_names_that_become_one_name() -> None:
    text = f"{HALF}module gauge(input a, output y);\nwire \\u.n , \\u.p = a;\nhalf u (a, y);\nendmodule"
    (found,) = problems(text)
    assert lines([found]) == ["1:19 duplicate-name: two nets of the flat design are called `u.p`"]
    assert found.notes == ("the other one stands at gauge.v:3:13",)


SEQUENTIAL = """primitive latch(q, d, e); output q; reg q; input d, e;
table 1 1 : ? : 1; 0 1 : ? : 0; ? 0 : ? : -; endtable endprimitive
"""
PARTIAL = "primitive part(q, d, e); output q; input d, e; table 1 1 : 1; 0 ? : 0; endtable endprimitive\n"


def test_primitives_of_the_user_that_are_no_gates() -> None:
    top = "module gauge(input a, b, output y);\n{} (y, a, b);\nendmodule"
    assert lines(problems(SEQUENTIAL + top.format("latch"))) == ["4:1 sequential-udp: primitive `latch` holds a state"]
    assert lines(problems(PARTIAL + top.format("part u"))) == [
        "3:6 udp-table: primitive `part` has no output 0 or 1 for inputs 10"
    ]


def test_newer_constructs_are_named() -> None:
    text = "module gauge(input a, output wire y);\n{}\nendmodule"
    assert lines(problems(text.format("alias y = a;"), ".sv")) == ["2:1 construct: an alias statement is not accepted"]
    found = lines(problems(text.format("logic q; always_latch if (a) q = a; assign y = q;"), ".sv"))
    assert found == ["2:10 procedural-block: `always_latch` block is not made of gates"]
    assert lines(problems("package p; endpackage\n" + text.format("buf (y, a);"), ".sv")) == [
        "1:1 construct: something other than a module or a primitive stands outside the modules"
    ]


# ---- the top module --------------------------------------------------------------------------------------------


def test_several_tops() -> None:
    (found,) = problems("module one; endmodule\nmodule two; endmodule")
    assert lines([found]) == ["1:8 several-tops: 2 modules are instantiated by no other one: `one`, `two`"]
    assert found.notes == ("`two` is defined at gauge.v:2:8",)
    assert "`top`" in found.help


def test_an_unknown_top() -> None:
    (found,) = problems("module wake_latch; endmodule", top="wakelatch")
    assert lines([found]) == ["1:1 unknown-top: there is no module `wakelatch` in `gauge.v`"]
    assert found.help == "did you mean `wake_latch`?"


def test_no_module() -> None:
    for text in ("", "\n\n", "// nothing\n"):
        assert lines(problems(text)) == ["1:1 no-module: `gauge.v` holds no module"]


def test_recursion() -> None:
    text = "module a; b u (); endmodule\nmodule b; a u (); endmodule"
    assert lines(problems(text)) == ["1:8 recursion: every module is instantiated by another one, so none is the top"]
    (found,) = problems(text, top="a")
    assert (found.code, found.message) == ("recursion", "module `b` contains itself")


def test_a_doubling_hierarchy_stops_at_a_limit(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(verilog_hierarchy, "SIZE", 5_000)
    levels = "".join(f"module m{i}; m{i + 1} u1 (), u2 (); endmodule\n" for i in range(40))
    (found,) = problems(levels + "module m40; wire n; endmodule")
    assert found.code == "too-large"
    assert "5,000" in found.message


# ---- text that cannot be read ----------------------------------------------------------------------------------


def test_syntax_errors_come_alone_and_all_at_once() -> None:
    found = problems("module gauge(input a, output y)\nnand (y, a a);\nassign = ;\nendmodule")
    assert {p.code for p in found} == {"syntax"}
    assert [p.span.line for p in found if p.span] == [1, 2, 3, 3]


DEEP = 20_000


@pytest.mark.parametrize(
    "items",
    [
        "assign y = " + "(" * DEEP + "a" + ")" * DEEP + ";",
        "assign y = " + "{" * DEEP + "a" + "}" * DEEP + ";",
        "begin " * DEEP + "end " * DEEP,
        "generate " + "if (1) " * DEEP + "assign y = a; endgenerate",
        "generate if (0) assign y = a; " + "else if (0) assign y = a; " * DEEP + "endgenerate",
        "generate " + "if (0) begin : g end else " * DEEP + "begin end endgenerate",
        "generate " + "case (1) 1: " * DEEP + "assign y = a;" + " endcase" * DEEP + " endgenerate",
        "module n; " * DEEP + "endmodule " * DEEP,
        "assign y = a" + "[0" * DEEP + "]" * DEEP + ";",
        "`define D " + "(" * 500 + "\nassign y = `D `D `D a;",
    ],
)
def test_nesting_without_bound(items: str) -> None:
    (found,) = problems(f"module gauge(input a, output y);\n{items}\nendmodule")
    assert found.code == "too-deep"
    assert "1,000" in found.message


@pytest.mark.parametrize(
    "expression",
    [" | ".join("a" * DEEP), "~" * DEEP + "a", "a ? a : " * DEEP + "a", "a" + ".a" * DEEP, "a" + "[0]" * DEEP],
    ids=["or", "not", "conditional", "path", "select"],
)
def test_operators_without_bound(expression: str) -> None:
    (found,) = problems(f"module gauge(input a, output y);\nassign y = {expression};\nendmodule")
    assert found.code == "too-large"
    assert "5,000" in found.message


def test_what_stays_below_the_limits_is_read() -> None:
    text = "module gauge(input a, b, output y, z);\nassign y = {};\nassign z = {};\nendmodule"
    netlist = verilog.read_text(text.format("(" * 900 + "a & b" + ")" * 900, " | ".join("ab" * 2_000)), "gauge.v")
    assert [len(gate.function.args) for gate in netlist.gates] == [2, 2]


def test_macros_without_bound() -> None:
    doubling = "".join(f"`define M{i + 1} `M{i} `M{i}\n" for i in range(60))
    found = problems("`define M0 a\n" + doubling + "module gauge(input `M60); endmodule")
    assert {p.code for p in found} == {"macro"}
    many = "`define M " + "a" * 100_000 + "\n" + "`M\n" * 200
    assert [p.code for p in problems(many)] == ["too-large"]


def test_other_files_and_unknown_macros() -> None:
    found = lines(problems('`include "other.v"\nmodule gauge(input a, output y); `FROB endmodule'))
    assert found == [
        "1:1 include: `` `include`` is not accepted",
        "2:34 macro: `` `FROB`` is neither a macro nor a known directive",
    ]


@pytest.mark.parametrize("unit", ["a ", "%$#@!", "module m; ", "wire w; ", '"', "/*", "\\x ", "`", "[:;"])
def test_large_nonsense(unit: str) -> None:
    for suffix in (".v", ".sv"):
        found = problems((unit * 1_000 + "\n") * 100, suffix)
        assert 1 <= len(found) <= 100


# ---- files -----------------------------------------------------------------------------------------------------


def read_file(path: Path, **options: object) -> list[Problem]:
    with pytest.raises(InputError) as caught:
        verilog.read(str(path), **options)  # type: ignore[arg-type]
    return list(caught.value.problems)


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    (tmp_path / "nul.v").write_bytes(b"module gauge;\n\0endmodule")
    (tmp_path / "latin.v").write_bytes(b"module gauge; // \xe9\nendmodule")
    (tmp_path / "large.v").write_bytes(b"/" * 10_000_001)
    for name in ("nul.v", "latin.v"):
        assert [p.code for p in read_file(tmp_path / name)] == ["not-text"]
    assert [p.code for p in read_file(tmp_path / "large.v")] == ["too-large"]
    assert [p.code for p in read_file(tmp_path / "missing.v")] == ["file-not-found"]
    assert [p.code for p in read_file(tmp_path)] == ["unreadable"]


def test_a_file_is_read(tmp_path: Path) -> None:
    path = tmp_path / "gauge.v"
    path.write_bytes(b"\xef\xbb\xbfmodule gauge(input a, output y);\r\n  not (y, a);\r\nendmodule\r\n")
    netlist = verilog.read(str(path))
    assert [gate.name for gate in netlist.gates] == ["y"]
    assert netlist.gates[0].span is not None and netlist.gates[0].span.line == 2
