"""Rules: how a question is reduced to questions whether a bad state can be reached. One file for each question.

A rule is one function with its statement and source. It gives `Established` when its premises are proved, `Failure`
when it found what the question asks for, and None when it does not decide. Rules of a question are tried in order.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

from settled.models.states import Run
from settled.verify.symbolic.certificates import Argument, Proof
from settled.verify.symbolic.reach import Reacher


@dataclass(frozen=True)
class Established:
    """The failure asked for does not exist. `rule` turns what proofs and arguments say into that, in one sentence."""

    rule: str
    proofs: tuple[Proof, ...] = ()
    arguments: tuple[Argument, ...] = ()


@dataclass(frozen=True)
class Failure:
    """The failure asked for, as lawful runs from a start state, with the facts that its property wants to know."""

    runs: tuple[Run, ...]
    facts: Mapping[str, Any] = field(default_factory=dict)


Outcome = Established | Failure | None
Rule = Callable[[Reacher, Any], Outcome]

DIRECT = "No such state can be reached: the clauses hold in every start state, every move keeps them, they exclude it."
