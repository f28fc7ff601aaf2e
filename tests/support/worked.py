"""Small circuits that are worked by hand in the tests, and the means to write them down."""

from __future__ import annotations

from oracle_world import State

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.expression_text import parse
from settled.models.logic import Expr
from settled.models.source import Span


def expression(text: str) -> Expr:
    return parse(text, span_of=lambda start, end: Span("test", 1, start + 1), state_words=True).expr


def circuit(inputs: str, outputs: str = "", winners: str = "any", **excitation: str) -> Circuit:
    functions = {n: expression(e) for n, e in excitation.items()}
    return Circuit(
        "worked", tuple(inputs.split()), tuple(functions), functions, tuple(outputs.split()), winners=winners
    )


def on(names: str) -> State:
    return frozenset(names.split())


def states(*names: str) -> list[State]:
    return [on(n) for n in names]


SINGLE, TOGETHER, BURST = (Environment(changes=c) for c in ("single", "simultaneous", "burst"))
NOR_LATCH = circuit("s r", "q", q="~(r | p)", p="~(s | q)")
RING = circuit("en", "y", y="en & ~y")
C_ELEMENT = circuit("a b", "c", c="a & b | c & (a | b)")
MULTIPLEXER = circuit("a b s", "z", n="~s", g="a & s", h="b & n", z="g | h")
CURED = circuit("a b s", "z", n="~s", g="a & s", h="b & n", k="a & b", z="g | h | k")
DIVIDER = circuit("x", "q", p="x ? ~q : p", q="x ? q : p")
FOLLOWER = circuit("d g", "q", q="g ? d : q")
