"""Minimal two-level forms: equal to the expression, and no longer than they need be."""

from __future__ import annotations

from itertools import product

import pytest
from random_circuits import random_case

from settled.models.logic import FALSE, TRUE, Expr, and_, evaluate, not_, or_, support, to_text, var, xor
from settled.models.two_level import sum_of_products

A, B, C, D = map(var, "abcd")


@pytest.mark.parametrize(
    ("e", "text"),
    [
        (or_(and_(A, B), and_(not_(A), C), and_(B, C)), "a & b | c & ~a"),
        (not_(or_(not_(and_(A, B)), C)), "a & b & ~c"),
        (or_(A, and_(A, B)), "a"),
        (xor(A, B), "a & ~b | b & ~a"),
        (or_(A, not_(A)), "1"),
        (and_(A, B, not_(A)), "0"),
        (TRUE, "1"),
        (FALSE, "0"),
    ],
)
def test_forms_known_from_karnaugh_maps(e: Expr, text: str) -> None:
    found = sum_of_products(e)
    assert found is not None and to_text(found) == text


def test_random_excitations_keep_their_function() -> None:
    for seed in range(40):
        circuit, _ = random_case(f"two-level {seed}")
        for body in circuit.excitation.values():
            found = sum_of_products(body)
            assert found is not None
            names = support(body)
            for values in product((0, 1), repeat=len(names)):
                given = dict(zip(names, values, strict=True))
                assert evaluate([body], given) == evaluate([found], given), (seed, to_text(body))


def test_long_functions_are_left_alone() -> None:
    assert sum_of_products(and_(*(var(f"x{i}") for i in range(9)))) is None
