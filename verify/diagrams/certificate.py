"""The reached set as a certificate: z3 confirms that it is inductive, against two copies of the state."""

from __future__ import annotations

from settled.encodings.moves import begins, moves
from settled.encodings.smtlib import script
from settled.encodings.system import after
from settled.models.logic import Expr, and_, not_, rename, var
from settled.verify.diagrams.manager import Set
from settled.verify.diagrams.world import World
from settled.verify.symbolic.certificates import CertificateFailed, impossible


def confirmed(world: World, reached: Set, bad: Expr | None = None) -> dict[str, str]:
    """The scripts that the reached set is inductive and excludes `bad`, by name. Raises `CertificateFailed`, and
    `LimitReached` when time is up.

    In burst mode the set holds, beside the reachable states, states of rest with a burst that is picked.
    """
    written = scripts(world, world.diagrams.expression(reached), bad)
    for name, text in written.items():
        if not impossible(text, world.limits):
            raise CertificateFailed(f"the statement `{name}` of the reached set does not hold")
    return written


def scripts(world: World, inside: Expr, bad: Expr | None = None) -> dict[str, str]:
    """Scripts that must answer `unsat`: a start state outside a set; a move out of it; a bad state in it."""
    circuit, environment, variables = world.circuit, world.environment, world.diagrams.variables
    names = {v: f"n{i}" for i, v in enumerate(variables)}
    (outside,) = rename([not_(inside)], {v: var(after(v)) for v in variables})
    parts = {
        "start": (and_(begins(circuit, environment), not_(inside)), "every start state is in the reached set"),
        "step": (and_(inside, moves(circuit, environment), outside), "no move leads out of the reached set"),
    }
    if bad is not None:
        parts["property"] = and_(inside, bad), "the reached set excludes what must not be"
    table = [f"{number} = {v}" for v, number in names.items()]
    later = {after(v): f"{number}_next" for v, number in names.items()}
    return {
        name: script([assertion], {**names, **later}, [words, "expected answer: unsat", *table])
        for name, (assertion, words) in parts.items()
    }
