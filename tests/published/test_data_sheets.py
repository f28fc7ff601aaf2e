"""Function tables of data sheets, asked of circuits that behave like the parts (`data_sheets.json`).

* `levels`: inputs, and what holds in every stable total state with them;
* `changes`: an event, what holds before it, and what holds once the circuit is stable again; `keeps` means that the
  output never leaves the value that it had.
"""

from __future__ import annotations

from typing import Any

import pytest
from published_cases import Subject, cases, conjunction, frozen

Case = dict[str, Any]
CASES = cases("data_sheets.json")


def rows(kind: str) -> pytest.MarkDecorator:
    """Every row of one kind of every part."""
    found = [pytest.param(case, row, id=f"{case['id']}: {' '.join(row)}") for case in CASES for row in case[kind]]
    return pytest.mark.parametrize(("case", "row"), found)


def subject(case: Case) -> Subject:
    """The part with a delay in every gate."""
    return Subject(tuple(case["inputs"]), case["excitation"])


@rows("levels")
def test_levels(case: Case, row: list[str]) -> None:
    inputs, then = row
    (settled,) = subject(case).check({}, {"check": "always", "when": "stable", "expr": f"~({inputs}) | {then}"})
    assert settled.verdict == "proved", case["source"]
    assert occurs(case, inputs)


@rows("changes")
def test_changes(case: Case, row: list[str]) -> None:
    event, before, after = row
    moved, new = event[:-1], int(event[-1] == "+")
    guards = frozen(case["inputs"]) | {moved: {"rises": before if new else "0", "falls": "0" if new else before}}
    old = {moved: 1 - new}
    starts = [old | {case["output"]: value} for value in (0, 1)]
    possible = [start for start in starts if occurs(case, f"{conjunction(start)} & ({before})")]
    assert possible
    for start in possible:
        ends = {"check": "always", "when": "stable", "expr": f"{conjunction(old)} | {after}"}
        if after == "keeps":
            ends = {"check": "always", "expr": conjunction({case["output"]: start[case["output"]]})}
        (result,) = subject(case).check({"start": start, "inputs": guards}, ends)
        assert result.verdict == "proved", case["source"]
        assert result.ranged["input_changes"] > 0


def occurs(case: Case, expression: str) -> bool:
    """Whether some stable total state satisfies the expression."""
    (result,) = subject(case).check({}, {"check": "never", "when": "stable", "expr": expression})
    return result.verdict == "refuted"
