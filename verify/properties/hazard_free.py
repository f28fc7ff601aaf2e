"""`hazard-free`: in the response to one change or burst every watched signal changes at most once.

Classes as in Unger, "Asynchronous Sequential Switching Circuits", 1969; function and logic hazards as in
Eichelberger 1965 (both recalled).
"""

from __future__ import annotations

from itertools import pairwise
from typing import Any

from settled.models.circuit import Circuit
from settled.models.logic import Expr
from settled.models.specification import Shape
from settled.models.states import Behaviour, Run, members, value
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, Flickers
from settled.verify.responses import changed_inputs, describe, response, settled, stable_places


def _question(circuit: Circuit, options: Options) -> Flickers:
    return Flickers(tuple(options.get("signals", circuit.outputs)))


def _claim(circuit: Circuit, options: Options) -> str:
    signals = _question(circuit, options).signals
    whom = signals[0] if len(signals) == 1 else f"each of {', '.join(signals)}"
    return f"In the response to one input change or burst {whom} changes at most once."


def _offends(behaviour: Behaviour, _: Flickers, answer: Answer) -> tuple[str, dict[str, Any]]:
    (run,) = answer.runs
    signal = answer.facts["signal"]
    hazard, facts = shown_hazard(behaviour, run, signal, answer.facts["offending_step"])
    before = describe(behaviour.circuit, run.states[facts["before"]])
    return f"After {facts['change']} from {before} {signal} has {hazard}.", facts


def shown_hazard(behaviour: Behaviour, run: Run, signal: str, step: int) -> tuple[str, dict[str, Any]]:
    """The hazard of a signal that changes for the second time at `step` of a run, in words, and the facts about it.

    Raises `ValueError` when it does not change twice within one response.
    """
    circuit = behaviour.circuit
    wave = [value(circuit, [circuit.signal(signal)], s)[0] for s in run.states]
    place = _beginning(behaviour, run, wave, step)
    settles = settled(behaviour, run.states[place:])
    hazard = {
        "signal": signal,
        "class": (f"static-{wave[place]}" if wave[-1] == wave[place] else "dynamic") if settles else None,
        "kind": kind_of(behaviour, circuit.signal(signal), run.states[place], run.states[-1]),
    }
    change = changed_inputs(circuit, run.states[place], run.states[-1])
    sort = " ".join(filter(None, [hazard["class"], hazard["kind"], "hazard"]))
    pulse = ", ".join(f"{signal}{'+' if b else '-'}" for a, b in pairwise(wave[place:]) if a != b)
    return f"a {sort}: {pulse}", {"hazard": hazard, "change": change, "before": place, "offending_step": step}


def _beginning(behaviour: Behaviour, run: Run, wave: list[int], step: int) -> int:
    for place in stable_places(behaviour, run.states[:step]):
        twice = sum(a != b for a, b in pairwise(wave[place : step + 1])) >= 2
        if twice and response(behaviour, run.states[place:]):
            return place
    raise ValueError("the signal does not change twice within one response")


def kind_of(behaviour: Behaviour, signal: Expr, before: int, after: int) -> str | None:
    """`function` or `logic` for circuits without feedback, else None.

    A function hazard: some order of the input changes alone, every intermediate vector admitted and fully settled,
    already makes the signal change more than once.
    """
    circuit = behaviour.circuit
    if circuit.has_feedback:
        return None
    changing = (before ^ after) & circuit.input_mask
    if changing.bit_count() < 2:
        return "logic"
    level = {(before & circuit.input_mask, 0)}
    for _ in range(changing.bit_count()):
        level = {step for at in level for step in _one_more(behaviour, signal, after, *at)}
    return "function" if any(count > 1 for _, count in level) else "logic"


def _one_more(behaviour: Behaviour, signal: Expr, after: int, vector: int, count: int) -> set[tuple[int, int]]:
    found = set()
    old = _settled_value(behaviour.circuit, signal, vector)
    for bit in members((vector ^ after) & behaviour.circuit.input_mask):
        if behaviour.admits(vector ^ bit):
            new = _settled_value(behaviour.circuit, signal, vector ^ bit)
            found.add((vector ^ bit, min(2, count + (old != new))))
    return found


def _settled_value(circuit: Circuit, signal: Expr, vector: int) -> int:
    """The value of `signal` when a circuit without feedback has settled under an input vector."""
    state = vector
    for _ in circuit.nodes:
        targets = value(circuit, circuit.excitation.values(), state)
        state = vector | sum(1 << circuit.place[n] for n, v in zip(circuit.excitation, targets, strict=True) if v)
    return value(circuit, [signal], state)[0]


SHAPE = Shape(optional={"signals"}, mode="fundamental", watches=True)
KIND = Kind("hazard-free", SHAPE, _question, _claim, _offends, standard=4)
