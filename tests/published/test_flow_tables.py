"""Published flow tables: each `ess` case of the worked examples, with its source in the data file."""

from __future__ import annotations

from typing import Any

import pytest
from published_cases import cases

from settled.models.flow_table import Entry, FlowTable

EXAMPLES = [(case, asked) for case in cases("worked_examples.json") for asked in case["checks"] if asked["k"] == "ess"]


def table(case: dict[str, Any]) -> FlowTable:
    """The table of a case: by row and vector (bits in the order of the inputs) the next row."""
    entries = {
        (row, sum(1 << i for i, bit in enumerate(vector) if bit == "1")): Entry(after, ())
        for row, line in case["flow_table"].items()
        for vector, after in line.items()
    }
    return FlowTable(case["id"], tuple(case["inputs"]), (), tuple(case["flow_table"]), entries)


@pytest.mark.parametrize(("case", "asked"), EXAMPLES, ids=[case["id"] for case, _ in EXAMPLES])
def test_essential_hazards_by_ungers_rule(case: dict[str, Any], asked: dict[str, Any]) -> None:
    found = table(case)
    place = {x: 1 << i for i, x in enumerate(found.inputs)}

    def text(vector: int) -> str:
        return "".join(str(vector >> i & 1) for i in range(len(found.inputs)))

    listed = [[h.row, text(h.vector), text(h.vector ^ place[h.input]), *h.rows] for h in found.essential_hazards()]
    assert sorted(listed) == sorted(asked["expect"])


def test_all_cases_are_here() -> None:
    assert len(EXAMPLES) == 3
