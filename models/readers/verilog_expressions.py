"""Elaborated Verilog expressions, bit by bit.

An expression becomes its bits from the left (most significant) to the right, each as a Boolean expression over net
names, with the widening and narrowing that IEEE 1364-2005 (clause 5.4) gives to operands. A bit is *plain* when no
operator made it: it is a net, or a constant. Operators over constants alone give constants.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import NamedTuple, NoReturn

import pyslang
from pyslang import ast

from settled.models.logic import FALSE, TRUE, Expr, and_, const, ite, not_, or_, var, xor
from settled.models.problems import InputError, Problem
from settled.models.readers.operators import both, differ, either
from settled.models.readers.verilog_elaborate import Text

WIDTH = 100_000
"""How many bits an expression may have."""
WORK = 5_000_000
"""How many bits all expressions of a design may have, their parts included."""
ACCEPTED = "accepted: ~ ! & && | || ^ ~^ ?: == !=, reductions, concatenations, replications and constant selects"


class Bit(NamedTuple):
    """One bit of an expression: its function of nets, and whether it is a net or a constant without an operator."""

    value: Expr
    plain: bool


Bits = list[Bit]
_Select = ast.ElementSelectExpression | ast.RangeSelectExpression
_SELECTS = (ast.ElementSelectExpression, ast.RangeSelectExpression)


def _any(bits: Bits) -> Expr:
    return or_(*(b.value for b in bits))


def _all(bits: Bits) -> Expr:
    return and_(*(b.value for b in bits))


def _parity(bits: Bits) -> Expr:
    return xor(*(b.value for b in bits))


_REDUCTIONS: dict[str, Callable[[Bits], Expr]] = {
    "LogicalNot": lambda bits: not_(_any(bits)),
    "BitwiseAnd": _all,
    "BitwiseOr": _any,
    "BitwiseXor": _parity,
    "BitwiseNand": lambda bits: not_(_all(bits)),
    "BitwiseNor": lambda bits: not_(_any(bits)),
    "BitwiseXnor": lambda bits: not_(_parity(bits)),
}
_BITWISE: dict[str, Callable[[Expr, Expr], Expr]] = {
    "BinaryAnd": both,
    "BinaryOr": either,
    "BinaryXor": differ,
    "BinaryXnor": lambda a, b: not_(differ(a, b)),
}
_LOGICAL: dict[str, Callable[[Bits, Bits], Expr]] = {
    "LogicalAnd": lambda a, b: both(_any(a), _any(b)),
    "LogicalOr": lambda a, b: either(_any(a), _any(b)),
    "Equality": lambda a, b: and_(*(not_(xor(x.value, y.value)) for x, y in zip(a, b, strict=True))),
    "Inequality": lambda a, b: or_(*(xor(x.value, y.value) for x, y in zip(a, b, strict=True))),
}


class Expressions:
    """Reads expressions over `nets`: for each net symbol the names of its bits from the left."""

    def __init__(self, nets: Mapping[ast.Symbol, list[str]], text: Text, root: ast.Symbol) -> None:
        self.nets = nets
        self.text = text
        self._made = 0
        self._context = ast.EvalContext(root)

    def bits(self, root: ast.Expression) -> Bits:
        """The bits of an expression. Raises `InputError`, without a problem where the elaborator has one."""
        todo = [root]
        order: list[tuple[ast.Expression, int, Bits | None]] = []
        while todo:
            e = todo.pop()
            self._check(e)
            wires = self._wires(e)
            operands = self._operands(e) if wires is None else []
            order.append((e, len(operands), wires))
            todo += operands
        values: list[Bits] = []
        for e, count, wires in reversed(order):
            start = len(values) - count
            arguments = values[start:]
            del values[start:]
            values.append(self._combine(e, arguments) if wires is None else wires)
            self._made += len(values[-1])
            if self._made > WORK:
                message = f"the expressions hold more than {WORK:,} bits, taken together"
                raise InputError(Problem("too-large", message, self.text.of(e), help="divide the netlist"))
        return values[0]

    def target(self, e: ast.Expression) -> list[str]:
        """The names of the bits that an assignment to `e` drives."""
        names = []
        for bit in self.bits(e):
            if not bit.plain or bit.value.op != "var":
                self._fail("expression", f"`{self.text.words(e)}` cannot be driven", e, "accepted: nets and their bits")
            names.append(bit.value.name)
        return names

    def _check(self, e: ast.Expression) -> None:
        if e.bad:
            raise InputError(())
        if e.type.bitstreamWidth > WIDTH:
            self._fail("too-large", f"an expression has more than {WIDTH:,} bits", e, "divide it")

    def _wires(self, e: ast.Expression) -> Bits | None:
        """The bits of a net, or of selects of a net; `None` for other expressions."""
        selects: list[_Select] = []
        while isinstance(e, _SELECTS):
            selects.append(e)
            e = e.value
        if not isinstance(e, ast.ValueExpressionBase) or e.symbol not in self.nets:
            return None
        names = self.nets[e.symbol]
        start, stop = 0, len(names)
        for select in reversed(selects):
            start, stop = self._part(select, start, stop)
        return [Bit(var(name), True) for name in names[start:stop]]

    def _operands(self, e: ast.Expression) -> list[ast.Expression]:
        match e:
            case ast.UnaryExpression() | ast.ConversionExpression():
                return [e.operand]
            case ast.BinaryExpression() if e.op.name in _BITWISE or e.op.name in _LOGICAL:
                return [e.left, e.right]
            case ast.ConditionalExpression():
                return [*(c.expr for c in e.conditions), e.left, e.right]
            case ast.ConcatenationExpression():
                return list(e.operands)
            case ast.ReplicationExpression():
                return [e.concat]
            case ast.ElementSelectExpression() | ast.RangeSelectExpression():
                return [e.value]
        return []

    def _combine(self, e: ast.Expression, args: list[Bits]) -> Bits:
        match e:
            case ast.ConcatenationExpression():
                return [bit for part in args for bit in part]
            case ast.ReplicationExpression():
                return args[0] * self._number(e.count)
            case ast.ElementSelectExpression() | ast.RangeSelectExpression():
                start, stop = self._part(e, 0, len(args[0]))
                return args[0][start:stop]
            case ast.ConversionExpression() if e.type.isIntegral:
                return self._convert(e, args[0])
            case ast.UnaryExpression():
                return self._unary(e, args[0])
            case ast.BinaryExpression() if args:
                return self._binary(e, *args)
            case ast.ConditionalExpression() if len(args) == 3:
                return self._conditional(*args)
        return self._constant(e)

    def _convert(self, e: ast.ConversionExpression, bits: Bits) -> Bits:
        width = e.type.bitWidth
        if len(bits) >= width:
            return bits[len(bits) - width :]
        fill = bits[0] if e.operand.type.isSigned and bits else Bit(FALSE, True)
        return [fill] * (width - len(bits)) + bits

    def _unary(self, e: ast.UnaryExpression, bits: Bits) -> Bits:
        constant = _constant(bits)
        if e.op.name == "BitwiseNot":
            return [Bit(not_(b.value), constant) for b in bits]
        if e.op.name in _REDUCTIONS:
            return [Bit(_REDUCTIONS[e.op.name](bits), constant)]
        return self._constant(e)

    def _binary(self, e: ast.BinaryExpression, a: Bits, b: Bits) -> Bits:
        constant = _constant(a) and _constant(b)
        if e.op.name in _LOGICAL:
            return [Bit(_LOGICAL[e.op.name](a, b), constant)]
        operator = _BITWISE[e.op.name]
        return [Bit(operator(x.value, y.value), constant) for x, y in zip(a, b, strict=True)]

    def _conditional(self, condition: Bits, then: Bits, otherwise: Bits) -> Bits:
        choice = _any(condition)
        if _constant(condition):
            return then if choice is TRUE else otherwise
        return [Bit(ite(choice, x.value, y.value), False) for x, y in zip(then, otherwise, strict=True)]

    def _part(self, e: _Select, start: int, stop: int) -> tuple[int, int]:
        """Where the bits of a select stand, when those that it selects from stand from `start` to `stop`."""
        area = e.value.type.fixedRange
        if isinstance(e, ast.ElementSelectExpression):
            at = e.selector
            left = right = self._number(at)
        else:
            at = e.left
            left, right = self._ends(e, area.isDescending)
        if not (area.containsPoint(left) and area.containsPoint(right)):
            message = f"`{self.text.words(e)}` selects bits that do not exist"
            self._fail("index-out-of-range", message, at, "select bits that the net has")
        each = (stop - start) // area.width
        return start + abs(left - area.left) * each, start + (abs(right - area.left) + 1) * each

    def _ends(self, e: ast.RangeSelectExpression, descending: bool) -> tuple[int, int]:
        left, right = self._number(e.left), self._number(e.right)
        if e.selectionKind == ast.RangeSelectionKind.Simple:
            return left, right
        up = e.selectionKind == ast.RangeSelectionKind.IndexedUp
        low, high = (left, left + right - 1) if up else (left - right + 1, left)
        return (high, low) if descending else (low, high)

    def _number(self, e: ast.Expression) -> int:
        value = e.eval(self._context).value
        if not isinstance(value, pyslang.SVInt) or value.hasUnknown:
            self._fail("expression", f"`{self.text.words(e)}` is not a constant number", e, ACCEPTED)
        return int(value)

    def _constant(self, e: ast.Expression) -> Bits:
        """An expression that reads no net, from the elaborator's own arithmetic."""
        value = e.eval(self._context).value
        if not isinstance(value, pyslang.SVInt):
            self._refuse(e)
        if value.hasUnknown:
            help = "accepted: the values 0 and 1"
            self._fail("literal", f"`{self.text.words(e)}` has the value x or z", e, help)
        number, width = int(value), value.bitWidth
        return [Bit(const(number >> place & 1), True) for place in reversed(range(width))]

    def _refuse(self, e: ast.Expression) -> NoReturn:
        what = f"`{self.text.words(e)}`"
        if isinstance(e, (ast.UnaryExpression, ast.BinaryExpression)):
            what = f"operator `{_SIGNS.get(e.op.name, e.op.name)}` in {what}"
        self._fail("operator", f"{what} is not a function of gates", e, ACCEPTED)

    def _fail(self, code: str, message: str, e: ast.Expression, help: str) -> NoReturn:
        raise InputError(Problem(code, message, self.text.of(e), help=help))


_SIGNS = {
    **{"Add": "+", "Subtract": "-", "Multiply": "*", "Divide": "/", "Mod": "%", "Power": "**", "Plus": "+"},
    **{"Minus": "-", "CaseEquality": "===", "CaseInequality": "!==", "GreaterThan": ">", "LessThan": "<"},
    **{"GreaterThanEqual": ">=", "LessThanEqual": "<=", "LogicalShiftLeft": "<<", "LogicalShiftRight": ">>"},
    **{"ArithmeticShiftLeft": "<<<", "ArithmeticShiftRight": ">>>", "LogicalImplication": "->"},
    **{"LogicalEquivalence": "<->", "WildcardEquality": "==?", "WildcardInequality": "!=?"},
}


def _constant(bits: Bits) -> bool:
    return all(b.value.op == "const" and b.plain for b in bits)
