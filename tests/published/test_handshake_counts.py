"""Numbers of total states of pipelines and rings of C-elements, and that they never stop nor withdraw an excitation.

Pipeline: Muller 1955, recalled. Counts: by formula, each confirmed by an enumeration apart from this program. With a
node for the environment at either end 2^(N+2) states and (N+4)*2^N moves of one node, without 2^N states, with an
inverter node a stage 4*3^N; a ring with w places where neighbours differ 2*C(N,w).
"""

from __future__ import annotations

import pytest
from handshakes import Case, pipeline, ring, ring_states
from judging import session_of

from settled.encodings.packed import Packed
from settled.models.logic import not_, var
from settled.models.specification import Property
from settled.verify.explicit.graph import Graph
from settled.verify.limits import Limits

SPEED = Property("delays", "speed-independent")
LIVE = Property("no dead end", "deadlock-free")


def counted(case: Case) -> int:
    """The number of total states reached."""
    return len(Graph(Packed(*case), Limits()))


def verdicts(case: Case, *properties: Property) -> list[str]:
    """The verdicts of the whole program."""
    return [result.verdict for result in session_of(*case, properties).results()]


@pytest.mark.parametrize("stages", range(1, 15))
def test_pipeline_with_an_environment_node_at_either_end(stages: int) -> None:
    graph = Graph(Packed(*pipeline(stages, winners="one")), Limits())
    assert (len(graph), len(graph.step_edges.source)) == (2 ** (stages + 2), (stages + 4) * 2**stages)


@pytest.mark.parametrize("stages", range(1, 13))
def test_pipeline_wired_back_without_delay(stages: int) -> None:
    assert counted(pipeline(stages, ends=False)) == 2**stages


@pytest.mark.parametrize("stages", range(1, 10))
def test_pipeline_with_an_inverter_node_a_stage(stages: int) -> None:
    assert counted(pipeline(stages, inverters=True, winners="one")) == 4 * 3**stages


@pytest.mark.parametrize("stages", range(1, 9))
@pytest.mark.parametrize("ends", [True, False])
@pytest.mark.parametrize("inverters", [True, False])
def test_pipelines_are_semi_modular_and_never_stop(stages: int, ends: bool, inverters: bool) -> None:
    assert verdicts(pipeline(stages, ends, inverters, winners="one"), SPEED, LIVE) == ["proved", "proved"]


@pytest.mark.parametrize(("stages", "changes"), [(n, w) for n in range(3, 11) for w in range(2, min(n, 8) + 1, 2)])
def test_ring(stages: int, changes: int) -> None:
    """Every ring is semi-modular; it stops only when all neighbours differ."""
    dead = changes == stages
    assert counted(ring(stages, changes)) == (1 if dead else ring_states(stages, changes))
    assert verdicts(ring(stages, changes), SPEED, LIVE) == ["proved", "refuted" if dead else "proved"]


@pytest.mark.parametrize("stages", [4, 7])
def test_ring_without_a_change_is_a_dead_end(stages: int) -> None:
    assert verdicts(ring(stages, 0), SPEED, LIVE) == ["proved", "refuted"]


FAMILIES = {
    "ends with delay": lambda winners: pipeline(5, winners=winners),
    "ends without delay": lambda winners: pipeline(5, ends=False, winners=winners),
    "inverters": lambda winners: pipeline(4, inverters=True, winners=winners),
    "ring": lambda winners: ring(7, 4, winners=winners),
}


@pytest.mark.parametrize("winners", ["any", "one"])
@pytest.mark.parametrize("family", FAMILIES)
def test_data_moves_on_for_ever_whatever_the_delays(family: str, winners: str) -> None:
    stage = var("c3")
    arrives = Property("arrives", "leads-to", {"from": not_(stage), "to": stage})
    leaves = Property("leaves", "leads-to", {"from": stage, "to": not_(stage)})
    assert verdicts(FAMILIES[family](winners), SPEED, LIVE, arrives, leaves) == ["proved"] * 4
