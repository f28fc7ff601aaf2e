"""The executable meaning on circuits small enough to check by hand."""

from __future__ import annotations

import pytest

from settled.models.circuit import Circuit
from settled.models.environment import Environment, Guard
from settled.models.logic import and_, not_, or_, var
from settled.models.states import Behaviour, Run, Situation, excited, pack, subsets, successors, unpack, walk

S, R, Q, P = map(var, "srqp")
LATCH = Circuit("latch", ("s", "r"), ("q", "p"), {"q": not_(or_(R, P)), "p": not_(or_(S, Q))}, ("q",))


def state(s: int, r: int, q: int, p: int) -> int:
    return pack(LATCH, {"s": s, "r": r, "q": q, "p": p})


def test_packing_goes_both_ways() -> None:
    assert unpack(LATCH, state(1, 0, 1, 0)) == {"s": 1, "r": 0, "q": 1, "p": 0}


def test_each_node_holds_or_follows() -> None:
    both = state(0, 0, 0, 0)
    assert excited(LATCH, both) == 0b1100
    assert sorted(successors(LATCH, both)) == [state(0, 0, 1, 0), state(0, 0, 0, 1), state(0, 0, 1, 1)]


def test_subsets_are_all_and_in_order() -> None:
    assert list(subsets(0b101)) == [0b001, 0b100, 0b101]


def test_single_changes_move_one_input_of_a_stable_state() -> None:
    behaviour = Behaviour(LATCH, Environment(assume=(not_(and_(S, R)),)))
    after = {at.state for at in behaviour.moves(Situation(state(1, 0, 1, 0)))}
    assert after == {state(0, 0, 1, 0)}


def test_a_guard_is_asked_in_the_state_of_the_change() -> None:
    environment = Environment(guards={"s": Guard(rises=not_(Q)), "r": Guard(rises=Q)})
    behaviour = Behaviour(LATCH, environment)
    assert behaviour.allowed(state(0, 0, 1, 0)) == 0b10
    assert behaviour.allowed(state(0, 0, 0, 1)) == 0b01


def test_a_burst_arrives_one_by_one_and_may_share_an_instant_with_nodes() -> None:
    behaviour = Behaviour(LATCH, Environment(changes="burst"))
    first = list(behaviour.changes(Situation(state(1, 1, 0, 0))))
    assert Situation(state(0, 1, 0, 0), 0b10) in first and Situation(state(1, 0, 0, 0), 0b01) in first
    later = set(behaviour.responses(Situation(state(0, 1, 0, 0), 0b10)))
    assert later == {
        Situation(state(0, 1, 0, 1), 0b10),
        Situation(state(0, 0, 0, 0), 0),
        Situation(state(0, 0, 0, 1), 0),
    }


def test_a_burst_without_an_admitted_order_is_not_picked() -> None:
    behaviour = Behaviour(LATCH, Environment(changes="burst", assume=(or_(and_(S, R), not_(or_(S, R))),)))
    assert list(behaviour.changes(Situation(state(1, 1, 0, 0)))) == []


def test_walking_finds_unlawful_steps() -> None:
    behaviour = Behaviour(LATCH, Environment())
    lawful = Run("", (state(1, 1, 0, 0), state(0, 1, 0, 0), state(0, 1, 0, 1)))
    assert len(walk(behaviour, lawful)) == 3
    with pytest.raises(ValueError, match="step 2"):
        walk(behaviour, Run("", (state(1, 1, 0, 0), state(0, 1, 0, 0), state(0, 1, 1, 1))))
    with pytest.raises(ValueError, match="start"):
        walk(behaviour, Run("", (state(0, 0, 0, 0),)))
    with pytest.raises(ValueError, match="loop"):
        walk(behaviour, Run("", (state(1, 1, 0, 0), state(0, 1, 0, 0)), loop=0))
