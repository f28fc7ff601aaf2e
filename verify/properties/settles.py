"""`settles`: with the inputs held, every fair run from every reachable total state comes to rest."""

from __future__ import annotations

from typing import Any

from settled.models.circuit import Circuit
from settled.models.specification import Shape
from settled.models.states import Behaviour
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, Oscillates, Question
from settled.verify.responses import excited_throughout


def _question(_: Circuit, __: Options) -> Question:
    return Oscillates()


def _claim(_: Circuit, __: Options) -> str:
    return "From every reachable total state, with the inputs held, every fair run reaches a stable total state."


def _offends(behaviour: Behaviour, _: Oscillates, answer: Answer) -> tuple[str, dict[str, Any]]:
    (run,) = answer.runs
    circuit = behaviour.circuit
    if run.loop is None:
        raise ValueError("the run does not go round")
    loop = run.states[run.loop :]
    if len({s & circuit.input_mask for s in loop}) != 1:
        raise ValueError("the inputs are not held in the loop")
    waiting = excited_throughout(circuit, loop)
    if waiting:
        raise ValueError(f"`{waiting[0]}` stays excited all round the loop: the loop is not fair")
    moving = [n for n in circuit.nodes if len({s >> circuit.place[n] & 1 for s in loop}) > 1]
    shown = ", ".join(moving[:8]) + (", ..." if len(moving) > 8 else "")
    rest = "never comes to rest" if len(moving) == 1 else "never come to rest"
    return f"The circuit can go round for ever with its inputs held: {shown} {rest}.", {}


KIND = Kind(
    "settles",
    Shape(),
    _question,
    _claim,
    _offends,
    standard=2,
    compares_winners=True,
    vacuous="no reachable total state is unstable, and no reachable stable one has an allowed input change",
)
