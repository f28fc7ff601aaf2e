"""`speed-independent`: no step and no input change takes away the excitation of a node that did not itself switch.

That is semi-modularity, which implies speed independence: Muller and Bartky, "A theory of asynchronous circuits",
1959 (recalled).
"""

from __future__ import annotations

from typing import Any

from settled.models.circuit import Circuit
from settled.models.specification import Shape
from settled.models.states import Behaviour
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, Withdraws
from settled.verify.responses import describe, moved


def _question(_: Circuit, options: Options) -> Withdraws:
    return Withdraws(tuple(options.get("except", ())))


def _claim(_: Circuit, options: Options) -> str:
    excepted = ", ".join(options.get("except", ()))
    whom = f"a node other than {excepted}" if excepted else "a node"
    return f"No step and no input change takes away the excitation of {whom} that did not itself switch."


def _offends(behaviour: Behaviour, question: Withdraws, answer: Answer) -> tuple[str, dict[str, Any]]:
    (run,) = answer.runs
    if len(run.states) < 2:
        raise ValueError("the run has no step")
    circuit, (before, after) = behaviour.circuit, run.states[-2:]
    lost = behaviour.excited(before) & ~(before ^ after) & ~behaviour.excited(after)
    names = [n for n in circuit.nodes if lost >> circuit.place[n] & 1 and n not in question.excepted]
    if not names:
        raise ValueError("the last step takes away no excitation that counts")
    due = ", ".join(f"{n} ({n}{'-' if before >> circuit.place[n] & 1 else '+'} was due)" for n in names)
    switched = [s for s in circuit.signals if (before ^ after) >> circuit.place[s] & 1]
    step = "/".join(moved(circuit, before, after))
    sentence = f"In {describe(circuit, before)}, {step} takes away the excitation of {due}."
    return sentence, {"switched": switched, "withdrawn": names}


KIND = Kind("speed-independent", Shape(optional={"except"}), _question, _claim, _offends)
