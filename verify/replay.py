"""Every run is walked again through the executable meaning of the circuit before anyone sees it."""

from __future__ import annotations

from typing import Any

from settled.models.states import Behaviour, walk
from settled.verify.properties import Kind
from settled.verify.questions import Answer, Question


class ReplayFailed(Exception):
    """A run that does not walk or does not offend: a fault in this program, never a verdict."""


def replay(kind: Kind, behaviour: Behaviour, question: Question, answer: Answer) -> tuple[str, dict[str, Any]]:
    """The sentence that a refutation stands for and its facts. Raises `ReplayFailed`."""
    if not answer.runs:
        raise ReplayFailed(f"{kind.name}: refuted without a run")
    try:
        for run in answer.runs:
            if kind.walk is None:
                walk(behaviour, run, kind.anywhere)
            else:
                kind.walk(behaviour, question, run)
        return kind.offends(behaviour, question, answer)
    except ValueError as error:
        raise ReplayFailed(f"{kind.name}: {error}") from error
