"""`deadlock-free`: in every reachable total state some node is excited or some input may change."""

from __future__ import annotations

from typing import Any

from settled.models.circuit import Circuit
from settled.models.specification import Shape
from settled.models.states import Behaviour, Situation
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, Deadlocks
from settled.verify.responses import describe


def _question(_: Circuit, __: Options) -> Deadlocks:
    return Deadlocks()


def _claim(_: Circuit, __: Options) -> str:
    return "In every reachable total state some node is excited or some input may change."


def _offends(behaviour: Behaviour, _: Deadlocks, answer: Answer) -> tuple[str, dict[str, Any]]:
    last = answer.runs[0].states[-1]
    if next(behaviour.moves(Situation(last)), None) is not None:
        raise ValueError("something may still move in the last state of the run")
    dead = describe(behaviour.circuit, last)
    return f"A dead end is reachable: in {dead} no node is excited and no input may change.", {}


KIND = Kind("deadlock-free", Shape(), _question, _claim, _offends)
