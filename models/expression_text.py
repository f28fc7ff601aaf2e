"""Read Boolean expressions written in the operators of IEEE 1364 (clause 5.1: operators, their precedence; 3.7: names).

An operator-precedence parser (Floyd 1963, recalled) with an explicit stack: nothing recurses, so hostile nesting
ends in a diagnostic. Operands of one chain of equal operators come out as one n-ary expression.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import NamedTuple, NoReturn

from settled.models.logic import FALSE, STABLE, TRUE, Expr, and_, excited, ite, not_, or_, var, xor
from settled.models.problems import InputError, Problem
from settled.models.source import Span

LEVELS = 1_000
"""How deep parentheses, negations and conditionals may nest in one expression."""


class NameAt(NamedTuple):
    """A name that an expression reads, and where: `text[start:end]`. `node`: it stands inside `excited(...)`."""

    name: str
    start: int
    end: int
    node: bool


class Parsed(NamedTuple):
    """An expression and the names in it in the order of the text, repeated as often as they stand there."""

    expr: Expr
    names: tuple[NameAt, ...]


class _Token(NamedTuple):
    kind: str
    text: str
    start: int
    end: int


_PART = (
    r"(?:[A-Za-z_][A-Za-z0-9_$]*|\\[^ \t\n\r\f]+(?:[ \t\n\r\f]|\Z))(?:[ \t\n\r\f]*\[[ \t\n\r\f]*[0-9]+[ \t\n\r\f]*\])*"
)
_TOKEN = re.compile(
    rf"(?P<name>{_PART}(?:[ \t\n\r\f]*\.[ \t\n\r\f]*{_PART})*)"
    r"|(?P<number>[0-9][0-9A-Za-z_']*)"
    r"|(?P<sign>&&|\|\||~\^|\^~|[~!&|^?:()])"
    r"|(?P<other>[^ \t\n\r\f])",
    re.DOTALL,
)
_UNESCAPE = re.compile(r"\\([^ \t\n\r\f]+)(?:[ \t\n\r\f]|\Z)|[ \t\n\r\f]+")
_CONSTANT = {"0": FALSE, "1": TRUE, "1'b0": FALSE, "1'b1": TRUE, "1'B0": FALSE, "1'B1": TRUE}
_STRENGTH = {"&": 5, "^": 4, "|": 3, "&&": 2, "||": 1, ":": 0}
_BUILD = {"&": and_, "&&": and_, "|": or_, "||": or_, "^": xor}
_NESTING = {"(", "~", "?", ":"}
_CURE = {
    **dict.fromkeys(("and", "AND", "*"), "AND is written `&`"),
    **dict.fromkeys(("or", "OR", "+"), "OR is written `|`"),
    **dict.fromkeys(("xor", "XOR"), "exclusive OR is written `^`"),
    **dict.fromkeys(("not", "NOT", "'", "/", "-"), "NOT is written `~` before its operand"),
    "=": "equality is written `a ~^ b`, inequality `a ^ b`",
}


def parse(text: str, *, span_of: Callable[[int, int], Span], state_words: bool) -> Parsed:
    """Read one expression; `state_words` admits `stable` and `excited(node)`.

    `span_of(start, end)` says where a stretch of `text` stands in the user's file. Raises `InputError` with one
    problem of code `expression-syntax` or `too-deep` at the first place that cannot be read.
    """
    return _Parser(text, span_of, state_words).parse()


def _tokens(text: str) -> list[_Token]:
    found = [_Token(m.lastgroup or "", m[0], m.start(), m.end()) for m in _TOKEN.finditer(text)]
    end = len(text.rstrip(" \t\n\r\f"))
    return [*found, _Token("end", "", end, end + 1)]


def _name(token: _Token) -> str:
    """The name without backslashes and white space."""
    return _UNESCAPE.sub(lambda m: m[1] or "", token.text)


def _quoted(token: _Token) -> str:
    if token.kind == "end":
        return "the end of the expression"
    text = token.text.rstrip(" \t\n\r\f")
    return f"`{text if len(text) <= 60 else text[:60] + '...'}`"


class _Parser:
    """`operators` holds what waits for its right side; `opened` the nesting ones among them, with their tokens."""

    def __init__(self, text: str, span_of: Callable[[int, int], Span], state_words: bool) -> None:
        self.span_of, self.state_words = span_of, state_words
        self.tokens = _tokens(text)
        self.at = 0
        self.operands: list[Expr] = []
        self.operators: list[str] = []
        self.opened: list[_Token] = []
        self.names: list[NameAt] = []

    def parse(self) -> Parsed:
        while True:
            self.operand()
            while self.tokens[self.at].text == ")":
                self.close_parenthesis()
            token = self.next()
            if token.kind == "end":
                break
            self.operator(token)
        self.reduce(-1)
        if self.operators:
            self.unclosed(token)
        return Parsed(self.operands[0], tuple(self.names))

    def next(self) -> _Token:
        self.at += 1
        return self.tokens[self.at - 1]

    def push(self, sign: str, token: _Token) -> None:
        if sign in _NESTING:
            self.opened.append(token)
            if len(self.opened) > LEVELS:
                message = f"the expression nests deeper than {LEVELS:,} levels"
                help = "name a part of it in `[circuit.define]`"
                raise InputError(
                    Problem("too-deep", message, self.span(token), f"level {LEVELS + 1:,} begins here", help=help)
                )
        self.operators.append(sign)

    def pop(self) -> str:
        sign = self.operators.pop()
        if sign in _NESTING:
            self.opened.pop()
        return sign

    # ---- what an operand may be ----

    def operand(self) -> None:
        """Read prefix signs and opening parentheses up to and including one constant, name or state word."""
        token = self.next()
        while token.text in ("~", "!", "("):
            self.push("(" if token.text == "(" else "~", token)
            token = self.next()
        if token.text in _CONSTANT:
            self.operands.append(_CONSTANT[token.text])
        elif token.text in ("stable", "excited"):
            self.operands.append(self.state_word(token))
        elif token.kind == "name":
            self.operands.append(var(self.name(token, node=False)))
        else:
            cure = "the constants are `0`, `1`, `1'b0` and `1'b1`" if token.kind == "number" else ""
            self.fail("an expression" if self.at == 1 else "an operand", token, cure)
        self.negate()

    def name(self, token: _Token, node: bool) -> str:
        name = _name(token)
        self.names.append(NameAt(name, token.start, token.start + len(token.text.rstrip(" \t\n\r\f")), node))
        return name

    def state_word(self, token: _Token) -> Expr:
        if not self.state_words:
            message = f"`{token.text}` has no meaning here"
            help = f"only `expr`, `from` and `to` of a property read it; a signal of that name is `\\{token.text} `"
            raise InputError(Problem("expression-syntax", message, self.span(token), "a reserved word", help=help))
        if token.text == "stable":
            return STABLE
        for wanted, fits in (("`(`", "("), ("the name of a node", "name"), ("`)`", ")")):
            found = self.next()
            if fits not in (found.kind, found.text):
                self.fail(wanted, found)
        return excited(self.name(self.tokens[self.at - 2], node=True))

    # ---- what may follow an operand ----

    def negate(self) -> None:
        while self.operators and self.operators[-1] == "~":
            self.pop()
            self.operands.append(not_(self.operands.pop()))

    def operator(self, token: _Token) -> None:
        if token.text in ("~^", "^~"):
            self.reduce(_STRENGTH["^"])
            self.operators += ["^", "^"]
            self.operands.append(TRUE)
        elif token.text in _BUILD:
            self.reduce(_STRENGTH[token.text])
            self.push(token.text, token)
        elif token.text == "?":
            self.reduce(0)
            self.push("?", token)
        elif token.text == ":":
            self.colon(token)
        else:
            self.fail("an operator", token)

    def colon(self, token: _Token) -> None:
        self.reduce(-1)
        if not self.operators:
            self.fail("an operator", token, "a `:` belongs to a `?` before it")
        if self.operators[-1] == "(":
            self.unclosed(token)
        self.pop()
        self.push(":", token)

    def close_parenthesis(self) -> None:
        token = self.next()
        self.reduce(-1)
        if not self.operators:
            self.fail("an operator", token, "there is no open parenthesis")
        if self.operators[-1] == "?":
            self.unclosed(token)
        self.pop()
        self.negate()

    def reduce(self, strength: int) -> None:
        """Build every waiting operator that binds stronger than `strength`, up to the last opening one."""
        while self.operators and _STRENGTH.get(self.operators[-1], -1) > strength:
            sign = self.pop()
            if sign == ":":
                parts = self.take(3)
                self.operands.append(ite(*parts))
                continue
            count = 2
            while self.operators and self.operators[-1] == sign:
                self.pop()
                count += 1
            self.operands.append(_BUILD[sign](*self.take(count)))

    def take(self, count: int) -> list[Expr]:
        parts = self.operands[-count:]
        del self.operands[-count:]
        return parts

    # ---- diagnostics ----

    def span(self, token: _Token) -> Span:
        return self.span_of(token.start, token.start + max(1, len(token.text.rstrip(" \t\n\r\f"))))

    def unclosed(self, found: _Token) -> NoReturn:
        opening = self.opened[-1]
        place = self.span(opening)
        note = f"the `{opening.text}` stands at line {place.line}, column {place.column}"
        self.fail("`)`" if opening.text == "(" else "`:`", found, note=note)

    def fail(self, wanted: str, found: _Token, cure: str = "", note: str = "") -> NoReturn:
        before = self.tokens[self.tokens.index(found) - 1] if found is not self.tokens[0] else None
        after = f" after {_quoted(before)}" if before else ""
        seen = _quoted(found) if before or found.text else "an empty text"
        cure = cure or _CURE.get(found.text) or (_CURE.get(before.text, "") if before else "")
        problem = Problem(
            "expression-syntax",
            f"expected {wanted}{after}, found {seen}",
            self.span(found),
            f"expected {wanted} here",
            (note,) if note else (),
            cure,
        )
        raise InputError(problem)
