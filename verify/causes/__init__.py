"""The one ordering decision behind a refutation: which two events raced, or which gate was late."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from hashlib import sha256
from typing import Any

from settled.encodings.packed import TooWide
from settled.models.states import Behaviour, Run
from settled.verify.causes.core import Cores
from settled.verify.causes.late_gates import hazard_cause
from settled.verify.causes.racing_events import race_cause
from settled.verify.limits import LimitReached, Limits
from settled.verify.questions import Diverges, Flickers, Question

STATES, SECONDS = 200_000, 10.0
"""Total states of one response that are looked at for a cause, and for how long."""


def explain(behaviour: Behaviour, question: Question, runs: Sequence[Run], facts: Mapping[str, Any]) -> dict[str, Any]:
    """Further facts about a refuted race or hazard: its cause, and the identity of that; empty for other failures."""
    if isinstance(question, Flickers):
        signal = facts["hazard"]["signal"]
        fault = hazard_cause(behaviour, runs[0].states, signal, facts["before"], facts["offending_step"])
        return {"fault": fault, "cause": hazard_identity(signal, fault)}
    if isinstance(question, Diverges):
        return _race(behaviour, [run.states for run in runs], facts["before"])
    return {}


def _race(behaviour: Behaviour, runs: Sequence[Sequence[int]], begin: int) -> dict[str, Any]:
    """The facts about a race, of its core alone where the circuit is too wide; where that is, too, only why."""
    limits = Limits(SECONDS, STATES)
    cores, found = Cores(behaviour, limits), race_cause(behaviour, runs, begin, limits)
    try:
        return {**(found or cores.facts(runs, begin)), "cause": race_identity(cores.events(runs, begin))}
    except (TooWide, LimitReached) as error:
        return found or {"no_fault": str(error)}


def race_identity(events: Sequence[str]) -> str:
    """The identity of a race: of where both paths start from, what came too early, what came too late."""
    return identity("race-free", *events)


def hazard_identity(signal: str, fault: Mapping[str, Any]) -> str:
    """The identity of a hazard: of the signal and of what turned it back."""
    return identity("hazard-free", signal, fault["term"])


def identity(*names: str) -> str:
    """A short name for a cause: the same as long as the names that take part are."""
    return sha256("\n".join(names).encode()).hexdigest()[:8]
