"""Verdicts and runs as text: the words, the columns, and that nothing is wider than the page."""

from __future__ import annotations

import io
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import pytest

from settled.models.circuit import Circuit
from settled.models.logic import var
from settled.verify.renderers import text
from settled.verify.renderers.page import Page, columns
from settled.verify.renderers.trace_text import tables
from settled.verify.result import Result, Step, Trace
from settled.verify.terminal import Progress

LATCH = Circuit("latch", ("s", "r"), ("q", "p"), {"q": var("s"), "p": var("r")}, ("q",), delay="gate")
PAGE = Page()


def result(verdict: str = "proved", **more: Any) -> Result:
    return replace(Result("settles", "settles", verdict, "It settles.", "search", 0.25), **more)


def trace(title: str, *steps: str, loop: int | None = None, names: Sequence[str] = LATCH.signals) -> Trace:
    """A run from states written as values in the order of `names`, an excited value with an asterisk: `1 0 0* 0`."""
    made: list[Step] = []
    for line in steps:
        cells = line.split()
        state = {n: int(c[0]) for n, c in zip(names, cells, strict=True)}
        excited = tuple(n for n, c in zip(names, cells, strict=True) if c.endswith("*"))
        switched = tuple(n for n in names if made and made[-1].state[n] != state[n])
        made.append(Step(state, excited, switched, not excited))
    return Trace(title, "latch", tuple(made), loop)


def shown(found: Result, circuit: Circuit = LATCH, page: Page = PAGE) -> list[str]:
    return text.verdict(found, circuit, page).splitlines()


def table(found: Result, circuit: Circuit = LATCH, width: int = 100) -> list[str]:
    lines = tables(found, circuit, Page(width), "")
    assert all(columns(line) <= width and line == line.rstrip() for line in lines)
    return lines


def test_the_echo_stands_in_two_columns() -> None:
    lines = text.opening("latch.toml", "Wake latch", [("inputs", "s, r"), ("delay model", "a, b, c, d, e")], Page(24))
    assert lines.splitlines() == [
        "latch.toml: Wake latch",
        "",
        "  inputs       s, r",
        "  delay model  a, b, c,",
        "               d, e",
    ]


def test_a_verdict_says_how_over_what_and_under_which_delays() -> None:
    found = result(ranged={"total_states": 12000, "input_changes": 1})
    assert shown(found) == [
        "proved     settles",
        "    It settles.",
        "    under gate delays, in 0.250 s, by search over 12,000 total states, 1 input change",
    ]
    named = replace(found, name="comes to rest")
    alone = replace(LATCH, delay="wire", winners="one")
    assert shown(named)[0] == "proved     comes to rest (settles)"
    assert "under wire delays, one node switching at a time, in 0.250 s" in shown(named, alone)[2]


@pytest.mark.parametrize(
    "check, why",
    [
        ("settles", "no reachable total state is unstable, and no reachable stable one has an allowed input change"),
        ("race-free", "no reachable stable total state has an allowed input change"),
        ("always", "no stable total state is reachable"),
        ("never", "no stable total state is reachable"),
    ],
)
def test_a_vacuous_verdict_says_so(check: str, why: str) -> None:
    lines = " ".join(" ".join(shown(result(check=check, vacuous=True))).split())
    assert f"vacuous: nothing to range over: {why}" in lines


def test_an_undecided_property_is_a_question_with_a_reason() -> None:
    lines = shown(result("undecided", reason="time limit of 3 s reached; raise it with --seconds N"))
    assert lines[1:] == [
        "    asked: It settles.",
        "    under gate delays, in 0.250 s, tried search",
        "    reason: time limit of 3 s reached; raise it with --seconds N",
    ]


def test_a_certificate_is_named() -> None:
    found = result(certificate={"kind": "cover", "stable_states": 3})
    assert shown(found)[-1] == "    certificate: cover (3 stable states)"


@pytest.mark.parametrize(
    "facts, said",
    [
        ({"needs_simultaneous": True}, "only when two nodes switch at exactly the same moment"),
        ({"needs_simultaneous": False}, "also when nodes switch one at a time"),
        ({"some_run_settles": True}, "possible under some delays: another ordering settles"),
        ({"some_run_settles": False}, "persists under every ordering"),
        ({"hazard": {"signal": "q", "class": "static-1", "kind": "logic"}}, "static-1 hazard: a logic hazard"),
        ({"hazard": {"signal": "q", "class": "dynamic", "kind": "function"}}, "dynamic hazard: a function hazard"),
        ({"hazard": {"signal": "q", "class": "static-0", "kind": None}}, "static-0 hazard: function or logic is not"),
        ({"hazard": {"signal": "q", "class": None, "kind": None}}, "hazard without a class, as the run shown never"),
    ],
)
def test_facts_in_words(facts: Mapping[str, Any], said: str) -> None:
    found = result("refuted", facts=facts)
    assert any(remark.startswith(said) for remark in text.remarks(found, LATCH))


def test_nothing_is_said_about_winners_where_only_one_switches_at_a_time() -> None:
    assert text.remarks(result("refuted", facts={"needs_simultaneous": False}), replace(LATCH, winners="one")) == []


def test_the_count_and_the_caution() -> None:
    results = [result(), result(vacuous=True), result("refuted"), result("undecided")]
    lines = text.closing(results, ["b.toml"], PAGE).splitlines()
    assert lines[:2] == ["4 properties: 2 proved, 1 refuted, 1 undecided, 1 vacuous", "not checked: b.toml"]
    assert all(word in lines[2] for word in ("environment", "start states", "delay model", "README.md", "Cautions"))
    assert text.closing(results[:1], [], PAGE).startswith("1 property: 1 proved")


# ---- runs --------------------------------------------------------------------------------------------------------


def test_two_endings_under_one_beginning() -> None:
    one = trace("one ordering", "1 1 0 0", "0 0 0* 0*", "0 0 1 0")
    two = trace("another ordering", "1 1 0 0", "0 0 0* 0*", "0 0 0 1")
    assert table(result("refuted", traces=(one, two))) == [
        "step  switched  s  r  q   p",
        "   0  start     1  1  0   0   stable",
        "   1  s-/r-     0  0  0*  0*  input change",
        "one ordering, from step 1:",
        "   2  q+        0  0  1   0   stable",
        "another ordering, from step 1:",
        "   2  p+        0  0  0   1   stable",
    ]


def test_a_run_that_begins_another_keeps_a_step_of_its_own() -> None:
    short = trace("after one change", "0 0 0 0", "1 0 0* 0", "1 0 1 0")
    long = trace("after three changes", "0 0 0 0", "1 0 0* 0", "1 0 1 0", "0 0 1* 0")
    lines = table(result("refuted", traces=(short, long)))
    assert lines[3:6] == [
        "after one change, from step 1:",
        "   2  q+        1  0  1   0  stable",
        "after three changes, from step 1:",
    ]


def test_a_loop_names_the_step_it_goes_back_to() -> None:
    found = result("refuted", traces=(trace("once round", "0 1 0 0", "0 0 0* 0*", "0 0 1* 1*", loop=1),))
    assert table(found) == [
        "once round:",
        "step  switched  s  r  q   p",
        "   0  start     0  1  0   0   stable",
        "   1  r-        0  0  0*  0*  input change",
        "   2  q+/p+     0  0  1*  1*",
        "   1  q-/p-     0  0  0*  0*  back to step 1",
    ]


def test_the_change_too_many_is_marked() -> None:
    run = trace("the run", "0 0 0 0", "1 0 0* 0", "1 0 1* 0", "1 0 0 0")
    hazard = {"hazard": {"signal": "q", "class": "static-0", "kind": None}, "offending_step": 3}
    assert table(result("refuted", traces=(run,), facts=hazard))[-1].endswith("q changes again, stable")


def test_runs_of_different_circuits_get_tables_of_their_own() -> None:
    other = Trace("the other's run", "other", (Step({"s": 0, "z": 1}, (), (), True),))
    lines = table(result("refuted", traces=(trace("the original's run", "0 0 0 0"), other)))
    assert lines[0] == "the original's run:" and lines[3:5] == ["", "the other's run:"]


WIDE = Circuit("wide", ("a", "b"), tuple(f"u{i}.cell.node" for i in range(30)), {}, ("u0.cell.node",))


def wide(*changes: int) -> Trace:
    """A run of `WIDE` in which input `a` and then the nodes of these numbers rise."""
    names = WIDE.signals
    lines = [["0"] * 32, ["1"] + ["0"] * 31]
    for number in changes:
        lines[-1][number + 2] = "0*"
        lines.append([c[0] for c in lines[-1]])
        lines[-1][number + 2] = "1"
    return replace(trace("the run", *map(" ".join, lines), names=names), circuit="wide")


def test_idle_nodes_are_left_out_of_a_table_too_wide() -> None:
    lines = table(result("refuted", traces=(wide(3, 4),)), WIDE)
    assert lines[1].split() == ["step", "switched", "a", "b", "u0.cell.node", "u3.cell.node", "u4.cell.node"]
    assert lines[-1] == "27 more nodes keep their value all along, never excited."


def test_long_names_are_broken_and_columns_go_on_in_further_blocks() -> None:
    lines = table(result("refuted", traces=(wide(*range(20)),)), WIDE, width=60)
    assert lines.count("") >= 1 and sum(line.startswith("step") for line in lines) == lines.count("") + 1
    assert sum(line.count("cell.") for line in lines if line.lstrip().startswith("cell.")) == 20
    assert lines[-1] == "10 more nodes keep their value all along, never excited."


def test_single_states_show_every_node() -> None:
    flat = replace(wide(), steps=wide().steps[:1])
    lines = table(result("refuted", check="never", traces=(flat,)), WIDE)
    assert sum(line.count("cell.") for line in lines) == 30 and "keep" not in lines[-1]


def test_a_step_in_which_much_switches_goes_on_below() -> None:
    names = tuple(f"n{i:02}" for i in range(20))
    circuit = Circuit("many", (), names, {})
    run = trace("the run", " ".join(["0*"] * 20), " ".join(["1"] * 20), names=names)
    lines = table(result("refuted", traces=(run,)), circuit, width=90)
    assert [line.strip() for line in lines[4:6]] == ["n06+/n07+/n08+/n09+/n10+/n11+/", "n12+/n13+/n14+/n15+/n16+/n17+/"]


def test_hostile_names_are_spelt_out() -> None:
    circuit = Circuit("x", ("\x1b[31m",), (), {})
    run = trace("the run", "0", "1", names=circuit.signals)
    page = text.verdict(result("refuted", name="\x1b[2J", traces=(run,)), circuit, PAGE)
    assert "\x1b" not in page and "\\u{1b}[31m+" in page


# ---- the page ----------------------------------------------------------------------------------------------------


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_colours_follow_the_terminal_and_no_color(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("NO_COLOR", raising=False)
    monkeypatch.setenv("TERM", "xterm")
    assert Page.of(io.StringIO()) == Page(100, False)
    assert Page.of(Terminal()).color
    monkeypatch.setenv("NO_COLOR", "1")
    assert not Page.of(Terminal()).color
    monkeypatch.delenv("NO_COLOR")
    monkeypatch.setenv("TERM", "dumb")
    assert not Page.of(Terminal()).color


def test_colours_change_nothing_but_colours() -> None:
    run = trace("once round", "0 1 0 0", "0 0 0* 0*", "0 0 1* 1*", loop=1)
    found = result("refuted", traces=(run,), vacuous=False, reason=None)
    colored = text.verdict(found, LATCH, Page(100, True))
    plain = colored
    for code in ("32", "1;31", "33", "1", "2", "1;33", "0"):
        plain = plain.replace(f"\x1b[{code}m", "")
    assert plain == text.verdict(found, LATCH, PAGE) and colored.count("\x1b[1;33m") == 6


def test_progress_is_one_line_on_a_terminal_and_nothing_elsewhere(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("COLUMNS", "60")
    terminal, pipe = Terminal(), io.StringIO()
    for stream in (terminal, pipe):
        progress = Progress(stream)
        progress.subject = "race-free"
        progress("12,000 total states" + "!" * 80)
        progress("too soon to be shown")
        progress.clear()
    line, blank, rest = terminal.getvalue().removeprefix("\r").split("\r")
    assert line.startswith("race-free: 12,000 total states!!!") and len(line) <= 58 and rest == ""
    assert blank.strip() == "" and len(blank) >= len(line) and pipe.getvalue() == ""


def test_nodes_that_would_take_too_many_blocks_are_shown_as_they_switch() -> None:
    result_ = result("refuted", traces=(wide(*range(20)),))
    lines = table(result_, WIDE, width=30)
    assert "".join("".join(lines).split()).count("u5.cell.node+") == 1
    assert sum(line.startswith("step") for line in lines) < 4
    last = " ".join(lines[-3:])
    assert last.endswith("The values of 29 more nodes would take too many columns; --all-signals shows them.")
