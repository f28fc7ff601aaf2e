"""`essential-hazard-free`: one change and three changes of an input never end in different internal states.

Unger 1959, "Hazards and delays in asynchronous sequential switching circuits" (recalled).
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from settled.models.circuit import Circuit
from settled.models.specification import Shape
from settled.models.states import Behaviour
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, DivergesAfterThree, Question
from settled.verify.responses import describe, parting, settled, stable_places


def _question(_: Circuit, __: Options) -> Question:
    return DivergesAfterThree()


def _claim(_: Circuit, __: Options) -> str:
    return "One change and three changes of an input, with settling between, never end in different internal states."


def _offends(behaviour: Behaviour, _: DivergesAfterThree, answer: Answer) -> tuple[str, dict[str, Any]]:
    one, two = (run.states for run in answer.runs)
    circuit = behaviour.circuit
    name = answer.facts["input"]
    bit = 1 << circuit.place[name]
    if (one[-1] ^ two[-1]) & ~circuit.input_mask == 0:
        raise ValueError("the runs end in the same internal state")
    for place in stable_places(behaviour, one[: parting(one, two)]):
        if changes(behaviour, one[place:], bit) in (1, 3) and changes(behaviour, two[place:], bit) in (1, 3):
            break
    else:
        raise ValueError("the runs are not one and three changes of the input from one stable state")
    edge = name + ("-" if one[place] & bit else "+")
    number = changes(behaviour, two[place:], bit)
    what = "three changes" if number == 3 else "another ordering of the same change"
    sentence = f"From {describe(circuit, one[place])}, {edge} and {what} of {name} end in different internal states."
    if number != 3:
        sentence = f"From {describe(circuit, one[place])}, {edge} already ends in different internal states."
    return sentence, {"input": name, "before": place}


def changes(behaviour: Behaviour, states: Sequence[int], bit: int) -> int:
    """How many changes of one input with settling after each `states` are; 0 if they are anything else."""
    cuts = [i for i in range(len(states) - 1) if (states[i] ^ states[i + 1]) & behaviour.circuit.input_mask]
    if not cuts or cuts[0] != 0:
        return 0
    pieces = [states[a : b + 1] for a, b in zip(cuts, [*cuts[1:], len(states) - 1], strict=True)]
    lawful = all((p[0] ^ p[-1]) & behaviour.circuit.input_mask == bit and settled(behaviour, p) for p in pieces)
    return len(pieces) if lawful else 0


KIND = Kind("essential-hazard-free", Shape(mode="fundamental"), _question, _claim, _offends, standard=5)
