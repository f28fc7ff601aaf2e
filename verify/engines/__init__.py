"""Engines: ways of answering questions. One file each; it states `ENGINE`, found by listing this folder."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from importlib import import_module
from pkgutil import iter_modules
from typing import Any

from settled.verify.limits import LimitReached
from settled.verify.questions import Answer, Question, Task, undecided


@dataclass(frozen=True)
class Engine:
    """One way of answering. `answers[kind of question]` takes the task and the question; `rank` orders attempts."""

    name: str
    rank: int
    answers: Mapping[type[Question], Callable[[Task, Any], Answer]]


@cache
def engines() -> tuple[Engine, ...]:
    """All engines, the first to try first."""
    found = [import_module(f"{__name__}.{m.name}").ENGINE for m in iter_modules(__path__)]
    return tuple(sorted(found, key=lambda e: (e.rank, e.name)))


def decide(task: Task, question: Question) -> Answer:
    """The first decision that an engine comes to; else why the last one came to none."""
    answer = undecided("no engine answers this kind of question", "none")
    for engine in engines():
        if type(question) in engine.answers:
            try:
                answer = engine.answers[type(question)](task, question)
            except LimitReached as reached:
                answer = undecided(str(reached), engine.name)
            if answer.verdict != "undecided":
                break
    return answer
