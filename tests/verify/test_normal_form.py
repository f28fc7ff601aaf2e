"""The exact runs that refute the gallery's properties: shortest, then quietest, then least in values."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from settled.verify import check
from settled.verify.inputs import gallery
from settled.verify.result import Trace

PINNED = {
    ("clock_switch_plain", "hazard-free"): ["sel- n+/gb- ga+/out- out+"],
    ("clock_switch_unruled", "race-free"): [
        "ca+ ga+ out+ ca- sel+/ga- na-/out-",
        "ca+ ga+ out+ sel+ na- ca-/ma- ea-/ga- nb+/out-",
    ],
    ("float_chatter", "settles"): ["float+ coil+ contact- coil- | 1"],
    ("handshake_arbiter", "no choice at all"): ["recorder+/radio+ to_radio+"],
    ("handshake_arbiter", "everybody gets it"): ["recorder+ radio+ to_radio+ radio- | 1"],
    ("level_latch", "settles"): ["g- n+/take- keep+/q- | 2"],
    ("level_latch", "race-free"): ["g- take- n+/q-", "g- n+/take- keep+"],
    ("level_latch", "hazard-free"): ["g- n+/take- keep+/q- q+"],
    ("sample_flip_flop", "essential-hazard-free"): ["clk- b+ a-", "clk- b+ a- clk+ c- q_n+ q- clk- c+"],
    ("sample_flip_flop_wires", "race-free"): [
        "clk- clk>- clk>b-/clk>c- b+ b>a+ a- a>b-/b>c+/b>q+",
        "clk- clk>- clk>b- b+ b>c+ clk>c-/c- c>q_n- q_n+ b>a+/b>q+/q_n>q+ a-/c+/q- a>b-/q>q_n-/c>q_n+",
    ],
    ("sluice_interlock_buttons", "never both main contacts"): ["lower+ kl+ ml+ lower- raise+ kr+ mr+"],
    ("wake_latch_unruled", "settles"): ["s- r- q+/p+ | 2"],
    ("wake_latch_unruled", "race-free"): ["s- r-/p+", "r- s-/q+"],
    ("wake_latch_unruled", "hazard-free"): ["s+ p- r+/q+ q-"],
}


def order(trace: Trace) -> str:
    """The events of a run, steps apart, and where it closes its loop."""

    def events() -> Iterator[str]:
        for step in trace.steps[1:]:
            yield "/".join(f"{s}{'+' if step.state[s] else '-'}" for s in step.switched)

    return " ".join(events()) + ("" if trace.loop is None else f" | {trace.loop}")


@pytest.mark.parametrize("name", sorted({file for file, _ in PINNED}))
def test_the_runs_of_the_gallery(name: str) -> None:
    asked = [prop for file, prop in PINNED if file == name]
    for result in check(gallery()[name], only=asked).results:
        assert [order(trace) for trace in result.traces] == PINNED[name, result.name]


BURST = """
[circuit]
inputs = ["a", "b"]
[circuit.excitation]
m = "m | a & ~b & ~n"
n = "n | b & ~a & ~m"
o = "~o & a & b & ~m & ~n"
[environment]
changes = "burst"
start = { a = 0, b = 0, m = 0, n = 0 }
[environment.inputs]
a = { falls = "0" }
b = { falls = "0" }
[[property]]
check = "race-free"
"""


def test_two_orders_of_a_burst_end_apart_though_neither_has_two_ends_itself() -> None:
    """With both inputs at once `o` never comes to rest, so that each order has but the end it has when slow."""
    (result,) = check("burst.toml", text=BURST).results
    assert [order(trace) for trace in result.traces] == ["b+ a+/n+", "a+ b+/m+"]
