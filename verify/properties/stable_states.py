"""`stable-states`: every admitted input vector has at least so many and at most so many stable internal states."""

from __future__ import annotations

from typing import Any

from settled.models.circuit import Circuit
from settled.models.specification import Shape
from settled.models.states import Behaviour
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, StableCount
from settled.verify.responses import excited_throughout


def _question(_: Circuit, options: Options) -> StableCount:
    return StableCount(options.get("at-least", 1), options.get("at-most"))


def _claim(_: Circuit, options: Options) -> str:
    least, most = options.get("at-least", 1), options.get("at-most")
    bound = f"at least {least}" if most is None else f"{least}" if least == most else f"between {least} and {most}"
    noun = "state" if bound in ("1", "at least 1") else "states"
    return f"Every input vector has {bound} stable internal {noun}."


def _offends(behaviour: Behaviour, question: StableCount, answer: Answer) -> tuple[str, dict[str, Any]]:
    circuit = behaviour.circuit
    vector = {run.states[0] & circuit.input_mask for run in answer.runs}
    text = " ".join(f"{x}={v}" for x, v in answer.facts["vector"].items()) or "(no inputs)"
    number = answer.facts["stable_internal_states"]
    if len(vector) != 1 or not behaviour.admits(next(iter(vector))):
        raise ValueError("the runs are not under one admitted input vector")
    if number == 0:
        loop = answer.runs[0].states[answer.runs[0].loop :]
        if excited_throughout(circuit, loop) or any(behaviour.is_stable(s) for s in answer.runs[0].states):
            raise ValueError("the run does not go round for ever")
        return f"The input vector {text} has no stable internal state: the circuit never comes to rest under it.", {}
    states = {run.states[0] for run in answer.runs}
    if len(states) != number or not all(behaviour.is_stable(s) for s in states):
        raise ValueError("the states shown are not distinct stable states")
    if question.least <= number and (question.most is None or number <= question.most):
        raise ValueError("the number of stable states is as it should be")
    more = " or more" if question.most is not None and number > question.most else ""
    return f"The input vector {text} has {number}{more} stable internal states.", {}


SHAPE = Shape(optional={"at-least", "at-most"})
KIND = Kind("stable-states", SHAPE, _question, _claim, _offends, standard=1, anywhere=True)
