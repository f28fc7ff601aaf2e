"""Refutations of the handshake checks are looked at again before they are shown: what does not offend is refused."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import pytest

from settled.models.circuit import Circuit
from settled.models.environment import Environment, Guard
from settled.models.logic import TRUE, Expr, and_, not_, var
from settled.models.states import Behaviour, Run, pack
from settled.verify.properties import kinds
from settled.verify.questions import Answer
from settled.verify.replay import ReplayFailed, replay

FOLLOWER = Circuit("follower", ("d",), ("g", "q"), {"g": var("d"), "q": var("g")})
FREE = Environment(mode="input-output", start={"d": 0, "g": 0, "q": 0})
PUSHED = Environment(mode="input-output", start=FREE.start, guards={"d": Guard(must=True)})
ONCE = Environment(mode="input-output", start=FREE.start, guards={"d": Guard(falls=not_(TRUE))})


def run(circuit: Circuit, *states: str, loop: int | None = None) -> Run:
    """A run through states given by the names of the signals that are 1."""
    values = [{s: int(s in state.split()) for s in circuit.signals} for state in states]
    return Run("a run", tuple(pack(circuit, v) for v in values), loop, circuit.name)


def judged(
    circuit: Circuit, environment: Environment, check: str, shown: Run, options: Mapping[str, Any] | None = None
) -> tuple[str, dict[str, Any]]:
    kind = kinds()[check]
    question = kind.question(circuit, options or {})
    return replay(kind, Behaviour(circuit, environment), question, Answer("refuted", "by hand", runs=(shown,)))


def goal(source: Expr, target: Expr) -> dict[str, Expr]:
    return {"from": source, "to": target}


def test_a_withdrawal_names_who_switched_and_who_lost_its_excitation() -> None:
    shown = run(FOLLOWER, "", "d", "")
    sentence, facts = judged(FOLLOWER, FREE, "speed-independent", shown)
    assert sentence == "In d=1 g=0 q=0, d- takes away the excitation of g (g+ was due)."
    assert facts == {"switched": ["d"], "withdrawn": ["g"]}


@pytest.mark.parametrize(
    ("shown", "options"), [(("", "d", "d g"), {}), (("",), {}), (("", "d", ""), {"except": ("g",)})]
)
def test_no_withdrawal(shown: tuple[str, ...], options: dict[str, Any]) -> None:
    with pytest.raises(ReplayFailed):
        judged(FOLLOWER, FREE, "speed-independent", run(FOLLOWER, *shown), options)


def test_a_dead_end() -> None:
    sentence, _ = judged(FOLLOWER, ONCE, "deadlock-free", run(FOLLOWER, "", "d", "d g", "d g q"))
    assert sentence == "A dead end is reachable: in d=1 g=1 q=1 no node is excited and no input may change."
    with pytest.raises(ReplayFailed):
        judged(FOLLOWER, ONCE, "deadlock-free", run(FOLLOWER, "", "d", "d g"))
    with pytest.raises(ReplayFailed):
        judged(FOLLOWER, FREE, "deadlock-free", run(FOLLOWER, "", "d", "d g", "d g q"))


def test_a_run_may_end_where_nothing_must_move() -> None:
    sentence, facts = judged(FOLLOWER, FREE, "leads-to", run(FOLLOWER, ""), goal(not_(var("d")), var("q")))
    assert sentence == "After ~d in step 0 the run may end in d=0 g=0 q=0 without q."
    assert facts == {"from_step": 0, "ends": True}
    with pytest.raises(ReplayFailed, match="waiting"):
        judged(FOLLOWER, PUSHED, "leads-to", run(FOLLOWER, ""), goal(not_(var("d")), var("q")))
    with pytest.raises(ReplayFailed, match="waiting"):
        judged(FOLLOWER, FREE, "leads-to", run(FOLLOWER, "", "d"), goal(var("d"), var("q")))


def test_a_run_may_go_round_when_nothing_presses_all_the_time() -> None:
    swallowed = run(FOLLOWER, "", "d", "", loop=0)
    sentence, facts = judged(FOLLOWER, PUSHED, "leads-to", run(FOLLOWER, "", "d", loop=0), goal(var("d"), var("g")))
    assert sentence == "After d in step 1 d can go round for ever without g."
    assert facts == {"from_step": 1, "ends": False}
    with pytest.raises(ReplayFailed):
        judged(FOLLOWER, PUSHED, "leads-to", swallowed, goal(var("d"), var("g")))


@pytest.mark.parametrize(
    ("source", "target"), [(var("q"), var("g")), (var("d"), var("d")), (not_(var("d")), not_(var("d")))]
)
def test_a_loop_that_evades_nothing(source: Expr, target: Expr) -> None:
    with pytest.raises(ReplayFailed):
        judged(FOLLOWER, PUSHED, "leads-to", run(FOLLOWER, "", "d", loop=0), goal(source, target))


def test_a_loop_in_which_a_node_waits_all_the_time_is_not_fair() -> None:
    never = Guard(not_(TRUE), not_(TRUE))
    held = Environment(mode="input-output", start={"en": 1, "y": 0, "z": 1}, guards={"en": never})
    stays = Circuit("stays", ("en",), ("y", "z"), {"y": not_(var("y")), "z": not_(var("en"))})
    with pytest.raises(ReplayFailed, match="fair"):
        judged(stays, held, "leads-to", run(stays, "en z", "en z y", loop=0), goal(var("en"), not_(var("z"))))


def test_a_loop_under_bursts_is_one_in_which_the_burst_may_be_over() -> None:
    swings = Circuit("swings", ("a", "b"), ("y",), {"y": and_(var("a"), not_(var("b")), not_(var("y")))})
    bursts = Environment(changes="burst", start={"a": 0, "b": 0})
    evaded = goal(var("a"), var("b"))
    sentence, _ = judged(swings, bursts, "leads-to", run(swings, "", "a", "a y", loop=1), evaded)
    assert sentence == "After a in step 1 y can go round for ever without b."
    with pytest.raises(ReplayFailed, match="no lawful move"):
        judged(swings, bursts, "leads-to", run(swings, "", "a", "a b", "a", loop=1), evaded)
