"""The mutual-exclusion element: two requests, two grants that exclude one another.

The excitation of each grant is its request and not the other grant (Seitz, "System timing", in Mead and Conway,
"Introduction to VLSI Systems", 1980; recalled). When both requests stand, either grant may come and takes away the
excitation of the other, so the pair is not semi-modular; both never come in one and the same step. How long a real
element hesitates between the two has no place in a two-valued model.
"""

from __future__ import annotations

from collections.abc import Sequence

from settled.models.logic import Expr, and_, not_, var
from settled.models.netlist import Gate
from settled.models.source import Span

NAME = "settled_mutex"
"""The module that netlists may use without defining it."""
PORTS = ("r1", "r2", "g1", "g2")
"""Its ports: two requests, two grants."""


def grants(requests: Sequence[Expr], names: Sequence[str], span: Span | None = None) -> tuple[Gate, Gate]:
    """The two grants `names` for two `requests`, as gates."""
    (one, two), (first, second) = requests, names
    return Gate(first, and_(one, not_(var(second))), span), Gate(second, and_(two, not_(var(first))), span)
