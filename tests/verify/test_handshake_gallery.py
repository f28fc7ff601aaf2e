"""The handshake circuits of the gallery: each verdict, and what the refutations say."""

from __future__ import annotations

from functools import cache
from importlib.resources import files

import pytest

from settled.verify import check
from settled.verify.result import Result

EXPECTED = {
    "handshake_ends": {"settles": True},
    "handshake_pipeline": {
        "speed-independent": True,
        "deadlock-free": True,
        "every reading reaches the radio": True,
        "the radio becomes free again": True,
    },
    "handshake_half_buffer": {
        "speed-independent": True,
        "deadlock-free": True,
        "every reading is taken": True,
        "every reading reaches the radio": True,
        "the radio is asked for a reading that is held": True,
    },
    "handshake_half_buffer_split": {
        "speed-independent": False,
        "deadlock-free": True,
        "the radio is asked for a reading that is held": False,
    },
    "handshake_c_element": {
        "speed-independent": True,
        "deadlock-free": True,
        "done changes only when the gauges agree": True,
        "agreement is reported": True,
    },
    "handshake_c_element_hasty": {"speed-independent": False, "done changes only when the gauges agree": False},
    "handshake_arbiter": {
        "never two users": True,
        "a choice only between the grants": True,
        "no choice at all": False,
        "deadlock-free": True,
        "somebody gets it": True,
        "everybody gets it": False,
    },
    "handshake_arbiter_gates": {
        "never two users": True,
        "never two grants": False,
        "a choice only in the core": True,
        "settles": False,
    },
    "handshake_arbiter_four": {
        "recorder and radio never together": True,
        "recorder and clock never together": True,
        "recorder and panel never together": True,
        "radio and clock never together": True,
        "radio and panel never together": True,
        "clock and panel never together": True,
        "a choice only in the three elements": True,
        "grant lines may overlap": False,
        "deadlock-free": True,
    },
    "handshake_token_ring": {
        "one user at a time": True,
        "speed-independent": True,
        "deadlock-free": True,
        "everybody gets a turn": True,
        "the token comes back": True,
    },
}
GALLERY = files("settled.models.gallery")


@cache
def results(name: str) -> dict[str, Result]:
    return {result.name: result for result in check(str(GALLERY / f"{name}.toml")).results}


@pytest.mark.parametrize("name", EXPECTED)
def test_each_verdict_is_as_the_file_says(name: str) -> None:
    found = {prop: result.verdict for prop, result in results(name).items()}
    assert found == {prop: "proved" if holds else "refuted" for prop, holds in EXPECTED[name].items()}
    assert not any(result.vacuous for result in results(name).values())


def test_every_handshake_file_is_in_the_table() -> None:
    assert {f.name.removesuffix(".toml") for f in GALLERY.iterdir() if f.name.startswith("handshake")} == set(EXPECTED)


@pytest.mark.parametrize(
    ("name", "prop", "withdrawn"),
    [
        ("handshake_half_buffer_split", "speed-independent", ["rout"]),
        ("handshake_c_element_hasty", "speed-independent", ["ka", "kb"]),
        ("handshake_arbiter", "no choice at all", ["to_recorder"]),
    ],
)
def test_the_refutation_names_who_lost_its_excitation(name: str, prop: str, withdrawn: list[str]) -> None:
    result = results(name)[prop]
    last = result.traces[0].steps[-1]
    assert result.facts["withdrawn"] == withdrawn
    assert result.facts["switched"] == list(last.switched)
    assert all(node in result.claim for node in [*withdrawn, *last.switched])


def test_one_user_may_lose_for_ever() -> None:
    (trace,) = results("handshake_arbiter")["everybody gets it"].traces
    assert trace.loop is not None
    loop = trace.steps[trace.loop :]
    assert all(step.state["recorder"] and not step.state["to_recorder"] for step in loop)
    assert {step.state["to_radio"] for step in loop} == {0, 1}


def test_the_core_swings_only_when_both_gates_switch_in_one_instant() -> None:
    assert results("handshake_arbiter_gates")["settles"].facts["needs_simultaneous"] is True
