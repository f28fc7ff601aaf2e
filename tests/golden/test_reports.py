"""Whole reports, to the letter: what `settled check` and `settled table` print into a pipe.

The expected texts stand beside this file, one a report. Seconds are held at zero, as their digits would move words.
"""

from __future__ import annotations

from pathlib import Path
from types import SimpleNamespace

import pytest
from typer.testing import CliRunner

from settled.verify import session
from settled.verify.cli import app

# Both inputs of the wake latch are let go at once: the classic critical race, and an oscillation in step.
WAKE = """
title = "Wake latch of the river gauge"
[circuit]
inputs = ["s", "r"]
outputs = ["q"]
[circuit.excitation]
q = "~(r | p)"
p = "~(s | q)"
[environment]
changes = "simultaneous"
[[property]]
check = "stable-states"
[[property]]
check = "settles"
[[property]]
check = "race-free"
[[property]]
name = "the sides differ at rest"
check = "always"
expr = "q ^ p"
when = "stable"
"""
# The level latch holds through `b` what it lets in through `a`; when `en` falls, `a` may go before `b` comes.
LEVEL = """
title = "Level latch of the river gauge"
[circuit]
inputs = ["d", "en"]
outputs = ["q"]
winners = "one"
[circuit.excitation]
n = "~en"
a = "d & en"
b = "q & n"
q = "a | b"
[environment]
start = { q = 1 }
[[property]]
check = "hazard-free"
[[property]]
check = "race-free"
"""
CASES = {
    "wake_latch": (WAKE, ["check"], 1),
    "wake_latch_table": (WAKE, ["table", "--outputs"], 0),
    "level_latch": (LEVEL, ["check"], 1),
    "level_latch_wires": (LEVEL.replace('"one"', '"any"\ndelay = "wire"'), ["check", "--only", "race-free"], 1),
    "level_latch_held": (
        LEVEL + "[environment.inputs]\nd = { rises = '0', falls = '0' }\nen = { rises = '0', falls = '0' }\n",
        ["check"],
        3,
    ),
    "level_latch_limit": (
        LEVEL + '[[property]]\ncheck = "essential-hazard-free"\n',
        ["check", "--states", "5", "--only", "essential-hazard-free"],
        3,
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_report(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(session, "time", SimpleNamespace(perf_counter=lambda: 0.0))
    text, arguments, status = CASES[name]
    shown = CliRunner().invoke(app, [*arguments, "-"], input=text)
    expected = Path(__file__).with_name(f"{name}.txt").read_text()
    assert (shown.stdout, shown.stderr, shown.exit_code) == (expected, "", status)
