"""Machines with one behaviour and different state codes: two latches a state bit, open in turn, and logic between."""

from __future__ import annotations

from collections.abc import Sequence
from random import Random

from refactored import INPUTS

from settled.models.circuit import Circuit
from settled.models.logic import Expr, and_, not_, or_, var, xor

DATA = ("level", "rain")
"""What the controller looks at, beside `reset` and the two phases."""


def controller(code: Sequence[int], name: str, seed: int = 0) -> Circuit:
    """A machine with a state for each code word; `code[i]`: the bits of state i, that of state 0 all zero.

    Next states and outputs are random functions of state and data, the same for the same seed and number of states.
    Every gate is a node: latches, a product for each pair of a state and a vector of data, sums.
    """
    rng = Random(f"controller {len(code)} {seed}")
    cases = [(state, vector) for state in range(len(code)) for vector in range(1 << len(DATA))]
    table = {case: (rng.randrange(len(code)), rng.getrandbits(2)) for case in cases}
    bits = max(code).bit_length()
    gates: dict[str, Expr] = {}
    for state, vector in cases:
        held = [_literal(f"q{b}", code[state] >> b & 1) for b in range(bits)]
        gates[f"t{state}_{vector}"] = and_(*held, *(_literal(x, vector >> i & 1) for i, x in enumerate(DATA)))
    for b in range(bits):
        gates[f"next{b}"] = or_(*(var(f"t{s}_{v}") for s, v in cases if code[table[s, v][0]] >> b & 1))
        gates[f"m{b}"] = _latch(f"m{b}", var(f"next{b}"), var("sample"))
        gates[f"q{b}"] = _latch(f"q{b}", var(f"m{b}"), var("commit"))
    for i, output in enumerate(("pump", "alarm")):
        gates[output] = or_(*(var(f"t{s}_{v}") for s, v in cases if table[s, v][1] >> i & 1))
    return Circuit(name, (*INPUTS, *DATA), tuple(gates), gates, ("pump", "alarm"), delay="gate")


def counter(bits: int, gray: bool, name: str) -> Circuit:
    """Counts `commit` pulses while `level` is high, in binary or in Gray code; every gate is a node.

    `wrap`: all ones; `late`: the upper half.
    """
    gates: dict[str, Expr] = {}
    word = [var(f"q{i}") for i in range(bits)]
    for i in reversed(range(bits - 1) if gray else ()):
        gates[f"b{i}"] = xor(word[i], word[i + 1])
        word[i] = var(f"b{i}")
    carry = var("level")
    for i in range(bits):
        gates[f"s{i}"] = xor(word[i], carry)
        gates[f"c{i}"] = and_(word[i], carry)
        carry = var(f"c{i}")
    for i in range(bits):
        data = var(f"s{i}")
        if gray and i < bits - 1:
            gates[f"n{i}"] = xor(data, var(f"s{i + 1}"))
            data = var(f"n{i}")
        gates[f"m{i}"] = _latch(f"m{i}", data, var("sample"))
        gates[f"q{i}"] = _latch(f"q{i}", var(f"m{i}"), var("commit"))
    gates |= {"wrap": and_(*word), "late": word[-1]}
    return Circuit(name, (*INPUTS, "level"), tuple(gates), gates, ("wrap", "late"), delay="gate")


def _literal(name: str, value: int) -> Expr:
    return var(name) if value else not_(var(name))


def _latch(own: str, data: Expr, enable: Expr) -> Expr:
    return and_(not_(var("reset")), or_(and_(data, enable), and_(var(own), not_(enable)), and_(data, var(own))))
