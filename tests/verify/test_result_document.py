"""The result document keeps to its schema, and the schema refuses what is no result document."""

from __future__ import annotations

import json
from collections.abc import Callable
from importlib.resources import files
from typing import Any

import pytest
from jsonschema import Draft202012Validator
from typer.testing import CliRunner

from settled.models.problems import InputError
from settled.verify.cli import app
from settled.verify.renderers.problems import as_json
from settled.verify.result import document
from settled.verify.session import check

SCHEMA = json.loads(files("settled.verify").joinpath("result.schema.json").read_text())
VALIDATOR = Draft202012Validator(SCHEMA)

LATCH = """
title = "Level latch"
[circuit]
inputs = ["d", "en"]
outputs = ["q"]
[circuit.excitation]
n = "~en"
a = "d & en"
b = "q & n"
q = "a | b"
[circuit.define]
both = "a & b"
"""
PROPERTIES = """
[[property]]
check = "stable-states"
at-most = 1
[[property]]
check = "never"
expr = "both"
[[property]]
check = "never"
expr = "q & ~q"
when = "stable"
"""
GALLERY = sorted(p.name for p in files("settled.models.gallery").iterdir() if p.name.endswith(".toml"))


def checked(text: str, **limits: Any) -> dict[str, Any]:
    """The document on `text`, as a program reads it."""
    made: dict[str, Any] = json.loads(json.dumps(document([check("-", text=text, **limits)])))
    VALIDATOR.validate(made)
    return made


def results(made: dict[str, Any]) -> list[dict[str, Any]]:
    return [r for f in made["files"] for r in f["results"]]


def test_the_schema_is_one() -> None:
    Draft202012Validator.check_schema(SCHEMA)


def test_a_document_of_every_kind_of_verdict() -> None:
    found = results(checked(LATCH)) + results(checked(LATCH + PROPERTIES)) + results(checked(LATCH, states=1))
    assert {r["verdict"] for r in found} == {"proved", "refuted", "undecided"}
    assert any(t["loop"] is not None for r in found for t in r["traces"])
    assert any("hazard" in r["facts"] for r in found)


def test_a_state_holds_the_defined_signals_that_the_property_names() -> None:
    refuted = {r["name"]: r for r in results(checked(LATCH + PROPERTIES)) if r["verdict"] == "refuted"}
    (trace,) = refuted["never"]["traces"]
    assert list(trace["steps"][0]["state"]) == ["d", "en", "n", "a", "b", "q", "both"]
    assert trace["steps"][-1]["state"]["both"] == 1


@pytest.mark.parametrize("name", GALLERY)
def test_the_documents_of_the_gallery(name: str) -> None:
    shown = CliRunner().invoke(app, ["check", "--json", name])
    made = json.loads(shown.stdout)
    VALIDATOR.validate(made)
    assert shown.exit_code in (0, 1, 3) and results(made)


IMPOSSIBLE = LATCH + "[environment]\nassume = ['0']"


@pytest.mark.parametrize("text", [LATCH.replace('"~en"', '"~e"'), "[circuit", "", IMPOSSIBLE])
def test_input_errors(text: str) -> None:
    with pytest.raises(InputError) as refused:
        check("-", text=text)
    made = document([], as_json(refused.value.problems))
    assert set(made) == {"settled", "format", "errors"}
    VALIDATOR.validate(made)


def test_an_error_without_a_place() -> None:
    with pytest.raises(InputError) as refused:
        check("-", text=LATCH, only=["settle"])
    made = document([], as_json(refused.value.problems))
    VALIDATOR.validate(made)
    assert made["errors"][0]["line"] is None


def refuted(made: dict[str, Any]) -> dict[str, Any]:
    return next(r for r in results(made) if r["verdict"] == "refuted")


@pytest.mark.parametrize(
    "spoil",
    [
        lambda made: made.pop("files"),
        lambda made: made.update(format=2),
        lambda made: made.update(more=1),
        lambda made: made["files"][0].pop("circuit"),
        lambda made: refuted(made).update(verdict="failed"),
        lambda made: refuted(made).update(traces=[]),
        lambda made: refuted(made).update(vacuous=True),
        lambda made: refuted(made).update(verdict="proved"),
        lambda made: refuted(made).update(verdict="undecided", traces=[]),
        lambda made: refuted(made)["traces"][0]["steps"][0]["state"].update(d=2),
        lambda made: refuted(made)["traces"][0].update(steps=[]),
        lambda made: refuted(made)["facts"].update(needs_simultaneous="no"),
        lambda made: made.update(errors=[]),
    ],
)
def test_the_schema_refuses(spoil: Callable[[dict[str, Any]], None]) -> None:
    made = checked(LATCH)
    spoil(made)
    assert not VALIDATOR.is_valid(made)
