"""`hazard-free` of circuits without feedback, of any size: refuted by random orders, proved by a formula.

The formula says less than the circuit does (see `settled.encodings.waveforms`): that it has no model is a proof, that
it has one says nothing.
"""

from __future__ import annotations

from dataclasses import replace

from settled.encodings.smtlib import script
from settled.encodings.waveforms import waveforms
from settled.models.circuit import Circuit
from settled.models.logic import Expr, support
from settled.models.states import Run
from settled.verify import known_responses
from settled.verify.engines import Engine
from settled.verify.limits import LimitReached
from settled.verify.never import Never, confirm
from settled.verify.questions import Answer, Flickers, Task, undecided
from settled.verify.random_orders import RandomOrders, some_starts, to_rest
from settled.verify.settled_states import Settled

NAME = "random orders, then a formula over the input change by SAT, re-checked by z3"
LANES, BATCHES = 256, 4


def flickers(task: Task, question: Flickers) -> Answer:
    """`refuted` by a run that some random order takes, `proved` when the formula of no signal has a model."""
    circuit, environment = task.circuit, task.environment
    if circuit.has_feedback or circuit.exclusive or environment.mode != "fundamental":
        return undecided("the circuit has feedback, or inputs that do not wait for it to settle", NAME)
    bodies = dict(zip(question.signals, circuit.resolve(*map(circuit.signal, question.signals)), strict=True))
    return _refuted(task, bodies) or _proved(task, bodies)


def _refuted(task: Task, bodies: dict[str, Expr]) -> Answer | None:
    """A run in which a signal changes twice, from a start state; for a quarter of the time that is left."""
    limits = replace(task.limits, seconds=task.limits.spent() + task.limits.left() / 4)
    try:
        for batch in range(BATCHES):
            states = some_starts(task.circuit, task.environment, LANES, limits, seed=batch)
            for signal, body in bodies.items():
                found = RandomOrders(task.circuit, task.environment, body, batch).search(states, limits)
                if found is not None:
                    return _refutation(task.circuit, signal, found)
    except LimitReached:
        task.limits.check("in random orders")
    return None


def _refutation(circuit: Circuit, signal: str, states: list[int]) -> Answer:
    whole = (*states, *to_rest(circuit, states[-1])[1:])
    run = Run("the run through the hazard", whole, None, circuit.name)
    facts = {"signal": signal, "offending_step": len(states) - 1, "settles": True}
    return Answer("refuted", NAME, runs=(run,), facts=facts)


def _proved(task: Task, bodies: dict[str, Expr]) -> Answer:
    """The formulas may take half of the time that is left: some are for other engines."""
    half = replace(task.limits, seconds=task.limits.spent() + task.limits.left() / 2)
    scripts: dict[str, str] = {}
    for number, (signal, body) in enumerate(bodies.items()):
        made = waveforms(task.circuit, task.environment, body)
        if not Never(made.conditions, half)([made.again]):
            return undecided(f"no run was found in which {signal} changes twice, and none was excluded", NAME)
        confirm(made.conditions, [made.again], task.limits)
        asked = [*made.conditions, made.again]
        names = {s: f"s{i}" for i, s in enumerate(support(*asked))}
        scripts[f"waveforms-{number}"] = script(asked, names, [f"{signal} never changes twice in one response"])
    exercised = known_responses.exercised(Settled(task.circuit), task)
    certificate = {"kind": "waveforms over the input change", "signals": len(bodies)}
    return Answer("proved", NAME, exercised=exercised, certificate=certificate, scripts=scripts)


ENGINE = Engine(NAME, rank=20, answers={Flickers: flickers}, apart=True)
