"""Three-valued formulas say what the three-valued simulator says."""

from __future__ import annotations

from itertools import product
from random import Random

from random_circuits import condition, gate, product_sum, table

from settled.encodings.three_valued import Rails, join, known, rails, unknown
from settled.models.logic import FALSE, TRUE, Expr, const, evaluate, not_, or_, var
from settled.models.three_valued import Ternary

NAMES = "abc"
VALUES = {"0": (TRUE, FALSE), "1": (FALSE, TRUE), "x": (TRUE, TRUE)}


def random_expression(rng: Random) -> Expr:
    return rng.choice((gate, product_sum, condition, table))(rng, NAMES)


def test_formulas_are_the_simulators_values() -> None:
    rng = Random(1)
    for _ in range(200):
        e = random_expression(rng)
        simulated = Ternary([e])
        for values in product("01x", repeat=len(NAMES)):
            given: dict[str, Rails] = {n: VALUES[v] for n, v in zip(NAMES, values, strict=True)}
            (found,) = rails([e], given)
            numbers = {n: (int(a is TRUE), int(b is TRUE)) for n, (a, b) in given.items()}
            assert tuple(evaluate(found, {})) == simulated.run(numbers)[0], (e, values)


def test_known_operands_give_one_plain_expression() -> None:
    a, b = var("a"), var("b")
    assert rails([or_(a, b)], {"a": known(not_(a)), "b": known(b)}) == [known(or_(not_(a), b))]


def test_a_value_joined_with_its_inverse_is_unknown() -> None:
    joined = join(known(var("a")), known(not_(var("a"))))
    assert evaluate([unknown(joined), unknown(known(const(1)))], {"a": 0}) == [1, 0]
