"""`equivalent`: two circuits that get the same changes settle and show the same outputs, from every start state."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

from settled.models.circuit import Circuit
from settled.models.problems import InputError, Problem, nearest
from settled.models.specification import Shape
from settled.models.states import Behaviour, Run, walk
from settled.verify.comparisons import History, circuit_side, judge
from settled.verify.covers import lost
from settled.verify.pairing import both_need_partners, environment_of_other, flickers_one_by_one
from settled.verify.placing import placed
from settled.verify.properties import Kind, Options
from settled.verify.properties.hazard_free import shown_hazard
from settled.verify.questions import Answer, Differs


def _question(circuit: Circuit, options: Options) -> Differs:
    """Raises `InputError` when the circuits cannot be compared."""
    outputs = tuple(options.get("outputs", circuit.outputs))
    other = replace(placed(options["to"]), name=_name(circuit, options))
    check_ports(circuit, other, outputs)
    shown = tuple(dict.fromkeys([*outputs, *other.outputs]))
    facing = replace(other, inputs=circuit.inputs, outputs=shown)
    return Differs(facing, outputs, options.get("transients", False))


def _name(circuit: Circuit, options: Options) -> str:
    """What the other circuit is called: a name that is not the original's."""
    name: str = options["to"].netlist.name
    return name if name != circuit.name else f"{name} (other)"


def check_ports(circuit: Circuit, other: Circuit, outputs: Sequence[str]) -> None:
    """Raise `InputError`, naming everything that does not match, when two circuits have no common ports."""
    theirs = [*other.inputs, *other.nodes, *other.defined]
    ours, only = ([x for x in a.inputs if x not in b.inputs] for a, b in ((circuit, other), (other, circuit)))
    sole = len(ours) == len(only) == 1
    notes = [_missing(other.name, "input", x, only, sole) for x in ours]
    notes += [_missing(circuit.name, "input", x, ours, sole) for x in only]
    notes += [_missing(other.name, "signal", z, theirs) for z in outputs if z not in theirs]
    if notes:
        message = f"`{circuit.name}` and `{other.name}` cannot be compared: their ports differ"
        help = "both need the same inputs, and the other one all compared outputs; `--rename a=b` calls its signal a b"
        raise InputError(Problem("ports-differ", message, notes=tuple(notes), help=help))
    if not outputs:
        raise InputError(Problem("nothing-to-compare", f"`{circuit.name}` has no outputs to compare", help="list some"))


def _missing(circuit: str, what: str, name: str, known: Sequence[str], sole: bool = False) -> str:
    near = f"did you mean `{known[0]}`?" if sole else nearest(name, known)
    return f"`{circuit}` has no {what} `{name}`{f'; {near}' if near else ''}"


def _claim(circuit: Circuit, options: Options) -> str:
    outputs = ", ".join(options.get("outputs", circuit.outputs))
    more = ", without a hazard on them that the original does not have" if options.get("transients") else ""
    both = f"{circuit.name} and {_name(circuit, options)}"
    return f"Through every sequence of allowed input changes {both} settle and agree on {outputs}{more}."


def _walk(behaviour: Behaviour, question: Differs, run: Run) -> None:
    ours = run.circuit == behaviour.circuit.name
    walk(behaviour if ours else _facing(behaviour, question), run)


def _facing(behaviour: Behaviour, question: Differs) -> Behaviour:
    return Behaviour(question.other, environment_of_other(behaviour.environment, question))


def _offends(behaviour: Behaviour, question: Differs, answer: Answer) -> tuple[str, dict[str, Any]]:
    both = both_need_partners(behaviour.environment, question)
    facing = _facing(behaviour, question)
    sides = circuit_side(behaviour, question.outputs), circuit_side(facing, question.outputs, both)
    return judge(sides, answer, question.outputs, lambda changes: _new_hazard(behaviour, facing, answer, changes))


def _new_hazard(
    behaviour: Behaviour, facing: Behaviour, answer: Answer, changes: History
) -> tuple[str, dict[str, Any]]:
    """The hazard of the other circuit in its last response, and that the original has none there."""
    signal, place = answer.facts["signal"], answer.facts["in_step"][-1]
    hazard, facts = shown_hazard(facing, answer.runs[1], signal, answer.facts["offending_step"])
    before = [run.states[at] for run, at in zip(answer.runs, place, strict=True)]
    if facts["before"] != place[1] or not (behaviour.is_stable(before[0]) and facing.is_stable(before[1])):
        raise ValueError("the hazard is not one of the last response")
    if flickers_one_by_one(behaviour, before[0], changes[-1], signal):
        raise ValueError("the original has the same hazard")
    sentence = f"{signal} of {facing.circuit.name} has {hazard}; {behaviour.circuit.name} has no hazard there"
    ends = [[state, run.states[-1]] for state, run in zip(before, answer.runs, strict=True)]
    cover = lost(((behaviour.circuit, ends[0]), (facing.circuit, ends[1])), signal)
    if facts["hazard"]["class"] != "static-1" or cover is None:
        return sentence, facts
    return f"{sentence}, for its term {cover} covers the change", {**facts, "lost_cover": cover}


KIND = Kind(
    "equivalent",
    Shape(required={"to"}, optional={"outputs", "transients"}, mode="fundamental"),
    _question,
    _claim,
    _offends,
    walk=_walk,
    vacuous="no pair of start states has an allowed input change",
)
