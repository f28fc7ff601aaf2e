"""A flow table in the notation in which it is read: see `settled.models.readers.flow_table`."""

from __future__ import annotations

import re

from settled.models.flow_table import Bit, FlowTable
from settled.verify.renderers.page import columns, pad
from settled.verify.transition_table import gray


def render(table: FlowTable) -> str:
    """The text: columns in Gray order, notes as comments."""
    vectors = gray(len(table.inputs))
    head = [_head(table), *("".join(map(str, vector)) for vector in vectors)]
    packed = [sum(bit << i for i, bit in enumerate(vector)) for vector in vectors]
    lines = [head, *([row, *(_entry(table, row, v) for v in packed)] for row in table.rows)]
    widths = [max(columns(line[i]) for line in lines) + 1 for i in range(len(head))]
    text = [
        " ".join(pad(c + ",", w) for c, w in zip(line[:-1], widths, strict=False)) + " " + line[-1] for line in lines
    ]
    return "\n".join([*(f"# {note}" for note in table.notes), *text]) + "\n"


def _head(table: FlowTable) -> str:
    inputs, outputs = (" ".join(map(_signal, names)) for names in (table.inputs, table.outputs))
    head = f"{inputs} / {outputs}" if outputs else inputs
    return f'"{head}"' if "," in head else head


def _signal(name: str) -> str:
    """The name with a backslash where it would not be read as one word."""
    return name if re.fullmatch(r"[^\\/,\"\s]+", name) else f"\\{name}"


def _entry(table: FlowTable, row: str, vector: int) -> str:
    entry = table.entries[row, vector]
    if entry.after is None:
        return "-"
    shown = f"({row})" if entry.after == row else entry.after
    given = "".join(map(_bit, entry.outputs))
    return shown if set(given) <= {"-"} else f"{shown}/{given}"


def _bit(bit: Bit) -> str:
    return "-" if bit is None else str(bit)
