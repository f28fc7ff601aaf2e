"""Start states that no start state of the other side goes with, since none has the same inputs."""

from __future__ import annotations

from collections.abc import Sequence

from settled.models.environment import Environment
from settled.models.logic import FALSE, TRUE, Expr, and_, evaluate, not_, rename, var
from settled.verify.limits import Limits
from settled.verify.never import Never
from settled.verify.settled_states import Settled
from settled.verify.stable_states import start_conditions


def lonely_start(sides: Sequence[Settled], rules: Sequence[Environment], limits: Limits) -> int | None:
    """A packed start state of the first side without a partner on the second; None when all have one.

    Each partner found is a partner under all inputs that leave its cut as it is; those are not looked at again.
    """
    one, two = sides
    mine, theirs = (begins(side, environment) for side, environment in zip(sides, rules, strict=True))
    left, right = Never(mine, limits), Never(theirs, limits)
    while left.solve([]):
        values = left.model([*one.circuit.inputs, *one.cut])
        if not right.solve([right.literal(var(x), values[x]) for x in one.circuit.inputs]):
            bits = evaluate([one.value[s] for s in one.circuit.signals], values)
            return sum(bit << i for i, bit in enumerate(bits))
        partner = {k: TRUE if v else FALSE for k, v in right.model(two.cut).items()}
        left.require(not_(and_(*rename(theirs, partner))))
    return None


def begins(side: Settled, environment: Environment) -> list[Expr]:
    """What is true of inputs and cut in start states."""
    return [*side.conditions, *map(side.in_rest, start_conditions(side.circuit, environment))]
