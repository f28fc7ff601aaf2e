"""Power-up: shortest evidence, what three-valued simulation says beside it, and a start that is not reached."""

from __future__ import annotations

from settled.verify import check
from settled.verify.result import Result


def result(text: str, states: int = 4_000_000) -> Result:
    (found,) = check("case.toml", text=text, states=states).results
    return found


LATCH = """
[circuit]
inputs = ["s", "r"]
outputs = ["q"]
[circuit.excitation]
q = "~(r | qn)"
qn = "~(s | q)"
[environment]
start = { q = 1 }
[[property]]
check = "initialises"
sequence = [%s]
"""


def test_a_held_reset_leaves_one_end_and_releasing_it_keeps_that_end() -> None:
    found = result(LATCH % "{ s = 0, r = 1 }, { s = 0, r = 0 }")
    assert (found.verdict, found.method) == ("proved", "three-valued simulation")
    assert found.facts["end"] == {"q": 0, "qn": 1}
    assert found.facts["ternary"]["nodes"]["q"] == {"simulated": "0", "exact": "0", "finding": "known"}


def test_a_start_that_power_up_does_not_reach_is_pointed_out() -> None:
    found = result(LATCH % "{ s = 0, r = 1 }, { s = 0, r = 0 }")
    assert found.facts["start_reached"] is False
    assert "(q=1) is not reached from power-up" in found.facts["note"] and "ends with q=0" in found.facts["note"]
    set_first = result(LATCH % "{ s = 1, r = 0 }, { s = 0, r = 0 }")
    assert set_first.facts["start_reached"] is True and "note" not in set_first.facts


def test_an_oscillation_from_power_up_is_shown_once_round_and_nothing_else() -> None:
    found = result(LATCH % "{ s = 0, r = 0 }")
    (run,) = found.traces
    assert run.loop == 0 and len(run.steps) == 2
    assert found.claim == "After s=0 r=0 the circuit can go round for ever: q, qn never come to rest."


def test_ends_that_differ_without_an_oscillation() -> None:
    text = """
[circuit]
inputs = ["d"]
outputs = ["q"]
[circuit.excitation]
q = "d | q"
[[property]]
check = "initialises"
sequence = [{ d = 0 }]
"""
    found = result(text)
    assert [len(t.steps) for t in found.traces] == [1, 1]
    assert found.claim == "After d=0 the circuit can end with d=0 q=0 or d=0 q=1."
    assert found.facts["ternary"]["nodes"]["q"]["finding"] == "really open"


MULTIPLEXER = """
[circuit]
inputs = ["a", "b"]
outputs = ["z"]
[circuit.excitation]
sel = "sel"
n = "~sel"
ga = "a & sel"
gb = "b & n"
z = "ga | gb"
[[property]]
check = "initialises"
sequence = [{ a = 1, b = 1 }]
"""


def test_pessimism_names_the_signal_whose_branches_meet_again() -> None:
    nodes = result(MULTIPLEXER).facts["ternary"]["nodes"]
    assert nodes["sel"]["finding"] == nodes["ga"]["finding"] == "really open"
    assert nodes["z"] == {"simulated": "x", "exact": "1", "finding": "pessimism", "cause": "sel"}


def test_too_many_power_up_states_are_said_to_be_too_many() -> None:
    nodes = "\n".join(f'n{i} = "n{i} | d"' for i in range(30))
    text = f"""
[circuit]
inputs = ["d"]
[circuit.excitation]
{nodes}
[[property]]
check = "initialises"
sequence = [{{ d = 0 }}]
"""
    found = result(text)
    assert found.verdict == "undecided"
    assert found.reason is not None and "1,073,741,824 internal states" in found.reason


def test_thirty_nodes_with_a_reset_are_proved_all_the_same() -> None:
    nodes = "\n".join(f'n{i} = "n{i} & ~d"' for i in range(30))
    text = f"""
[circuit]
inputs = ["d"]
[circuit.excitation]
{nodes}
[[property]]
check = "initialises"
sequence = [{{ d = 1 }}, {{ d = 0 }}]
"""
    assert result(text).verdict == "proved"
