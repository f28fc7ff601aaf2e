"""Circuits with a size: the families that are measured and counted."""

from __future__ import annotations

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, and_, not_, or_, var


def c_element(a: Expr, b: Expr, own: Expr) -> Expr:
    """Follows its inputs where they agree, else holds (Muller's C-element)."""
    return or_(and_(a, b), and_(own, or_(a, b)))


def pipeline(stages: int, winners: str = "one") -> tuple[Circuit, Environment]:
    """Muller pipeline with an inverter in every stage and one-delay environments at both ends, from all stages 0.

    4 * 3**stages total states are reachable (enumerated up to 9 stages; the formula beyond).
    """
    excitation = {"left": not_(var("c1"))}
    for i in range(1, stages + 1):
        excitation[f"n{i}"] = not_(var(f"c{i + 1}" if i < stages else "right"))
    for i in range(1, stages + 1):
        before = var(f"c{i - 1}" if i > 1 else "left")
        excitation[f"c{i}"] = c_element(before, var(f"n{i}"), var(f"c{i}"))
    excitation["right"] = var(f"c{stages}")
    start = {n: int(n[0] == "n") for n in excitation}
    circuit = Circuit(f"pipeline of {stages}", (), tuple(excitation), excitation, ("right",), winners=winners)
    return circuit, Environment(mode="input-output", start=start)


def flip_flop(prefix: str, d: Expr, clk: Expr) -> dict[str, Expr]:
    """Six-NAND positive-edge D flip-flop (the core of the 7474); its outputs are `<prefix>q` and `<prefix>z`."""
    a, b, c, e, q, z = (var(prefix + n) for n in "abceqz")

    def nand(*args: Expr) -> Expr:
        return not_(and_(*args))

    return {
        prefix + "a": nand(e, b),
        prefix + "b": nand(a, clk),
        prefix + "c": nand(b, clk, e),
        prefix + "e": nand(c, d),
        prefix + "q": nand(b, z),
        prefix + "z": nand(c, q),
    }


def ripple_counter(stages: int) -> tuple[Circuit, Environment]:
    """Every flip-flop divides by two and clocks the next one with its inverted output; one input, fundamental mode."""
    excitation: dict[str, Expr] = {}
    clock = var("clk")
    for i in range(stages):
        excitation |= flip_flop(f"f{i}", var(f"f{i}z"), clock)
        clock = var(f"f{i}z")
    outputs = tuple(f"f{i}q" for i in range(stages))
    circuit = Circuit(f"ripple counter of {stages}", ("clk",), tuple(excitation), excitation, outputs)
    return circuit, Environment(start={"clk": 0} | dict.fromkeys(outputs, 0))


def latch_chain(length: int) -> tuple[Circuit, Environment]:
    """Level latches in a row, each with its own gate line and inverter, cured of the static hazard."""
    excitation: dict[str, Expr] = {}
    before: Expr = var("d")
    for i in range(length):
        gate, n, q = var(f"g{i}"), var(f"n{i}"), var(f"q{i}")
        excitation[f"n{i}"] = not_(gate)
        excitation[f"q{i}"] = or_(and_(before, gate), and_(q, n), and_(before, q))
        before = q
    inputs = ("d", *(f"g{i}" for i in range(length)))
    circuit = Circuit(f"chain of {length} latches", inputs, tuple(excitation), excitation, (f"q{length - 1}",))
    return circuit, Environment()
