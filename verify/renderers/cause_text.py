"""Causes in words: the ordering decision that is the fault, and the groups of failures with one cause."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from typing import Any

from settled.verify.result import Result

Facts = Mapping[str, Any]


def faults(result: Result) -> list[str]:
    """The ordering decision that is the fault of a race or hazard, in sentences; none where causes are listed."""
    if result.facts.get("causes"):
        return []
    if "no_fault" in result.facts:
        return [f"the fault is not singled out: {result.facts['no_fault']}"]
    named = f"; cause {result.facts['cause']}" if "cause" in result.facts else ""
    if "race" in result.facts:
        fault, decided = _race(result.facts, [trace.title for trace in result.traces])
        return [f"the fault: {fault}{named}", decided]
    return [f"the fault: {_hazard(result.facts)}{named}"] if "fault" in result.facts else []


def _race(facts: Facts, titles: Sequence[str]) -> tuple[str, str]:
    race = facts["race"]
    early, late = race["events"]["early"], race["events"]["late"]
    place = f"{titles[race['trace']]}, step {race['step']}"
    one, two = (f"{title} by step {step}" for title, step in zip(titles, facts["decided_at"], strict=True))
    return (
        f"after {facts['change']}, {race['late']} was late: {early} did not wait for {late} ({place}); "
        f"both paths start from {race['fork'].replace('/', ' and ')}",
        f"decided: {one}, {two}; from there on each can only end as it does",
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
    """What is shown one after the other: the result itself, or each cause as a result with its heading."""
    if not result.facts.get("causes"):
        yield "", result
        return
    causes, shown = result.facts["causes"], (*result.traces, *result.further)
    for number, cause in enumerate(causes, 1):
        changes = "1 input change" if cause["explains"] == 1 else f"{cause['explains']:,} input changes"
        traces = tuple(shown[i] for i in cause["traces"])
        heading = f"cause {cause['id']} ({number} of {len(causes)}), explains {changes}"
        yield heading, replace(result, claim=cause["claim"], traces=traces, facts=_own(cause))


def _own(cause: Facts) -> Facts:
    return {k: v for k, v in cause.items() if k not in ("id", "cause", "explains", "claim", "traces")}
