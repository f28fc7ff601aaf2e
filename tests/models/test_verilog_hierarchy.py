"""Names, vectors, hierarchy, parameters and generate loops in Verilog netlists."""

from __future__ import annotations

from settled.models.logic import to_text
from settled.models.netlist import Netlist
from settled.models.readers import verilog


def read(text: str, suffix: str = ".v", top: str | None = None) -> Netlist:
    return verilog.read_text(text, "gauge" + suffix, top=top)


def body(items: str, ports: str = "input a, b, c, output y") -> Netlist:
    """The netlist of one module with some items."""
    return read(f"module gauge({ports});\n{items}\nendmodule\n")


def functions(netlist: Netlist) -> dict[str, str]:
    return {gate.name: to_text(gate.function) for gate in netlist.gates}


def definitions(netlist: Netlist) -> dict[str, str]:
    return {name: to_text(e) for name, e in netlist.defined.items()}


# ---- names, vectors, hierarchy ---------------------------------------------------------------------------------


def test_vectors_are_read_from_the_left() -> None:
    netlist = body("assign y = ~d, z = d[2];", "input [2:0] d, output [0:2] y, output z")
    assert netlist.inputs == ("d[2]", "d[1]", "d[0]")
    assert netlist.outputs == ("y[0]", "y[1]", "y[2]", "z")
    assert functions(netlist) == {"y[0]": "~d[2]", "y[1]": "~d[1]", "y[2]": "~d[0]"}


def test_arrays_of_nets() -> None:
    netlist = body("wire [1:0] m [0:1]; assign m[1] = ~{a, b}; assign m[0] = m[1]; assign y = m[0][1] & c;")
    assert list(functions(netlist)) == ["m[1][1]", "m[1][0]", "y"]
    assert definitions(netlist) == {"m[0][1]": "m[1][1]", "m[0][0]": "m[1][0]"}


def test_escaped_names_stand_without_backslash() -> None:
    netlist = body("wire \\n+1 ; nand \\g.1 (\\n+1 , \\a[0] , b); not (y, \\n+1 );", "input \\a[0] , b, output y")
    assert netlist.inputs == ("a[0]", "b")
    assert functions(netlist) == {"n+1": "~(a[0] & b)", "y": "~\\n+1 "}


def test_an_escaped_simple_name_is_the_simple_name() -> None:
    assert functions(body("nand (\\y , \\a , b);")) == {"y": "~(a & b)"}


HIERARCHY = """
module half(p, q, r);
  input p, q; output r;
  wire n;
  nand g1 (n, p, q);
  not g2 (r, n);
endmodule
module pair(input [1:0] x, input k, output y, output spare);
  half u1 (.p(x[0]), .q(k), .r(y));
  half \\u.2 (x[1], k, spare);
endmodule
module gauge(input [1:0] d, input e, output level);
  pair left (.x(d), .k(e), .y(level), .spare());
endmodule
"""


def test_hierarchy_is_laid_flat_under_the_names_of_the_highest_level() -> None:
    netlist = read(HIERARCHY)
    assert netlist.name == "gauge"
    assert list(functions(netlist).items()) == [
        ("left.u1.n", "~(d[0] & e)"),
        ("level", "~left.u1.n"),
        ("left.u.2.n", "~(d[1] & e)"),
        ("left.spare", "~\\left.u.2.n "),
    ]


def test_inner_names_of_a_net_are_definitions() -> None:
    known = definitions(read(HIERARCHY))
    assert known["left.x[1]"] == "d[1]"
    assert known["left.y"] == known["left.u1.r"] == "level"
    assert known["left.u1.p"] == "d[0]"
    assert known["left.u.2.r"] == "left.spare"


def test_modules_and_instances_are_groups() -> None:
    u1, u2 = ("left.u1.n", "level"), ("left.u.2.n", "left.spare")
    assert dict(read(HIERARCHY).groups) == {
        "pair": (u1 + u2,),
        "left": (u1 + u2,),
        "half": (u1, u2),
        "left.u1": (u1,),
        "left.u.2": (u2,),
    }


def test_the_top_may_be_chosen() -> None:
    netlist = read(HIERARCHY, top="half")
    assert (netlist.name, netlist.inputs, netlist.outputs) == ("half", ("p", "q"), ("r",))
    assert dict(netlist.groups) == {}


def test_constants_and_expressions_at_inputs_of_instances() -> None:
    text = """
    module cell2(input [1:0] x, input k, output y); nand (y, x[1], x[0], k); endmodule
    module gauge(input a, b, output y); cell2 u (.x({a, 1'b1}), .k(a | b), .y(y)); endmodule
    """
    netlist = read(text)
    assert list(functions(netlist).items()) == [("u.k", "a | b"), ("y", "~(a & u.x[0] & u.k)")]
    assert definitions(netlist) == {"u.x[1]": "a", "u.x[0]": "1", "u.y": "y"}
    assert netlist.groups["u"] == (("y",),)


def test_feedback_through_the_hierarchy() -> None:
    text = """
    module gate2(input a, b, output y); nor (y, a, b); endmodule
    module gauge(input s, r, output q, n); gate2 u1 (r, n, q), u2 (s, q, n); endmodule
    """
    assert functions(read(text)) == {"q": "~(r | n)", "n": "~(s | q)"}


def test_arrays_of_instances() -> None:
    text = """
    module gate2(input a, b, output y); nor (y, a, b); endmodule
    module gauge(input [1:0] d, input e, output [1:0] q); gate2 u[1:0] (d, e, q); endmodule
    """
    netlist = read(text)
    assert functions(netlist) == {"q[0]": "~(d[0] | e)", "q[1]": "~(d[1] | e)"}
    assert netlist.groups["u[1]"] == (("q[1]",),)
    assert definitions(netlist)["u[0].a"] == "d[0]"


def test_parameters_and_generate_loops_are_elaborated() -> None:
    text = """
    module chain #(parameter N = 2) (input d, output q);
      wire [N:0] w;
      assign w[0] = d, q = w[N];
      genvar i;
      generate for (i = 0; i < N; i = i + 1) begin : stage
        wire n;
        if (i == 0) not (n, w[i]); else nand (n, w[i], stage[i-1].n);
        not (w[i+1], n);
      end endgenerate
    endmodule
    module gauge(input d, output q); chain #(.N(2)) c (d, q); endmodule
    """
    netlist = read(text)
    assert functions(netlist) == {
        "c.stage[0].n": "~c.w[0]",
        "c.w[1]": "~c.stage[0].n",
        "c.stage[1].n": "~(c.w[1] & c.stage[0].n)",
        "c.w[2]": "~c.stage[1].n",
    }
    assert definitions(netlist) == {"c.d": "d", "c.q": "q", "c.w[0]": "d", "q": "c.w[2]"}


def test_a_module_may_contain_itself_with_other_parameters() -> None:
    text = """
    module tree #(parameter N = 4) (input [N-1:0] d, output y);
      generate if (N == 1) begin : leaf assign y = d[0]; end
      else begin : node
        wire l, r;
        tree #(N/2) u1 (d[N-1:N/2], l), u2 (d[N/2-1:0], r);
        and (y, l, r);
      end endgenerate
    endmodule
    """
    netlist = read(text, top="tree")
    assert functions(netlist)["y"] == "node.l & node.r"
    assert len(netlist.gates) == 3


def test_parameters_set_from_outside_and_names_of_inner_nets() -> None:
    text = """`default_nettype none
    module inner(input p, output q);
      parameter INVERT = 0; wire n = p & p; assign q = INVERT ? ~n : n;
    endmodule
    module gauge(input a, output y, z);
      inner u (a, y); defparam u.INVERT = 1; assign z = u.n | u.p;
    endmodule
    """
    netlist = read(text)
    assert functions(netlist) == {"u.n": "a", "y": "~u.n", "z": "u.n | a"}


def test_ports_may_be_parts_of_nets() -> None:
    text = """
    module inner(.p({x, y}), .q(z)); input x, y; output z; and (z, x, y); endmodule
    module gauge(input [1:0] d, output q); inner u (.p(d), .q(q)); endmodule
    """
    assert functions(read(text)) == {"q": "d[1] & d[0]"}


def test_macros_and_conditional_text() -> None:
    text = """`timescale 1ns/1ps
    `define WIDTH 2
    `ifdef OTHER
    garbage
    `else
    module gauge(input [`WIDTH-1:0] d, output y); and (y, d[1], d[0]); endmodule
    `endif
    """
    assert functions(read(text)) == {"y": "d[1] & d[0]"}


def test_words_of_the_newer_standard_are_names_in_the_older_one() -> None:
    netlist = body("nand (y, do, bit);", "input do, bit, output y")
    assert netlist.inputs == ("do", "bit")


def test_newer_files_may_use_logic() -> None:
    netlist = read("module gauge(input logic a, b, output logic y); assign y = a & b; endmodule", ".sv")
    assert functions(netlist) == {"y": "a & b"}


def test_a_netlist_without_gates() -> None:
    netlist = body("assign y = a;")
    assert (netlist.gates, netlist.outputs, definitions(netlist)) == ((), ("y",), {"y": "a"})
