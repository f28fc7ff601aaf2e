"""Refutations of a comparison looked at once more, by the executable meaning of both sides alone."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

from settled.models.circuit import Circuit
from settled.models.logic import not_, var
from settled.models.states import Behaviour, Run, Situation, value
from settled.verify.questions import Answer
from settled.verify.responses import changed_inputs, describe, excited_throughout
from settled.verify.stable_states import satisfiable, start_conditions

History = tuple[tuple[int, ...], ...]
"""The changes that a run has been through: for each the packed sets of inputs that changed, one set an instant."""

Hazard = Callable[[History], tuple[str, dict[str, Any]]]

LISTED = 32
"""Signals up to which a total state is written out in a sentence."""

KEPT = ("fewest_changes", "in_step", "partners", "races", "perhaps_fewer")


@dataclass(frozen=True)
class Side:
    """One side of a comparison, the original or the other.

    * `values(state)`: the compared outputs in a total state; None where a value does not matter.
    * `starts_under(vector)`: whether there is a start state under a packed input vector.
    * `needs_partners`: whether each of its start states must have a partner.
    * `describe(state)`: a total state in words.
    """

    behaviour: Behaviour
    values: Callable[[int], Sequence[int | None]]
    starts_under: Callable[[int], bool]
    needs_partners: bool
    describe: Callable[[int], str]

    @property
    def circuit(self) -> Circuit:
        """The circuit of this side."""
        return self.behaviour.circuit


def circuit_side(behaviour: Behaviour, outputs: Sequence[str], needs_partners: bool = True) -> Side:
    """A circuit as one side."""
    circuit = behaviour.circuit
    signals = [circuit.signal(z) for z in outputs]

    def starts_under(vector: int) -> bool:
        fixed = [var(x) if vector >> i & 1 else not_(var(x)) for i, x in enumerate(circuit.inputs)]
        return satisfiable(circuit, [*start_conditions(circuit, behaviour.environment), *fixed])

    return Side(
        behaviour,
        lambda state: value(circuit, signals, state),
        starts_under,
        needs_partners,
        lambda state: in_words(circuit, outputs, state),
    )


def in_words(circuit: Circuit, outputs: Sequence[str], state: int) -> str:
    """A total state in words; of a wide circuit its inputs and the compared outputs."""
    if len(circuit.signals) <= LISTED:
        return describe(circuit, state)
    shown = (*circuit.inputs, *outputs)
    values = value(circuit, map(circuit.signal, shown), state)
    return " ".join(f"{s}={v}" for s, v in zip(shown, values, strict=True))


def judge(
    sides: tuple[Side, Side], answer: Answer, outputs: Sequence[str], hazard: Hazard | None = None
) -> tuple[str, dict[str, Any]]:
    """The sentence that the runs of a refutation stand for, and facts. Raises `ValueError` when they show no failure.

    `hazard` judges a hazard of the other side in the last of the changes, when the answer says that it shows one.
    """
    facts = {k: v for k, v in answer.facts.items() if k in KEPT}
    if len(answer.runs) == 1:
        return lonely(sides, answer.runs[0]), facts
    runs = answer.runs[0], answer.runs[1]
    changes = common_history(sides, runs, facts["fewest_changes"])
    states = [side.describe(run.states[0]) for side, run in zip(sides, runs, strict=True)]
    facts["changes"] = text = change_text(sides[0].circuit, runs[0].states[0], changes)
    opening = f"After {text} from {' and '.join(states)}" if changes else f"In the start states {' and '.join(states)}"
    if any(run.loop is not None for run in runs):
        return f"{opening}: {restless(sides, runs)}.", facts
    if hazard is not None and "signal" in answer.facts:
        sentence, more = hazard(changes)
        return f"{opening}: {sentence}.", facts | more
    sentence, different = apart(sides, runs, outputs)
    return f"{opening}: {sentence}{_open(answer)}.", {**facts, "difference": different}


def lonely(sides: tuple[Side, Side], run: Run) -> str:
    """A start state that no start state of the other side goes with."""
    mine, facing = sides if run.circuit == sides[0].circuit.name else sides[::-1]
    vector = run.states[0] & mine.circuit.input_mask
    if len(run.states) != 1 or not mine.needs_partners:
        raise ValueError("the run is not a start state that needs a partner")
    if facing.starts_under(vector):
        raise ValueError("the start state has a partner")
    return (
        f"The start state {mine.describe(run.states[0])} of {mine.circuit.name} has no partner: "
        f"{facing.circuit.name} has no start state under that input vector."
    )


def common_history(sides: tuple[Side, Side], runs: tuple[Run, Run], count: int) -> History:
    """The changes that both runs have been through, so many of them, with nothing outstanding at the end."""
    if (runs[0].states[0] ^ runs[1].states[0]) & sides[0].circuit.input_mask:
        raise ValueError("the runs begin under different input vectors")
    common = histories(sides[0].behaviour, runs[0]) & histories(sides[1].behaviour, runs[1])
    ways = [past for past, outstanding in sorted(common) if not outstanding and len(past) == count]
    if not ways:
        raise ValueError("the runs do not go through the same changes")
    return ways[0]


def histories(behaviour: Behaviour, run: Run) -> set[tuple[History, int]]:
    """The changes that a run can have been through, each with what is still outstanding at its end."""
    mask = behaviour.circuit.input_mask
    now: set[tuple[History, Situation]] = {((), Situation(run.states[0]))}
    for before, state in pairwise(run.states):
        moved = (before ^ state) & mask
        after: set[tuple[History, Situation]] = set()
        for past, at in now:
            grown = (*past[:-1], (*past[-1], moved)) if moved and past else past
            after |= {(grown, s) for s in behaviour.responses_to(at, state)}
            after |= {((*past, (moved,)), s) for s in behaviour.changes_to(at, state)}
        now = after
    return {(past, at.outstanding) for past, at in now}


def change_text(circuit: Circuit, state: int, changes: History) -> str:
    """Changes as the trade writes them: `s+; r-`, the members of a burst in their order joined by `then`."""
    words = []
    for change in changes:
        instants = []
        for moved in change:
            instants.append(changed_inputs(circuit, state, state ^ moved))
            state ^= moved
        words.append(" then ".join(instants))
    return "; ".join(words)


def restless(sides: tuple[Side, Side], runs: tuple[Run, Run]) -> str:
    """Who goes round for ever."""
    names = []
    for side, run in zip(sides, runs, strict=True):
        if run.loop is None:
            continue
        circle = run.states[run.loop :]
        if len({s & side.circuit.input_mask for s in circle}) != 1 or excited_throughout(side.circuit, circle):
            raise ValueError("the loop is not fair, or its inputs are not held")
        names.append(side.circuit.name)
    return f"{' and '.join(names)} can go round for ever: see the property `settles`"


def apart(sides: tuple[Side, Side], runs: tuple[Run, Run], outputs: Sequence[str]) -> tuple[str, dict[str, list[int]]]:
    """The outputs that differ where both runs have come to rest."""
    if not all(side.behaviour.is_stable(run.states[-1]) for side, run in zip(sides, runs, strict=True)):
        raise ValueError("a run does not end in a stable total state")
    shown = zip(outputs, *(side.values(run.states[-1]) for side, run in zip(sides, runs, strict=True)), strict=True)
    different = {z: [a, b] for z, a, b in shown if a is not None and b is not None and a != b}
    if not different:
        raise ValueError("the outputs agree at the end of the runs")
    one, two = (side.circuit.name for side in sides)
    return ", ".join(f"{z} is {a} in {one} and {b} in {two}" for z, (a, b) in different.items()), different


def _open(answer: Answer) -> str:
    """Whose own races leave the outputs open, if anyone's; and whether fewer changes may do."""
    names = dict.fromkeys(race["circuit"] for race in answer.facts.get("races", ()))
    whose = " and ".join(names)
    if names:
        alone = "itself" if len(names) == 1 else "each"
        return f" ({whose} can {alone} end in different states on the way: see the property `race-free`)"
    return " (perhaps fewer do, for some response may have several ends)" if "perhaps_fewer" in answer.facts else ""
