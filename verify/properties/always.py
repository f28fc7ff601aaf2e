"""`always`: an expression is true in every reachable total state, or in every stable one."""

from __future__ import annotations

from typing import Any

from settled.models.circuit import Circuit
from settled.models.logic import not_, to_text
from settled.models.specification import Shape
from settled.models.states import Behaviour, value
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, Reaches


def _question(_: Circuit, options: Options) -> Reaches:
    return Reaches(not_(options["expr"]), options.get("when") == "stable")


def where(options: Options) -> str:
    """The states that are meant, in words."""
    return "every reachable stable total state" if options.get("when") == "stable" else "every reachable total state"


def _claim(_: Circuit, options: Options) -> str:
    return f"{to_text(options['expr'])} is true in {where(options)}."


def offends(behaviour: Behaviour, question: Reaches, answer: Answer) -> tuple[str, dict[str, Any]]:
    """The last state of the run is one that must not be reached."""
    (run,) = answer.runs
    if not value(behaviour.circuit, [question.bad], run.states[-1])[0]:
        raise ValueError("the last state of the run is as it should be")
    if question.only_stable and not behaviour.is_stable(run.states[-1]):
        raise ValueError("the last state of the run is not stable")
    sort = "stable " if question.only_stable else ""
    return f"A {sort}total state is reachable in which {to_text(question.bad)} is true.", {}


VACUOUS = "no stable total state is reachable"
KIND = Kind("always", Shape(required={"expr"}, optional={"when"}), _question, _claim, offends, vacuous=VACUOUS)
