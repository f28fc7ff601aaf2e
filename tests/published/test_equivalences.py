"""Pairs of published circuits: each `equiv` case of the worked examples, with its source in the data file."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import pytest
from property_text import table
from published_cases import cases

from settled.verify import check

EXAMPLES = [
    (case, asked) for case in cases("worked_examples.json") for asked in case["checks"] if asked["k"] == "equiv"
]


def values(state: str | Mapping[str, int], names: list[str]) -> dict[str, int]:
    """A state of the data over these names, as values."""
    if not isinstance(state, str):
        return dict(state)
    return {name: int(bit) for name, bit in zip(names, state.replace(".", ""), strict=True)}


def file(case: Mapping[str, Any], asked: Mapping[str, Any]) -> str:
    """The property file that asks whether output `a` of the one is output `b` of the other, both called `out`."""
    inputs = case["inputs"]
    start = values(asked["from_a"], [*inputs, *case["excitation"]])
    lines = table("circuit", {"inputs": inputs, "outputs": ["out"]})
    lines += table("circuit.excitation", case["excitation"]) + table("circuit.define", {"out": asked["out_a"]})
    lines += table("environment", {"assume": [f"~({bad})" for bad in asked.get("forbid", ())], "start": start})
    lines += table("[property]", {"check": "equivalent"})
    lines += table("property.to", {"inputs": inputs}) + table("property.to.excitation", asked["excitation_b"])
    return "\n".join(lines + table("property.to.define", {"out": asked["out_b"]}))


@pytest.mark.parametrize(("case", "asked"), EXAMPLES, ids=[case["id"] for case, _ in EXAMPLES])
def test_an_equivalence_is_decided_as_published(case: dict[str, Any], asked: dict[str, Any]) -> None:
    (result,) = check("case.toml", text=file(case, asked)).results
    assert result.verdict == ("proved" if asked["equivalent"] else "refuted"), result.claim


def test_all_cases_are_here() -> None:
    assert len(EXAMPLES) == 4
