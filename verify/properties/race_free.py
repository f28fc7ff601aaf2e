"""`race-free`: no input change has two runs that end in different stable total states (no critical race)."""

from __future__ import annotations

from typing import Any

from settled.models.circuit import Circuit
from settled.models.specification import Shape
from settled.models.states import Behaviour
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, Diverges, Question
from settled.verify.responses import changed_inputs, describe, parting, settled, stable_places


def _question(_: Circuit, __: Options) -> Question:
    return Diverges()


def _claim(_: Circuit, __: Options) -> str:
    return "No two runs of the response to an allowed input change end in different stable total states."


def _offends(behaviour: Behaviour, _: Diverges, answer: Answer) -> tuple[str, dict[str, Any]]:
    one, two = (run.states for run in answer.runs)
    circuit = behaviour.circuit
    if one[-1] == two[-1] or (one[-1] ^ two[-1]) & circuit.input_mask:
        raise ValueError("the runs do not end in different stable states under one input vector")
    for place in stable_places(behaviour, one[: parting(one, two)]):
        if settled(behaviour, one[place:]) and settled(behaviour, two[place:]):
            break
    else:
        raise ValueError("the runs are not two responses to one input change")
    apart = one[-1] ^ two[-1]
    names = [n for n in circuit.nodes if apart >> circuit.place[n] & 1 and ">" not in n]
    ends = " or ".join(" ".join(f"{n}={end >> circuit.place[n] & 1}" for n in names) for end in (one[-1], two[-1]))
    change = changed_inputs(circuit, one[place], one[-1])
    facts = {"change": change, "before": place, "parts_after": parting(one, two) - 1}
    return f"After {change} from {describe(circuit, one[place])} the circuit can end with {ends}.", facts


KIND = Kind("race-free", Shape(mode="fundamental"), _question, _claim, _offends, standard=3, compares_winners=True)
