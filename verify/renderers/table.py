"""The transition table as on paper: input vectors across, internal states down, stable entries in parentheses."""

from __future__ import annotations

from collections.abc import Sequence
from math import ceil

from settled.verify.renderers.page import Page, columns, pad, visible
from settled.verify.transition_table import Entry, TransitionTable

MARGIN = "  "
GAP = "  "


def render(table: TransitionTable, file: str, title: str, page: Page, *, outputs: bool = False) -> str:
    """The table with a head that says what its digits stand for, in as many blocks as the page needs."""
    circuit = table.circuit
    lines = [page.paint("strong", line) for line in page.wrap(f"{file}: {title}" if title else file)] + [""]
    for what, said in _legend(table, outputs and bool(circuit.outputs)):
        lines += page.wrap(said, f"{MARGIN}{pad(what, 9)}")
    heads = [_digits(vector) or "any" for vector in table.columns]
    cells = [[_cell(e, outputs) for e in row] for row in table.entries]
    width = max(map(len, [*heads, *(cell for row in cells for cell in row)]))
    states = [_digits(state) for state in table.rows]
    fitting = max(1, (page.width - len(MARGIN) - len(states[0])) // (len(GAP) + width))
    step = ceil(len(heads) / ceil(len(heads) / fitting))
    for start in range(0, len(heads), step):
        part = slice(start, start + step)
        lines += ["", _line("", [f" {head}" for head in heads[part]], len(states[0]), width, page)]
        lines += [
            _line(state, row[part], len(states[0]), width, page) for state, row in zip(states, cells, strict=True)
        ]
    return "\n".join(lines)


def _legend(table: TransitionTable, outputs: bool) -> list[tuple[str, str]]:
    circuit = table.circuit
    entry = f"next {_names(circuit.nodes)}, every excited node having followed"
    said = [
        ("model", f"{circuit.delay} delays"),
        ("across", _names(circuit.inputs) if circuit.inputs else "nothing: the circuit has no inputs"),
        ("down", _names(circuit.nodes)),
        ("entry", f"{entry}; after the comma {_names(circuit.outputs)} now" if outputs else entry),
        ("( )", "stable"),
    ]
    forbidden = any(entry is None for row in table.entries for entry in row)
    return said + ([("-", "an input vector that the assumptions rule out")] if forbidden else [])


def _names(names: Sequence[str]) -> str:
    return " ".join(names)


def _digits(values: Sequence[int]) -> str:
    return "".join(map(str, values))


def _cell(entry: Entry | None, outputs: bool) -> str:
    if entry is None:
        return " -"
    text = _digits(entry.after)
    text = f"({text})" if entry.stable else f" {text} "
    return f"{text},{_digits(entry.outputs)}" if outputs and entry.outputs else text


def _line(state: str, cells: Sequence[str], first: int, width: int, page: Page) -> str:
    shown = [page.paint("good" if "(" in cell else "", cell) + " " * (width - columns(cell)) for cell in cells]
    return (MARGIN + pad(visible(state), first) + GAP + GAP.join(shown)).rstrip()
