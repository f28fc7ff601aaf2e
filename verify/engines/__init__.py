"""Engines: ways of answering questions. One file each; it states `ENGINE`, found by listing this folder."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from importlib import import_module
from pkgutil import iter_modules
from typing import Any

from settled.verify.questions import Answer, Question, Task


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
