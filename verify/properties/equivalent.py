"""`equivalent`: two circuits that get the same changes settle and show the same outputs, from every start state."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise
from typing import Any

from settled.models.circuit import Circuit
from settled.models.logic import not_, var
from settled.models.problems import InputError, Problem, nearest
from settled.models.specification import Shape
from settled.models.states import Behaviour, Run, Situation, value, walk
from settled.verify.pairing import both_need_partners, environment_of_other, flickers_one_by_one
from settled.verify.placing import placed
from settled.verify.properties import Kind, Options
from settled.verify.properties.hazard_free import shown_hazard
from settled.verify.questions import Answer, Differs
from settled.verify.responses import changed_inputs, describe, excited_throughout
from settled.verify.stable_states import satisfiable, start_conditions

History = tuple[tuple[int, ...], ...]
"""The changes that a run has been through: for each the packed sets of inputs that changed, one set an instant."""


def _question(circuit: Circuit, options: Options) -> Differs:
    """Raises `InputError` when the circuits cannot be compared."""
    outputs = tuple(options.get("outputs", circuit.outputs))
    other = placed(options["to"])
    check_ports(circuit, other, outputs)
    name = _name(circuit, options)
    shown = tuple(dict.fromkeys([*outputs, *other.outputs]))
    return Differs(
        replace(other, name=name, inputs=circuit.inputs, outputs=shown), outputs, options.get("transients", False)
    )


def _name(circuit: Circuit, options: Options) -> str:
    """What the other circuit is called: a name that is not the original's."""
    name: str = options["to"].netlist.name
    return name if name != circuit.name else f"{name} (other)"


def check_ports(circuit: Circuit, other: Circuit, outputs: Sequence[str]) -> None:
    """Raise `InputError`, naming everything that does not match, when two circuits have no common ports."""
    theirs = [*other.inputs, *other.nodes, *other.defined]
    notes = [_missing(other.name, "input", x, other.inputs) for x in circuit.inputs if x not in other.inputs]
    notes += [_missing(circuit.name, "input", x, circuit.inputs) for x in other.inputs if x not in circuit.inputs]
    notes += [_missing(other.name, "signal", z, theirs) for z in outputs if z not in theirs]
    if notes:
        message = f"`{circuit.name}` and `{other.name}` cannot be compared: their ports differ"
        help = "both need the same inputs, and the other one all compared outputs; `--rename a=b` calls its signal a b"
        raise InputError(Problem("ports-differ", message, notes=tuple(notes), help=help))
    if not outputs:
        raise InputError(Problem("nothing-to-compare", f"`{circuit.name}` has no outputs to compare", help="list some"))


def _missing(circuit: str, what: str, name: str, known: Sequence[str]) -> str:
    near = nearest(name, known)
    return f"`{circuit}` has no {what} `{name}`{f'; {near}' if near else ''}"


def _claim(circuit: Circuit, options: Options) -> str:
    outputs = ", ".join(options.get("outputs", circuit.outputs))
    more = ", without a hazard on them that the original does not have" if options.get("transients") else ""
    return (
        f"Through every sequence of allowed input changes {circuit.name} and {_name(circuit, options)} settle and agree "
        f"on {outputs}{more}."
    )


def _walk(behaviour: Behaviour, question: Differs, run: Run) -> None:
    walk(_side(behaviour, question, run), run)


def _side(behaviour: Behaviour, question: Differs, run: Run) -> Behaviour:
    """The circuit that a run belongs to, in its environment."""
    if run.circuit == behaviour.circuit.name:
        return behaviour
    return Behaviour(question.other, environment_of_other(behaviour.environment, question))


def _offends(behaviour: Behaviour, question: Differs, answer: Answer) -> tuple[str, dict[str, Any]]:
    facts = {k: v for k, v in answer.facts.items() if k in ("fewest_changes", "in_step", "partners", "races")}
    if len(answer.runs) == 1:
        return _lonely(behaviour, question, answer.runs[0]), facts
    left, right = answer.runs
    sides = behaviour, _side(behaviour, question, right)
    mask = behaviour.circuit.input_mask
    if (left.states[0] ^ right.states[0]) & mask:
        raise ValueError("the runs begin under different input vectors")
    common = histories(sides[0], left) & histories(sides[1], right)
    ways = [past for past, outstanding in sorted(common) if not outstanding and len(past) == facts["fewest_changes"]]
    if not ways:
        raise ValueError("the runs do not go through the same changes")
    changes = ways[0]
    starts = f"{describe(behaviour.circuit, left.states[0])} and {describe(question.other, right.states[0])}"
    text = _text(behaviour.circuit, left.states[0], changes)
    after = f"After {text} from {starts}:" if changes else f"In the start states {starts}:"
    facts["changes"] = text
    if left.loop is not None or right.loop is not None:
        return f"{after} {_restless(sides, (left, right))}.", facts
    if "signal" in answer.facts:
        sentence, hazard = _flickers(sides, (left, right), changes, answer)
        return f"{after} {sentence}.", facts | hazard
    sentence, difference = _apart(sides, (left, right), question.outputs)
    return f"{after} {sentence}{_open(answer)}.", facts | difference


def _lonely(behaviour: Behaviour, question: Differs, run: Run) -> str:
    """A start state that no start state of the other side goes with."""
    ours = run.circuit == behaviour.circuit.name
    if len(run.states) != 1 or not (ours or both_need_partners(behaviour.environment, question)):
        raise ValueError("the run is not a start state that needs a partner")
    circuit = behaviour.circuit
    vector = [var(x) if run.states[0] >> i & 1 else not_(var(x)) for i, x in enumerate(circuit.inputs)]
    environment = environment_of_other(behaviour.environment, question)
    sides = [(circuit, behaviour.environment), (question.other, environment)]
    (mine, _), facing = sides if ours else sides[::-1]
    if satisfiable(facing[0], [*start_conditions(*facing), *vector]):
        raise ValueError("the start state has a partner")
    return (
        f"The start state {describe(mine, run.states[0])} of {mine.name} has no partner: {facing[0].name} has no "
        f"start state under that input vector."
    )


def histories(behaviour: Behaviour, run: Run) -> set[tuple[History, int]]:
    """The changes that a run can have been through, each with what is still outstanding at its end."""
    mask = behaviour.circuit.input_mask
    now: set[tuple[History, Situation]] = {((), Situation(run.states[0]))}
    for before, state in pairwise(run.states):
        moved = (before ^ state) & mask
        after: set[tuple[History, Situation]] = set()
        for past, at in now:
            grown = (*past[:-1], (*past[-1], moved)) if moved and past else past
            after |= {(grown, s) for s in behaviour.responses(at) if s.state == state}
            after |= {((*past, (moved,)), s) for s in behaviour.changes(at) if s.state == state}
        now = after
    return {(past, at.outstanding) for past, at in now}


def _text(circuit: Circuit, state: int, changes: History) -> str:
    """Changes as the trade writes them: `s+; r-`, the members of a burst in their order joined by `then`."""
    words = []
    for change in changes:
        instants = []
        for moved in change:
            instants.append(changed_inputs(circuit, state, state ^ moved))
            state ^= moved
        words.append(" then ".join(instants))
    return "; ".join(words)


def _restless(sides: tuple[Behaviour, Behaviour], runs: tuple[Run, Run]) -> str:
    names = []
    for side, run in zip(sides, runs, strict=True):
        if run.loop is None:
            continue
        circle = run.states[run.loop :]
        if len({s & side.circuit.input_mask for s in circle}) != 1 or excited_throughout(side.circuit, circle):
            raise ValueError("the loop is not fair, or its inputs are not held")
        names.append(side.circuit.name)
    return f"{' and '.join(names)} can go round for ever: see the property `settles`"


def _apart(
    sides: tuple[Behaviour, Behaviour], runs: tuple[Run, Run], outputs: Sequence[str]
) -> tuple[str, dict[str, Any]]:
    shown = []
    for side, run in zip(sides, runs, strict=True):
        if not side.is_stable(run.states[-1]):
            raise ValueError("a run does not end in a stable total state")
        shown.append(value(side.circuit, [side.circuit.signal(z) for z in outputs], run.states[-1]))
    different = {z: [a, b] for z, a, b in zip(outputs, *shown, strict=True) if a != b}
    if not different:
        raise ValueError("the outputs agree at the end of the runs")
    parts = [
        f"{z} is {a} in {sides[0].circuit.name} and {b} in {sides[1].circuit.name}" for z, (a, b) in different.items()
    ]
    return ", ".join(parts), {"difference": different}


def _open(answer: Answer) -> str:
    """Whose own races leave the outputs open, if anyone's."""
    names = dict.fromkeys(race["circuit"] for race in answer.facts.get("races", ()))
    whose = " and ".join(names)
    return f" ({whose} can itself end in different states on the way: see the property `race-free`)" if names else ""


def _flickers(
    sides: tuple[Behaviour, Behaviour], runs: tuple[Run, Run], changes: History, answer: Answer
) -> tuple[str, dict[str, Any]]:
    """The hazard of the other circuit in its last response, and that the original has none there."""
    signal, place = answer.facts["signal"], answer.facts["in_step"][-1]
    hazard, facts = shown_hazard(sides[1], runs[1], signal, answer.facts["offending_step"])
    before = [run.states[at] for run, at in zip(runs, place, strict=True)]
    if facts["before"] != place[1] or not all(side.is_stable(s) for side, s in zip(sides, before, strict=True)):
        raise ValueError("the hazard is not one of the last response")
    if flickers_one_by_one(sides[0], before[0], changes[-1], signal):
        raise ValueError("the original has the same hazard")
    return f"{signal} of {sides[1].circuit.name} has {hazard}; {sides[0].circuit.name} has no hazard there", facts


KIND = Kind(
    "equivalent",
    Shape(required={"to"}, optional={"outputs", "transients"}, mode="fundamental"),
    _question,
    _claim,
    _offends,
    walk=_walk,
    vacuous="no pair of start states has an allowed input change",
)
