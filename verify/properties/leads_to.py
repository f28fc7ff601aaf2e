"""`leads-to`: once `from` is true, every fair run has a total state with `to` true, then or later.

Fairness as in Lehmann, Pnueli and Stavi, "Impartiality, justice and fairness", 1981 (recalled): justice towards each
excitation and each input that must move. A node excited with the same value for ever is a run that does not exist.
"""

from __future__ import annotations

from typing import Any

from settled.models.circuit import Circuit
from settled.models.logic import to_text
from settled.models.specification import Shape
from settled.models.states import Behaviour, Run, members, value, walk
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, Evades
from settled.verify.responses import describe, rounds


def _question(_: Circuit, options: Options) -> Evades:
    return Evades(options["from"], options["to"])


def _claim(_: Circuit, options: Options) -> str:
    return (
        f"From every reachable total state with {to_text(options['from'])}, "
        f"every fair run has one with {to_text(options['to'])}, then or later."
    )


def pressing(behaviour: Behaviour, state: int) -> int:
    """What may not wait for ever: excited nodes, and `must` inputs whose guard and `assume` let them change alone."""
    circuit = behaviour.circuit
    may = 0
    for bit in members(behaviour.allowed(state)):
        must = behaviour.environment.guard(circuit.inputs[bit.bit_length() - 1]).must
        if must and behaviour.admits((state ^ bit) & circuit.input_mask):
            may |= bit
    return behaviour.excited(state) | may


def _offends(behaviour: Behaviour, question: Evades, answer: Answer) -> tuple[str, dict[str, Any]]:
    (run,) = answer.runs
    circuit = behaviour.circuit
    begun = _begun(behaviour, question, run)
    if run.loop is None:
        _check_end(behaviour, run)
        how = f"the run may end in {describe(circuit, run.states[-1])}"
    else:
        _check_loop(behaviour, run)
        moving = [s for s in circuit.signals if len({t >> circuit.place[s] & 1 for t in run.states[run.loop :]}) > 1]
        how = f"{', '.join(moving[:8])}{', ...' if len(moving) > 8 else ''} can go round for ever"
    sentence = f"After {to_text(question.source)} in step {begun} {how} without {to_text(question.target)}."
    return sentence, {"from_step": begun, "ends": run.loop is None}


def _begun(behaviour: Behaviour, question: Evades, run: Run) -> int:
    """The first position with `from` true since which `to` has been false. Raises `ValueError` if there is none."""
    both = [value(behaviour.circuit, [question.source, question.target], state) for state in run.states]
    goal = max((i for i, (_, target) in enumerate(both) if target), default=-1)
    if run.loop is not None and goal >= run.loop:
        raise ValueError("`to` is true in the loop")
    for i, (source, _) in enumerate(both):
        if source and i > goal:
            return i
    raise ValueError("`from` is not true since `to` was true last")


def _check_end(behaviour: Behaviour, run: Run) -> None:
    if all(at.outstanding for at in walk(behaviour, run)[-1]):
        raise ValueError("a burst is not finished when the run ends")
    if pressing(behaviour, run.states[-1]):
        raise ValueError("something that may not wait for ever is waiting when the run ends")


def _check_loop(behaviour: Behaviour, run: Run) -> None:
    high = low = -1
    for state in run.states[run.loop :]:
        now = pressing(behaviour, state)
        high, low = high & now & state, low & now & ~state
    if high | low:
        raise ValueError("something waits all round the loop: the loop is not fair")
    if not any(not at.outstanding for way in rounds(behaviour, run) for _, at in way):
        raise ValueError("a burst is never finished in the loop")


KIND = Kind(
    "leads-to",
    Shape(required={"from", "to"}),
    _question,
    _claim,
    _offends,
    vacuous="`from` is true in no reachable total state",
)
