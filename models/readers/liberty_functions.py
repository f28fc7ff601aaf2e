"""Boolean expressions of a Liberty cell library, such as `"(A * B)' + !C"`.

Operators (Liberty reference manual, attribute `function`; recalled): `'` negates what stands before it and `!` what
stands after it; then bind `^`, then AND (`*`, `&` or mere juxtaposition), then OR (`+` or `|`). Constants are 0 and 1.
An operator-precedence parser (Floyd 1963, recalled) with explicit stacks.
"""

from __future__ import annotations

import re
from collections.abc import Collection
from dataclasses import dataclass, field
from typing import NoReturn

from settled.models.logic import FALSE, TRUE, Expr, not_, var
from settled.models.problems import InputError, Problem, nearest
from settled.models.readers.operators import both, differ, either
from settled.models.source import Span

_TOKEN = re.compile(
    r"""\s*(?:(?P<name>[A-Za-z_][\w$]*(?:\[\d+\])*|\\?"(?P<quoted>[^"\\]+)\\?")
    |(?P<constant>[01](?![\w$]))
    |(?P<after>')
    |(?P<before>!)
    |(?P<open>\()
    |(?P<close>\))
    |(?P<infix>[\^*&+|])
    |(?P<end>\Z))""",
    re.VERBOSE,
)
_STRENGTH = {"!": 4, "^": 3, "*": 2, "&": 2, "+": 1, "|": 1, "(": 0}
_BUILD = {"^": differ, "*": both, "&": both, "+": either, "|": either}
_STARTS = ("name", "constant", "before", "open")


@dataclass(frozen=True)
class Words:
    """The value of an attribute: its text, and where it stands."""

    text: str
    span: Span = field(compare=False)


@dataclass
class _Stacks:
    operators: list[str] = field(default_factory=list)
    values: list[Expr] = field(default_factory=list)

    def reduce(self, strength: int) -> None:
        """Apply the operators on the stack that bind at least as strongly."""
        while self.operators and _STRENGTH[self.operators[-1]] >= strength:
            sign = self.operators.pop()
            right = self.values.pop()
            self.values.append(not_(right) if sign == "!" else _BUILD[sign](self.values.pop(), right))


def parse(words: Words, known: Collection[str]) -> Expr:
    """The expression over the pins and states that `known` names. Raises `InputError`."""
    stacks, place, operand = _Stacks(), 0, False
    while True:
        token = _TOKEN.match(words.text, place)
        if token is None:
            _fail(words, place)
        kind = token.lastgroup or ""
        if not operand and kind in ("after", "close", "infix", "end"):
            _fail(words, token.start(kind))
        if operand and kind in _STARTS:
            stacks.reduce(_STRENGTH["*"])
            stacks.operators.append("*")
        if kind == "end":
            break
        _shift(stacks, words, token, kind, known)
        operand = kind in ("name", "constant", "after", "close")
        place = token.end()
    stacks.reduce(1)
    if stacks.operators:
        _fail(words, len(words.text))
    return stacks.values[0]


def _shift(stacks: _Stacks, words: Words, token: re.Match[str], kind: str, known: Collection[str]) -> None:
    text = token[kind]
    if kind == "name":
        name = token["quoted"] or text
        if name not in known:
            message = f"`{words.text}` names `{name}`, which is no pin or state of the cell"
            raise InputError(Problem("unknown-name", message, words.span, help=nearest(name, known)))
        stacks.values.append(var(name))
    elif kind == "constant":
        stacks.values.append(TRUE if text == "1" else FALSE)
    elif kind == "after":
        stacks.values.append(not_(stacks.values.pop()))
    elif kind in ("before", "open"):
        stacks.operators.append(text)
    elif kind == "infix":
        stacks.reduce(_STRENGTH[text])
        stacks.operators.append(text)
    else:
        stacks.reduce(1)
        if not stacks.operators:
            _fail(words, token.start(kind))
        stacks.operators.pop()


def _fail(words: Words, place: int) -> NoReturn:
    rest = words.text[place:].strip()
    found = f"`{rest[0]}`" if rest else "its end"
    message = f"the expression `{words.text}` cannot be read: unexpected {found} at character {place + 1}"
    help = "accepted: pins, 0, 1, ' after and ! before an operand, ^, * or &, + or |, parentheses"
    raise InputError(Problem("expression-syntax", message, words.span, help=help))
