"""Causes in words: the ordering decision that is the fault, and the groups of failures with one cause."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from typing import Any

from settled.verify.result import Result

Facts = Mapping[str, Any]


def faults(result: Result) -> list[str]:
    """The decision that is the fault of a race or hazard in one sentence, of each cause where all are listed."""
    if result.facts.get("causes"):
        return [f"{heading}: {fault}" for heading, group in groups(result) for fault in _fault(group)]
    return [f"the fault: {fault}" for fault in _fault(result)]


def _fault(result: Result) -> list[str]:
    if "race" in result.facts:
        return [_race(result.facts, [trace.title for trace in result.traces])]
    return [_hazard(result.facts)] if "fault" in result.facts else []


def _race(facts: Facts, titles: Sequence[str]) -> str:
    race = facts["race"]
    early, late = race["events"]["early"], race["events"]["late"]
    decided = [f"{title} by step {step}" for title, step in zip(titles, facts["decided_at"], strict=True)]
    return (
        f"after {facts['change']}, {race['late']} was late: {early} did not wait for {late} "
        f"({titles[race['trace']]}, step {race['step']}); both paths start from {race['fork'].replace('/', ' and ')}; "
        f"decided: {decided[0]}, {decided[1]}"
    )


def _hazard(facts: Facts) -> str:
    found, signal = facts["fault"], facts["hazard"]["signal"]
    events, begun = found["events"], f"after {facts['change']}, "
    if found["late"] is None:
        return f"{begun}{signal} turned itself back through {events['term']}"
    waited = f"{found['late']} was late: {events['signal']} did not wait for {events['late']}"
    if found["late"] == found["term"]:
        return f"{begun}{waited}, which then turned {signal} back"
    return f"{begun}{waited}; {events['term']} then turned {signal} back"


def groups(result: Result) -> Iterator[tuple[str, Result]]:
    """Each cause of a result that lists them: a heading, and the result as of this cause alone."""
    causes, shown = result.facts["causes"], (*result.traces, *result.further)
    for number, cause in enumerate(causes, 1):
        changes = "1 input change" if cause["explains"] == 1 else f"{cause['explains']:,} input changes"
        traces = tuple(shown[i] for i in cause["traces"])
        heading = f"cause {number} of {len(causes)}, {cause['id']}, explains {changes}"
        yield heading, replace(result, claim=cause["claim"], traces=traces, facts=_own(cause))


def _own(cause: Facts) -> Facts:
    return {k: v for k, v in cause.items() if k not in ("id", "explains", "claim", "traces")}
