"""Every member of a family keeps its contract; members are found by listing the folder."""

from __future__ import annotations

import inspect
from importlib import import_module

import pytest
from judging import session_of
from random_circuits import random_question

from settled.encodings import delays
from settled.models.logic import var
from settled.models.netlist import Gate, Netlist
from settled.models.specification import Property
from settled.verify.engines import Engine, engines
from settled.verify.properties import Kind, kinds
from settled.verify.questions import Question
from settled.verify.session import Settings

SEPARATE = ("equivalent", "realises")
"""Kinds that compare with another circuit; random questions about one circuit do not fit them."""


@pytest.mark.parametrize("kind", kinds().values(), ids=lambda k: k.name)
def test_a_kind_is_named_like_its_file_and_says_what_it_means(kind: Kind) -> None:
    module = import_module("settled.verify.properties." + kind.name.replace("-", "_"))
    assert module.KIND is kind
    assert (module.__doc__ or "").startswith(f"`{kind.name}`: ")


@pytest.mark.parametrize("name", [n for n in kinds() if n not in SEPARATE])
def test_a_kind_has_examples_that_hold_and_that_are_refuted(name: str) -> None:
    seen = set()
    for seed in range(200):
        question = random_question(f"example {seed}", name)
        session = session_of(*question[:2], (Property(name, name, question.options),), Settings(seconds=20))
        (result,) = session.results()
        assert result.claim.endswith(".")
        assert (result.verdict == "refuted") == bool(result.traces)
        seen.add(result.verdict)
        if seen >= {"proved", "refuted"}:
            return
    pytest.fail(f"{name}: only {seen}")


@pytest.mark.parametrize("engine", engines(), ids=lambda e: e.name)
def test_an_engine_answers_questions(engine: Engine) -> None:
    assert engine.answers and all(issubclass(q, Question) for q in engine.answers)
    assert all(inspect.getdoc(f) for f in engine.answers.values())


@pytest.mark.parametrize("name", delays.names())
def test_a_delay_model_is_named_like_its_file_and_places_a_latch(name: str) -> None:
    module = import_module(f"settled.encodings.delays.{name}")
    assert name == module.DELAY and module.__doc__
    latch = Netlist("latch", ("d",), (Gate("q", var("d")),), ("q",))
    circuit = delays.place(latch, name)
    assert circuit.delay == name and circuit.outputs == ("q",)
