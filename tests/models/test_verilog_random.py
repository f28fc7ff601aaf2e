"""Random structural netlists: the reader must find the gates that the generator had in mind.

The generator keeps its own account of every gate, as a function of packed words over net names, while it writes the
gates as primitives, assignments, bits of vectors, wrapped modules and library cells. Loops come by themselves.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import reduce
from operator import and_, or_, xor
from random import Random

import pytest

from settled.models.logic import evaluate, support
from settled.models.readers.liberty import cells_of
from settled.models.readers.verilog import read_text

BITS = 64
ONE = (1 << BITS) - 1
Words = dict[str, int]
Function = Callable[[Words], int]

KINDS: dict[str, Callable[[list[int]], int]] = {
    "and": lambda pins: reduce(and_, pins),
    "nand": lambda pins: ONE ^ reduce(and_, pins),
    "or": lambda pins: reduce(or_, pins),
    "nor": lambda pins: ONE ^ reduce(or_, pins),
    "xor": lambda pins: reduce(xor, pins),
    "xnor": lambda pins: ONE ^ reduce(xor, pins),
}
CELLS = """library (gauge) {
  cell (AOI) { pin (A) { direction : input; } pin (B) { direction : input; } pin (C) { direction : input; }
    pin (Y) { direction : output; function : "(A B + C)'"; } }
  cell (MUX) { pin (A) { direction : input; } pin (B) { direction : input; } pin (C) { direction : input; }
    pin (Y) { direction : output; function : "A C' + B * C"; } }
}"""
CELL_KINDS: dict[str, Callable[[list[int]], int]] = {
    "AOI": lambda pins: ONE ^ (pins[0] & pins[1] | pins[2]),
    "MUX": lambda pins: pins[0] & ~pins[2] | pins[1] & pins[2],
}


class Design:
    """A random netlist: its text, and each gate's function in the order of the text."""

    def __init__(self, rng: Random) -> None:
        self.rng = rng
        count = rng.randint(2, 8)
        self.inputs = ["clk", "d[1]", "d[0]"]
        self.nets = [rng.choice((f"n{i}", f"w[{i}]", f"n+{i}")) for i in range(count)]
        self.gates: dict[str, Function] = {}
        self.modules = ""
        self.items = ""
        for net in self.nets:
            getattr(self, rng.choice(("primitive", "assignment", "wrapped", "cell")))(net)

    def text(self) -> str:
        scalars = [self.write(net) for net in self.nets if "[" not in net]
        wires = "".join(f"wire {name};\n" for name in scalars)
        head = "module gauge(input clk, input [1:0] d, output last);\n"
        last = f"assign last = {self.write(self.nets[-1])};\n"
        return f"{self.modules}{head}{wires}wire [0:9] w;\n{self.items}{last}endmodule\n"

    def write(self, net: str) -> str:
        return f"\\{net} " if "+" in net else net

    def sources(self, count: int) -> list[str]:
        return [self.rng.choice(self.inputs + self.nets) for _ in range(count)]

    def primitive(self, net: str) -> None:
        kind, sources = self.rng.choice(list(KINDS)), self.sources(self.rng.randint(1, 4))
        self.items += f"{kind} ({', '.join(map(self.write, [net, *sources]))});\n"
        self.gates[net] = lambda v: KINDS[kind]([v[s] for s in sources])

    def assignment(self, net: str) -> None:
        text, function = self.expression(self.rng.randint(1, 3))
        self.items += f"assign {self.write(net)} = {text};\n"
        self.gates[net] = function

    def expression(self, depth: int) -> tuple[str, Function]:
        if depth == 0:
            (source,) = self.sources(1)
            return self.write(source), lambda v: v[source]
        (a, f), (b, g), (c, h) = (self.expression(depth - 1) for _ in range(3))
        forms: list[tuple[str, Function]] = [
            (f"~({a})", lambda v: ONE ^ f(v)),
            (f"({a} & {b})", lambda v: f(v) & g(v)),
            (f"({a} || {b})", lambda v: f(v) | g(v)),
            (f"({a} ^ {b} ^ {c})", lambda v: f(v) ^ g(v) ^ h(v)),
            (f"({a} ? {b} : {c})", lambda v: f(v) & g(v) | ~f(v) & h(v)),
            (f"~&{{{a}, {b}, {c}}}", lambda v: ONE ^ (f(v) & g(v) & h(v))),
            (f"({{{a}, {b}}} == {{{c}, {a}}})", lambda v: ONE ^ ((f(v) ^ h(v)) | (g(v) ^ f(v)))),
        ]
        return self.rng.choice(forms)

    def wrapped(self, net: str) -> None:
        """A gate in modules of its own, one in another, with ports in any order."""
        kind, sources = self.rng.choice(list(KINDS)), self.sources(self.rng.randint(1, 3))
        ports = [f"p{i}" for i in range(len(sources))] + ["y"]
        name = f"m{len(self.gates)}"
        outside = [*sources, net]
        for level in range(self.rng.randint(1, 3)):
            order = self.rng.sample(range(len(ports)), len(ports))
            heads = ", ".join(("output " if ports[i] == "y" else "input ") + ports[i] for i in order)
            inner = f"{kind} (y, {', '.join(ports[:-1])});"
            if level:
                inner = f"{name}_{level - 1} u ({', '.join(f'.{p}({p})' for p in ports)});"
            self.modules += f"module {name}_{level}({heads}); {inner} endmodule\n"
        connections = ", ".join(self.write(outside[i]) for i in order)
        self.items += f"{name}_{level} u{len(self.gates)} ({connections});\n"
        self.gates[net] = lambda v: KINDS[kind]([v[s] for s in sources])

    def cell(self, net: str) -> None:
        kind, sources = self.rng.choice(list(CELL_KINDS)), self.sources(3)
        pins = [f".{pin}({self.write(s)})" for pin, s in zip("YABC", [net, *sources], strict=True)]
        self.rng.shuffle(pins)
        self.items += f"{kind} u{len(self.gates)} ({', '.join(pins)});\n"
        self.gates[net] = lambda v: CELL_KINDS[kind]([v[s] for s in sources])


@pytest.mark.parametrize("seed", range(120))
def test_a_random_netlist_reads_as_it_was_meant(seed: int) -> None:
    rng = Random(seed)
    design = Design(rng)
    netlist = read_text(design.text(), "gauge.v", cells=cells_of(CELLS, "cells.lib"))
    assert netlist.inputs == ("clk", "d[1]", "d[0]")
    assert [gate.name for gate in netlist.gates] == design.nets
    words = {name: rng.getrandbits(BITS) for name in design.inputs + design.nets}
    for gate in netlist.gates:
        assert set(support(gate.function)) <= set(words)
        assert evaluate([gate.function], words, ONE) == [design.gates[gate.name](words) & ONE]
    assert netlist.outputs == ("last",)
    assert evaluate([netlist.defined["last"]], words, ONE) == [words[design.nets[-1]]]
