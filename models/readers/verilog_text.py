"""A first look at Verilog text: what the full parser must not be given, and which words the text uses.

The parser and elaborator behind `verilog_elaborate` recurse. Text that nests without bound, chains operators without
bound or multiplies itself through macros is turned down here, before it can exhaust a stack or the memory.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, field

from settled.models.problems import InputError, Problem
from settled.models.source import span_at

LEVELS = 1_000
"""How deep brackets, blocks and chains of `if` and `else` may nest, taken together."""
OPERATORS = 5_000
"""How many operators one statement may hold."""
EXPANSION = 10_000_000
"""How many characters the uses of macros may stand for, taken together."""
PROBLEMS = 100
"""How many problems of one file are told at once."""

_TOKEN = re.compile(
    r"""(?P<skip>//[^\n]*|/\*(?:.*?\*/|.*)|"(?:[^"\\\n]|\\.)*"|(?<!\()\*\)|\(\*(?!\s*\)))
    |(?P<escaped>\\\S+)
    |(?P<define>`define(?:[^\n\\]|\\.)*)
    |(?P<directive>`\w*)
    |(?P<word>[A-Za-z_$][\w$]*)
    |(?P<open>[([{])
    |(?P<close>[)\]}])
    |(?P<end>;)
    |(?P<comma>,)
    |(?P<colon>:)
    |(?P<operator>[&|^~!?+\-*/%<>.])""",
    re.DOTALL | re.VERBOSE,
)
_DEFINE = re.compile(r"`define\s+(\\\S+|\w+)(\()?(.*)", re.DOTALL)
_ENDS = {
    **dict.fromkeys(("case", "casex", "casez", "randcase"), "endcase"),
    **dict.fromkeys(("module", "macromodule"), "endmodule"),
    "begin": "end",
    "fork": "join",
    **{word: f"end{word}" for word in ("generate", "function", "task", "specify", "primitive", "table", "config")},
    **{word: f"end{word}" for word in ("interface", "program", "package", "class", "checker", "property", "sequence")},
}
_CLOSES = {*_ENDS.values(), "join_any", "join_none"}
_CHAINS = {"if", "else", "for", "foreach", "while", "repeat", "forever", "wait", "always", "initial", "do"}
_DIRECTIVES = {
    *("begin_keywords", "end_keywords", "celldefine", "endcelldefine", "default_nettype", "resetall", "timescale"),
    *("ifdef", "ifndef", "else", "elsif", "endif", "undef", "line", "pragma", "nounconnected_drive"),
    *("unconnected_drive", "default_decay_time", "default_trireg_strength", "undefineall"),
    *("delay_mode_distributed", "delay_mode_path", "delay_mode_unit", "delay_mode_zero", "__FILE__", "__LINE__"),
}


@dataclass
class _Scan:
    """How deep the text is at the present token, and how much the present statement holds."""

    file: str
    text: str
    level: int = 0
    floor: int = 0
    blocks: list[tuple[int, int]] = field(default_factory=list)
    brackets: int = 0
    operators: int = 0
    expansion: int = 0
    last: str = "end"
    words: set[str] = field(default_factory=set)
    macros: dict[str, list[str]] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)

    def problem(self, at: re.Match[str], code: str, message: str, spot: str, help: str) -> None:
        span = span_at(self.file, self.text, at.start(), at.end())
        self.problems.append(Problem(code, message, span, spot, help=help))


def scan(text: str, file: str) -> set[str]:
    """The identifiers and keywords of `text`, escaped ones without their backslash; raises `InputError`."""
    state = _Scan(file, text)
    for token in _TOKEN.finditer(text):
        _take(state, token)
        if state.level + state.brackets > LEVELS:
            message = f"the text nests deeper than the limit of {LEVELS:,} levels"
            state.problem(token, "too-deep", message, "one level too deep", "name inner parts as nets of their own")
            break
        if state.operators > OPERATORS:
            message = f"one statement holds more than the limit of {OPERATORS:,} operators"
            state.problem(token, "too-large", message, "one too many", "name parts of it as nets of their own")
            break
        if len(state.problems) == PROBLEMS:
            break
    if state.problems:
        raise InputError(state.problems)
    return state.words


def _take(state: _Scan, token: re.Match[str]) -> None:
    kind = token.lastgroup or ""
    if kind == "skip":
        return
    if kind == "word":
        kind = _word(state, token[0])
    elif kind == "escaped":
        state.words.add(token[0][1:])
    elif kind == "open":
        state.brackets += 1
        state.operators += token[0] == "["
    elif kind == "close":
        state.brackets = max(0, state.brackets - 1)
    elif kind == "operator":
        state.operators += token[0] != "." or state.last not in ("open", "comma")
    elif kind == "comma":
        state.operators = state.operators if state.brackets else 0
    elif kind == "end":
        state.brackets = state.operators = 0
    elif kind == "define":
        _define(state, token)
    elif kind == "directive":
        _directive(state, token)
    elif kind == "colon" and state.last == "closer":
        kind = "label"
    state.last = kind


def _word(state: _Scan, word: str) -> str:
    """Take a word and say what it is. Blocks nest; `if .. else if .. else ..` nests one level deeper at each link."""
    state.words.add(word)
    if state.last == "label":
        return "closer"
    if state.last in ("end", "closer") and word != "else":
        state.level = state.floor
    if word in _ENDS:
        state.blocks.append((state.floor, state.level))
        state.level += 1
        state.floor = state.level
    elif word in _CLOSES:
        state.floor, state.level = state.blocks.pop() if state.blocks else (0, 0)
        state.brackets = state.operators = 0
        return "closer"
    elif word in _CHAINS:
        state.level += 1
    return "word"


def _define(state: _Scan, token: re.Match[str]) -> None:
    """Note a macro; one with arguments or with macros inside could grow without bound."""
    parts = _DEFINE.match(token[0])
    if parts is None:
        return
    name, arguments, body = parts.groups()
    if arguments or "`" in body:
        message = f"macro `{name}` takes arguments or uses another macro"
        help = "accepted: macros without arguments whose text uses no macro"
        state.problem(token, "macro", message, "defined here", help)
        body = ""
    state.macros.setdefault(name, []).append(body)


def _directive(state: _Scan, token: re.Match[str]) -> None:
    """Expand a macro for counting; every text that its name was ever given counts."""
    name = token[0][1:]
    if name in state.macros:
        for body in state.macros[name]:
            state.expansion += len(body)
            for inner in _inner(body):
                _take(state, inner)
        if state.expansion > EXPANSION:
            message = f"the uses of macros stand for more than {EXPANSION:,} characters"
            state.problem(token, "too-large", message, "this use", "write the text out, or in modules")
            raise InputError(state.problems)
    elif name == "include":
        help = "put the modules into one file; cells may come from a Liberty file, see `library`"
        state.problem(token, "include", "`` `include`` is not accepted", "other file named here", help)
    elif name not in _DIRECTIVES:
        help = "accepted: macros defined in the same file, and the directives of IEEE 1364 except `` `include``"
        state.problem(token, "macro", f"`` `{name}`` is neither a macro nor a known directive", "used here", help)


def _inner(body: str) -> Iterator[re.Match[str]]:
    return (token for token in _TOKEN.finditer(body) if token.lastgroup != "define")
