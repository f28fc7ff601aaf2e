"""Transition tables: entries as the circuit means them, the layout as on paper, and polite refusals."""

from __future__ import annotations

from pathlib import Path

import pytest
from random_circuits import random_question
from typer.testing import CliRunner

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, and_, not_, or_, var
from settled.models.problems import InputError
from settled.models.states import excited, pack
from settled.verify.cli import app
from settled.verify.renderers.page import Page
from settled.verify.renderers.table import render
from settled.verify.transition_table import gray, transition_table

S, R, Q, P = map(var, "srqp")
LATCH = Circuit("latch", ("s", "r"), ("q", "p"), {"q": not_(or_(R, P)), "p": not_(or_(S, Q))}, ("q",), delay="gate")


def lines(circuit: Circuit = LATCH, assume: tuple[Expr, ...] = (), width: int = 100, **more: bool) -> list[str]:
    table = transition_table(circuit, Environment(assume=assume))
    shown = render(table, "latch.toml", "Latch", Page(width), **more)
    assert all(len(line) <= width for line in shown.splitlines())
    return shown.splitlines()


def test_gray_order() -> None:
    assert gray(2) == ((0, 0), (0, 1), (1, 1), (1, 0))
    assert gray(0) == ((),)
    assert all(sum(a != b for a, b in zip(x, y, strict=True)) == 1 for x, y in zip(gray(6), gray(6)[1:], strict=False))


def test_the_table_of_a_latch() -> None:
    assert lines() == [
        "latch.toml: Latch",
        "",
        "  model    gate delays",
        "  across   s r",
        "  down     q p",
        "  entry    next q p, every excited node having followed",
        "  ( )      stable",
        "",
        "       00    01    11    10",
        "  00   11    01   (00)   10",
        "  01  (01)  (01)   00    00",
        "  11   00    00    00    00",
        "  10  (10)   00    00   (10)",
    ]


def test_vectors_that_the_assumptions_rule_out_are_dashes() -> None:
    shown = lines(assume=(not_(and_(S, R)),))
    assert shown[7].split() == ["-", "an", "input", "vector", "that", "the", "assumptions", "rule", "out"]
    assert [line.split()[3] for line in shown[-4:]] == ["-"] * 4


def test_outputs_stand_behind_a_comma() -> None:
    shown = lines(outputs=True)
    assert shown[5] == "  entry    next q p, every excited node having followed; after the comma q now"
    assert shown[-1] == "  10  (10),1   00 ,1   00 ,1  (10),1"


def test_a_wide_table_comes_in_blocks() -> None:
    circuit = Circuit("wide", tuple("abcd"), ("y",), {"y": and_(*map(var, "abcd"))}, delay="feedback")
    heads = [line.split() for line in lines(circuit, width=60) if line.lstrip().startswith(("0000", "1100"))]
    assert [vector for head in heads for vector in head] == ["".join(map(str, v)) for v in gray(4)]


def test_a_circuit_without_inputs_has_one_column() -> None:
    ring = Circuit("ring", (), ("z",), {"z": not_(var("z"))}, ("z",))
    assert lines(ring)[-3:] == ["      any", "  0   1", "  1   0"]


@pytest.mark.parametrize("seed", range(40))
def test_every_entry_is_where_the_excited_nodes_lead(seed: int) -> None:
    circuit = random_question(f"table {seed}", "settles").circuit
    table = transition_table(circuit, Environment())
    for present, row in zip(table.rows, table.entries, strict=True):
        for vector, entry in zip(table.columns, row, strict=True):
            state = pack(circuit, dict(zip(circuit.signals, vector + present, strict=True)))
            assert entry is not None
            after = pack(circuit, dict(zip(circuit.signals, vector + entry.after, strict=True)))
            assert after == state ^ excited(circuit, state)
            assert entry.stable == (excited(circuit, state) == 0)


def test_too_large_a_circuit_is_refused_with_the_limits() -> None:
    nodes = tuple(f"n{i}" for i in range(7))
    circuit = Circuit("big", tuple("abcde"), nodes, {n: var("a") for n in nodes}, delay="gate")
    with pytest.raises(InputError) as refused:
        transition_table(circuit, Environment())
    assert [p.message for p in refused.value.problems] == [
        "big has 7 nodes under gate delays; a table holds at most 6",
        "big has 5 inputs under gate delays; a table holds at most 4",
    ]


def test_the_command(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    text = '[circuit]\ninputs = ["d"]\noutputs = ["q"]\n[circuit.excitation]\nq = "d"\n'
    Path("d.toml").write_text(text)
    shown = CliRunner().invoke(app, ["table", "d.toml", "--outputs"])
    assert shown.exit_code == 0 and shown.stdout.splitlines()[-2:] == ["  0  (0),0   1 ,0", "  1   0 ,1  (1),1"]
    many = "\n".join(f'{name} = "d"' for name in ("q1", "q2", "q3", "q4", "q"))
    Path("wires.toml").write_text(text.replace("outputs", 'delay = "wire"\noutputs').replace('q = "d"', many))
    refused = CliRunner().invoke(app, ["table", "wires.toml"])
    assert refused.exit_code == 2 and refused.stdout == "" and "11 nodes under wire delays" in refused.stderr
    assert 'delay = "feedback"' in refused.stderr
