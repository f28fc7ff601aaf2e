"""Exact reachability with decision diagrams (CUDD through dd), where circuits are deep and the sets of states regular.

An optional part: where the library is missing the engine says so and decides nothing.
"""

from __future__ import annotations

from settled.verify.diagrams.manager import Missing, library
from settled.verify.engines import Engine
from settled.verify.questions import (
    Answer,
    Deadlocks,
    Diverges,
    Evades,
    Flickers,
    Oscillates,
    Question,
    Reaches,
    Task,
    Withdraws,
    undecided,
)

NAME = "decision diagrams"


def answer(task: Task, question: Question) -> Answer:
    """The answer of the diagrams; `undecided` without the library."""
    try:
        library()
    except Missing as missing:
        return undecided(str(missing), NAME)
    from settled.verify.diagrams.answers import answered

    return answered(task, question)


KINDS = (Reaches, Deadlocks, Withdraws, Oscillates, Diverges, Flickers, Evades)
ENGINE = Engine(NAME, rank=40, answers=dict.fromkeys(KINDS, answer), apart=True)
