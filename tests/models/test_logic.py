"""Expressions: sharing, evaluation without recursion, text, pickling."""

from __future__ import annotations

import pickle

import pytest

from settled.models.logic import (
    FALSE,
    STABLE,
    TRUE,
    Expr,
    and_,
    evaluate,
    excited,
    ite,
    not_,
    or_,
    rename,
    support,
    to_text,
    topological,
    var,
    xor,
)

A, B, C = var("a"), var("b"), var("c")
VECTORS = [(a, b, c) for a in (0, 1) for b in (0, 1) for c in (0, 1)]


def table(e: Expr) -> list[int]:
    return [evaluate([e], dict(zip("abc", v, strict=True)))[0] for v in VECTORS]


def test_equal_expressions_are_the_same_object() -> None:
    assert and_(A, not_(B)) is and_(A, not_(B))
    assert and_(A, B) is not and_(B, A)


@pytest.mark.parametrize(
    ("e", "expected"),
    [
        (and_(A, TRUE), A),
        (and_(A, FALSE), FALSE),
        (or_(A, FALSE), A),
        (or_(A, TRUE), TRUE),
        (and_(), TRUE),
        (or_(), FALSE),
        (xor(), FALSE),
        (xor(A, TRUE), not_(A)),
        (xor(A, TRUE, TRUE), A),
        (not_(not_(A)), A),
        (ite(TRUE, A, B), A),
        (ite(C, A, A), A),
    ],
)
def test_constants_disappear(e: Expr, expected: Expr) -> None:
    assert e is expected


def test_operators_mean_what_they_say() -> None:
    assert table(and_(A, B, C)) == [int(a and b and c) for a, b, c in VECTORS]
    assert table(or_(A, B, C)) == [int(a or b or c) for a, b, c in VECTORS]
    assert table(xor(A, B, C)) == [(a + b + c) % 2 for a, b, c in VECTORS]
    assert table(ite(A, B, C)) == [b if a else c for a, b, c in VECTORS]
    assert table(not_(A)) == [1 - a for a, _, _ in VECTORS]


def test_words_are_evaluated_bit_by_bit() -> None:
    words = {"a": 0b11110000, "b": 0b11001100, "c": 0b10101010}
    word = evaluate([ite(A, xor(B, C), not_(or_(B, C)))], words, 0xFF)[0]
    singles = table(ite(A, xor(B, C), not_(or_(B, C))))
    assert [word >> i & 1 for i in range(8)] == singles


def test_a_long_chain_needs_no_recursion() -> None:
    e = A
    for _ in range(20_000):
        e = not_(and_(e, B))
    assert evaluate([e], {"a": 1, "b": 0}) == [1]
    assert support(e) == ["a", "b"]
    assert pickle.loads(pickle.dumps(e)) is e


def test_shared_parts_are_visited_once() -> None:
    e = A
    for _ in range(60):
        e = xor(e, and_(e, B))
    assert len(list(topological([e]))) == 122


@pytest.mark.parametrize(
    ("e", "text"),
    [
        (or_(and_(A, B), C), "a & b | c"),
        (and_(or_(A, B), C), "(a | b) & c"),
        (not_(and_(A, B)), "~(a & b)"),
        (xor(A, or_(B, C)), "a ^ (b | c)"),
        (ite(A, B, ite(B, C, A)), "a ? b : (b ? c : a)"),
        (and_(STABLE, excited("q")), "stable & excited(q)"),
        (var("u1.d[3]"), "u1.d[3]"),
        (and_(var("bus+1"), A), "\\bus+1  & a"),
        (var("stable"), "\\stable "),
    ],
)
def test_text_has_the_fewest_parentheses(e: Expr, text: str) -> None:
    assert to_text(e) == text


def test_renaming_reaches_every_leaf() -> None:
    assert rename([and_(A, not_(B))], {"a": C, "b": TRUE}) == [FALSE]
    assert rename([or_(A, B)], {"a": not_(A)}) == [or_(not_(A), B)]


def test_words_about_a_circuit_must_be_resolved() -> None:
    with pytest.raises(ValueError, match="resolved"):
        evaluate([STABLE], {})
