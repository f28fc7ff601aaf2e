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
    """One way of answering. `answers[kind of question]` takes the task and the question; `rank` orders attempts.

    An engine that is `apart` works in a process of its own beside others, with a memory of its own.
    """

    name: str
    rank: int
    answers: Mapping[type[Question], Callable[[Task, Any], Answer]]
    apart: bool = False


@cache
def engines() -> tuple[Engine, ...]:
    """All engines, the first to try first."""
    found = [import_module(f"{__name__}.{m.name}").ENGINE for m in iter_modules(__path__)]
    return tuple(sorted(found, key=lambda e: (e.rank, e.name)))


def able(question: Question) -> list[Engine]:
    """The engines that answer this kind of question, the first to try first."""
    return [e for e in engines() if type(question) in e.answers]


def attempt(engine: Engine, task: Task, question: Question) -> Answer:
    """What one engine answers; `undecided` with the limit that it reached."""
    try:
        return engine.answers[type(question)](task, question)
    except LimitReached as reached:
        return undecided(str(reached), engine.name)


def decide(task: Task, question: Question) -> Answer:
    """The first decision that an engine at home comes to; else why the last one came to none."""
    answer = undecided("no engine answers this kind of question", "none")
    for engine in able(question):
        if not engine.apart and (answer := attempt(engine, task, question)).verdict != "undecided":
            break
    return answer
