"""Scripts in SMT-LIB 2.6 (Barrett, Fontaine and Tinelli 2017, "The SMT-LIB standard"; recalled) from expressions.

Names of nets may be unfit for SMT-LIB, so variables go by numbers and a comment says which is which.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from settled.models.logic import TRUE, Expr, topological

_WORD = {"not": "not", "and": "and", "or": "or", "xor": "xor", "ite": "ite"}


def script(assertions: Sequence[Expr], names: Mapping[str, str], comments: Sequence[str] = ()) -> str:
    """A script that asserts the expressions and asks whether they have a model; `names[v]` stands for `v`.

    Each shared sub-expression is defined once.
    """
    lines = [f"; {comment}" for comment in comments]
    lines += ["(set-info :smt-lib-version 2.6)", "(set-logic QF_UF)"]
    term: dict[Expr, str] = {}
    for e in topological(assertions):
        if e.op == "var":
            term[e] = names[e.name]
            lines.append(f"(declare-const {term[e]} Bool)")
        elif e.op == "const":
            term[e] = "true" if e is TRUE else "false"
        else:
            term[e] = f"t{len(term)}"
            body = " ".join([_WORD[e.op], *(term[a] for a in e.args)])
            lines.append(f"(define-fun {term[e]} () Bool ({body}))")
    lines += [f"(assert {term[e]})" for e in assertions]
    return "\n".join([*lines, "(check-sat)", "(exit)", ""])
