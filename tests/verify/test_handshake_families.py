"""Arbiters and token rings of growing size: users never collide, nothing stops, excitations go by choice only.

The names and the protocol are those of the gallery; larger sizes are for the symbolic engines.
"""

from __future__ import annotations

import pytest
from handshakes import Case, arbiter_tree, token_ring, two_clients, two_turns
from judging import session_of

from settled.models.logic import not_, var
from settled.models.specification import Property


def verdicts(case: Case, *properties: Property) -> list[str]:
    return [result.verdict for result in session_of(*case, properties).results()]


@pytest.mark.parametrize(("clients", "winners"), [(2, "any"), (2, "one"), (3, "any"), (4, "any"), (5, "one")])
def test_arbiter_tree(clients: int, winners: str) -> None:
    circuit, environment = arbiter_tree(clients, winners)
    chosen = tuple(grant for pair in circuit.exclusive for grant in pair)
    assert verdicts(
        (circuit, environment),
        Property("exclusion", "never", {"expr": two_clients(clients)}),
        Property("choice", "speed-independent", {"except": chosen}),
        Property("no choice", "speed-independent"),
        Property("live", "deadlock-free"),
    ) == ["proved", "proved", "refuted", "proved"]


@pytest.mark.parametrize("cells", [3, 4, 5])
def test_token_ring(cells: int) -> None:
    assert (
        verdicts(
            token_ring(cells),
            Property("exclusion", "never", {"expr": two_turns(cells)}),
            Property("no choice", "speed-independent"),
            Property("live", "deadlock-free"),
            Property("turns", "leads-to", {"from": not_(var("t1")), "to": var("t1")}),
        )
        == ["proved"] * 4
    )
