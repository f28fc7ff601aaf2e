"""Names and expressions as IEEE 1364 text, whatever the names are."""

from __future__ import annotations

import re
from collections.abc import Container, Sequence

from settled.models.logic import Expr, to_text

_SIMPLE = re.compile(r"[A-Za-z_][A-Za-z0-9_$]*\Z")

# fmt: off
KEYWORDS = frozenset((
    "always", "and", "assign", "automatic", "begin", "buf", "bufif0", "bufif1", "case", "casex", "casez", "cell",
    "cmos", "config", "deassign", "default", "defparam", "design", "disable", "edge", "else", "end", "endcase",
    "endconfig", "endfunction", "endgenerate", "endmodule", "endprimitive", "endspecify", "endtable", "endtask",
    "event", "for", "force", "forever", "fork", "function", "generate", "genvar", "highz0", "highz1", "if", "ifnone",
    "incdir", "include", "initial", "inout", "input", "instance", "integer", "join", "large", "liblist", "library",
    "localparam", "macromodule", "medium", "module", "nand", "negedge", "nmos", "nor", "noshowcancelled", "not",
    "notif0", "notif1", "or", "output", "parameter", "pmos", "posedge", "primitive", "pull0", "pull1", "pulldown",
    "pullup", "pulsestyle_ondetect", "pulsestyle_onevent", "rcmos", "real", "realtime", "reg", "release", "repeat",
    "rnmos", "rpmos", "rtran", "rtranif0", "rtranif1", "scalared", "showcancelled", "signed", "small", "specify",
    "specparam", "strong0", "strong1", "supply0", "supply1", "table", "task", "time", "tran", "tranif0", "tranif1",
    "tri", "tri0", "tri1", "triand", "trior", "trireg", "unsigned", "use", "uwire", "vectored", "wait", "wand",
    "weak0", "weak1", "while", "wire", "wor", "xnor", "xor",
))
# fmt: on
"""The reserved words of IEEE 1364-2005 (recalled)."""


def identifier(name: str, scope: str = "") -> str:
    """`name` as an identifier, escaped where it must be, below the instance `scope` if one is given."""
    plain = _SIMPLE.match(name) and name not in KEYWORDS
    return (f"{scope}." if scope else "") + (name if plain else f"\\{unbroken(name)} ")


def expression(e: Expr, scope: str = "") -> str:
    """`e` in the operators of IEEE 1364; its constants are bits."""
    return to_text(e, lambda leaf: f"1'b{leaf.name}" if leaf.op == "const" else identifier(leaf.name, scope))


def bits(values: Sequence[int]) -> str:
    """A sized binary constant, the first value on the left."""
    return f"{len(values)}'b{''.join(map(str, values))}"


def fresh(name: str, taken: Container[str]) -> str:
    """`name`, with underscores behind it until it is not taken."""
    while name in taken:
        name += "_"
    return name


def comment(text: str) -> str:
    """`text` as one line of a comment, in ASCII."""
    return ("// " + " ".join(text.split())).encode("ascii", "backslashreplace").decode()


def unbroken(name: str) -> str:
    """`name` as one word: what an escaped identifier cannot hold, `?` and a first `$` come as `?` number `?`."""
    allowed = [("!" <= c <= "~" and c != "?") and not (c == "$" and i == 0) for i, c in enumerate(name)]
    return "".join(c if fits else f"?{ord(c):x}?" for c, fits in zip(name, allowed, strict=True))
