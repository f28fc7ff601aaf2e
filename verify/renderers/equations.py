"""The excitation equations of a circuit as one would write them by hand: minimal sums of products."""

from __future__ import annotations

from settled.models.circuit import Circuit
from settled.models.logic import escape, to_text
from settled.models.two_level import LARGEST, sum_of_products
from settled.verify.renderers.page import Page

NOTE = "A minimal form has no consensus terms: read behaviour off it, not hazards."


def render(circuit: Circuit, file: str, title: str, page: Page) -> str:
    """One line a node, and one for each output that is no node; long excitations as they were written."""
    lines = [page.paint("strong", line) for line in page.wrap(f"{file}: {title}" if title else file)] + [""]
    lines += page.wrap(f"{circuit.delay} delays", "  model  ")
    named = {n: circuit.excitation[n] for n in circuit.nodes}
    named |= {z: circuit.defined[z] for z in circuit.outputs if z in circuit.defined}
    width = max(len(escape(n)) for n in named) if named else 0
    whole = True
    for name, body in named.items():
        minimal = sum_of_products(body)
        whole = whole and minimal is not None
        sign = "follows" if name in circuit.excitation else "is"
        lines += page.wrap(to_text(body if minimal is None else minimal), f"  {escape(name):{width}}  {sign:7}  ")
    lines += ["", *page.wrap(NOTE)]
    if not whole:
        lines += page.wrap(f"Functions of more than {LARGEST} signals stand as they were written.")
    return "\n".join(lines)
