"""Gate primitives, user-defined primitives and delays of Verilog (IEEE 1364-2005, clauses 7 and 8; recalled)."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from pyslang import ast

from settled.models.logic import Expr, and_, not_, or_, xor
from settled.models.netlist import Delay
from settled.models.problems import InputError, Problem
from settled.models.source import Span

MANY_INPUTS: dict[str, Callable[..., Expr]] = {
    "and": and_,
    "nand": lambda *pins: not_(and_(*pins)),
    "or": or_,
    "nor": lambda *pins: not_(or_(*pins)),
    "xor": xor,
    "xnor": lambda *pins: not_(xor(*pins)),
}
"""Gates with one output first and any number of inputs."""
MANY_OUTPUTS: dict[str, Callable[[Expr], Expr]] = {"buf": lambda pin: pin, "not": not_}
"""Gates with one input last and any number of outputs."""
TABLE_INPUTS = 10
"""How many inputs a user-defined primitive may have."""
GATES = "accepted: and, nand, or, nor, xor, xnor, buf, not and combinational primitives"
_OTHERS = {
    **dict.fromkeys(("bufif0", "bufif1", "notif0", "notif1"), "tri-state"),
    **dict.fromkeys(("pullup", "pulldown"), "pull"),
    **dict.fromkeys(("nmos", "pmos", "cmos", "rnmos", "rpmos", "rcmos"), "switch"),
    **dict.fromkeys(("tran", "tranif0", "tranif1", "rtran", "rtranif0", "rtranif1"), "switch"),
}
_COVERS = {"0": "0", "1": "1", "?": "01", "b": "01", "x": "", "X": "", "B": "01"}


def check_kind(kind: ast.PrimitiveSymbol, span: Span) -> None:
    """Raise `InputError` when a primitive is no gate: a function of its inputs."""
    if kind.name in MANY_INPUTS or kind.name in MANY_OUTPUTS:
        return
    if kind.name in _OTHERS:
        message = f"`{kind.name}` is no logic gate"
        raise InputError(Problem(_OTHERS[kind.name], message, span, "instance", help=GATES))
    if kind.isSequential:
        message = f"primitive `{kind.name}` holds a state"
        help = "write the latch as a gate loop, as an `assign` that reads its own output, or as a Liberty cell"
        raise InputError(Problem("sequential-udp", message, span, "instance", help=help))
    _check_table(kind, span)


def _check_table(kind: ast.PrimitiveSymbol, span: Span) -> None:
    """A table must say 0 or 1 for every vector of 0s and 1s."""
    inputs = len(kind.ports) - 1
    if inputs > TABLE_INPUTS:
        message = f"primitive `{kind.name}` has more than {TABLE_INPUTS} inputs"
        raise InputError(Problem("udp-table", message, span, "instance"))
    value: dict[str, str] = {}
    for row in kind.table:
        for vector in _vectors(row.inputs):
            value[vector] = row.output if value.get(vector, row.output) == row.output else "x"
    for number in range(2**inputs):
        vector = f"{number:0{inputs}b}"
        if value.get(vector, "x") not in "01":
            message = f"primitive `{kind.name}` has no output 0 or 1 for inputs {vector}"
            help = "give every vector of 0s and 1s one output in the table"
            raise InputError(Problem("udp-table", message, span, "instance", help=help))


def function(kind: ast.PrimitiveSymbol, pins: Sequence[Expr]) -> Expr:
    """What each output of a primitive that passed `check_kind` computes of its input pins."""
    if kind.name in MANY_INPUTS:
        return MANY_INPUTS[kind.name](*pins)
    if kind.name in MANY_OUTPUTS:
        return MANY_OUTPUTS[kind.name](*pins)
    rows = (row.inputs for row in kind.table if row.output == "1" and _vectors(row.inputs))
    return or_(*(_cube(row, pins) for row in rows))


def _vectors(row: str) -> list[str]:
    found = [""]
    for symbol in row:
        found = [vector + bit for vector in found for bit in _COVERS[symbol]]
    return found


def _cube(row: str, pins: Sequence[Expr]) -> Expr:
    chosen = ((symbol, pin) for symbol, pin in zip(row, pins, strict=True) if symbol in "01")
    return and_(*(pin if symbol == "1" else not_(pin) for symbol, pin in chosen))


def delay(control: ast.TimingControl, root: ast.Symbol, span: Span) -> tuple[Delay, bool]:
    """The bounds of `#(...)`, and whether each value is given as min:typ:max.

    The third value, the time to turn off, does not matter for gates. Raises `InputError`.
    """
    match control:
        case ast.Delay3Control():
            given = [e for e in (control.expr1, control.expr2) if e is not None]
        case ast.DelayControl():
            given = [control.expr]
        case _:
            raise InputError(Problem("delay", "this kind of delay is not accepted", span, help="write it as #(...)"))
    values = [_bounds(e, root, span) for e in given]
    exact = all(isinstance(e, ast.MinTypMaxExpression) for e in given)
    return Delay(values[0], values[-1]), exact


def _bounds(e: ast.Expression, root: ast.Symbol, span: Span) -> tuple[float, float]:
    ends = (e.min, e.max) if isinstance(e, ast.MinTypMaxExpression) else (e, e)
    low, high = (_number(end, root, span) for end in ends)
    if not 0 <= low <= high:
        message = f"a delay from {low:g} to {high:g} is not possible"
        raise InputError(Problem("delay", message, span, help="give times of at least 0, the smallest first"))
    return low, high


def _number(e: ast.Expression, root: ast.Symbol, span: Span) -> float:
    value = e.eval(ast.EvalContext(root)).value
    try:
        return float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError):
        raise InputError(Problem("delay", "a delay is not a constant number", span, help="give it in digits")) from None
