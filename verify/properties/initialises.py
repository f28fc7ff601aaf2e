"""`initialises`: from every internal state, a sequence of input vectors leads every fair run to one total state."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from typing import Any

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.specification import Shape
from settled.models.states import Behaviour, Run, walk
from settled.verify.power_up import vectors_of
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, PowersUp
from settled.verify.responses import describe, excited_throughout


def _question(circuit: Circuit, options: Options) -> PowersUp:
    vectors = [sum(1 << i for i, x in enumerate(circuit.inputs) if v[x]) for v in options["sequence"]]
    return PowersUp(tuple(vectors))


def _claim(circuit: Circuit, options: Options) -> str:
    sequence = _vectors(circuit, _question(circuit, options).vectors)
    return f"From every internal state whatever, applying {sequence} leads to one and the same total state."


def _walk(behaviour: Behaviour, _: PowersUp, run: Run) -> None:
    """Guards, mode and start play no part; that the inputs follow the sequence is seen in `_offends`."""
    assumed = Environment(changes="simultaneous", assume=behaviour.environment.assume)
    walk(Behaviour(behaviour.circuit, assumed), run, anywhere=True)


def _offends(behaviour: Behaviour, question: PowersUp, answer: Answer) -> tuple[str, dict[str, Any]]:
    done = [applied(behaviour, run, question.vectors) for run in answer.runs]
    facts = {k: v for k, v in answer.facts.items() if k in ("ternary", "ends", "start_reached", "note")}
    circuit = behaviour.circuit
    if len(answer.runs) == 1:
        (run,) = answer.runs
        sentence = f"After {_vectors(circuit, question.vectors[: done[0]])} {_restless(behaviour, run)}."
        return sentence, {**facts, "oscillates": True, "after_vectors": done[0]}
    one, two = answer.runs
    if any(run.loop is not None or not behaviour.is_stable(run.states[-1]) for run in answer.runs):
        raise ValueError("a run does not end in a stable total state")
    if done != [len(question.vectors)] * 2:
        raise ValueError("a run ends before the whole sequence has been applied")
    if one.states[-1] == two.states[-1]:
        raise ValueError("both runs end in the same total state")
    apart = [s for s in circuit.nodes if (one.states[-1] ^ two.states[-1]) >> circuit.place[s] & 1]
    ends = " or ".join(describe(circuit, run.states[-1], apart) for run in answer.runs)
    sentence = f"After {_vectors(circuit, question.vectors)} the circuit can end with {ends}."
    return sentence, {**facts, "oscillates": False, "after_vectors": len(question.vectors)}


def _restless(behaviour: Behaviour, run: Run) -> str:
    circuit = behaviour.circuit
    if run.loop is None:
        raise ValueError("the run does not go round")
    circle = run.states[run.loop :]
    if len({s & circuit.input_mask for s in circle}) != 1 or excited_throughout(circuit, circle):
        raise ValueError("the loop is not fair, or its inputs are not held")
    moving = [n for n in circuit.nodes if len({s >> circuit.place[n] & 1 for s in circle}) > 1]
    rest = "never comes to rest" if len(moving) == 1 else "never come to rest"
    return f"the circuit can go round for ever: {', '.join(moving[:8])} {rest}"


def _vectors(circuit: Circuit, vectors: Sequence[int]) -> str:
    return "; ".join(" ".join(f"{x}={v}" for x, v in one.items()) or "power-up" for one in vectors_of(circuit, vectors))


def applied(behaviour: Behaviour, run: Run, vectors: Sequence[int]) -> int:
    """How many of `vectors` a run has been through. Raises `ValueError` where its inputs do not follow them.

    A vector that is like the one before it leaves no step in the run.
    """
    mask = behaviour.circuit.input_mask
    if run.states[0] & mask != vectors[0]:
        raise ValueError("the run does not begin under the first input vector")
    number = 1
    for before, after in pairwise(run.states):
        if (before ^ after) & mask:
            number = _skip(vectors, number)
            if not behaviour.is_stable(before) or (before ^ after) & ~mask:
                raise ValueError("an input vector is applied before the circuit has settled")
            if number == len(vectors) or after & mask != vectors[number]:
                raise ValueError("the inputs do not follow the sequence")
            number += 1
    return _skip(vectors, number) if behaviour.is_stable(run.states[-1]) else number


def _skip(vectors: Sequence[int], number: int) -> int:
    """Past vectors that are like the one before them."""
    while number < len(vectors) and vectors[number] == vectors[number - 1]:
        number += 1
    return number


KIND = Kind("initialises", Shape(required={"sequence"}), _question, _claim, _offends, anywhere=True, walk=_walk)
