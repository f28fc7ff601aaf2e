"""A result document read back: checked against its form, and ready to be shown like a result just found."""

from __future__ import annotations

import json
import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from settled.models.circuit import Circuit
from settled.models.problems import InputError, Problem, nearest
from settled.models.source import Span
from settled.models.text_file import read_text
from settled.verify.properties import kinds
from settled.verify.result import FORMAT, Result, Step, Trace

SIZE_LIMIT = 200_000_000
"""Bytes of a result document."""

Bit = Literal[0, 1]
Names = tuple[str, ...]


@dataclass(frozen=True)
class Reviewed:
    """One file of a result document. `sources`: the SHA-256 of every file that was read for it, by path;
    `understood`: what the verdicts rest on, as lines of a label and what is said.

    The circuit has names only: what excites its nodes does not stand in the document.
    """

    file: str
    title: str
    circuit: Circuit
    results: tuple[Result, ...]
    sources: Mapping[str, str]
    understood: tuple[tuple[str, str], ...]


def read_document(path: str, only: Sequence[str] = ()) -> list[Reviewed]:
    """The files of a result document, with the properties named in `only` or all. Raises `InputError`.

    `path` may be the directory that `--out` wrote.
    """
    path = os.path.join(path, "result.json") if os.path.isdir(path) else path
    text = read_text(path, limit=SIZE_LIMIT)
    _check_format(path, text)
    try:
        data = _Document.model_validate_json(text, strict=True)
    except ValidationError as error:
        first = error.errors()[0]
        raise _damaged(path, ".".join(map(str, first["loc"])), first["msg"]) from None
    found = [_reviewed(path, file) for file in data.files]
    known = [result.name for file in found for result in file.results]
    if missing := [name for name in only if name not in known]:
        raise InputError([_unknown(path, name, known) for name in missing])
    return [_with(file, only) for file in found if not only or any(r.name in only for r in file.results)]


def _check_format(path: str, text: str) -> None:
    """Raise `InputError` unless this is a result document of the format that this program writes."""
    try:
        data = json.loads(text)
    except (ValueError, RecursionError):
        data = None
    number = data.get("format") if isinstance(data, dict) and isinstance(data.get("settled"), str) else None
    if type(number) is not int:
        message = f"`{path}` is no result document: those are written by `--json` and `--out`"
        raise InputError(Problem("no-result", message, Span(path, 1, 1)))
    if number != FORMAT:
        age = "older" if number < FORMAT else "newer"
        message = f"`{path}` is a result document of an {age} format, {number}; this version reads format {FORMAT}"
        message = message.replace("an newer", "a newer")
        cure = "check the file again" if number < FORMAT else f"use settled {data['settled']}, which wrote it"
        raise InputError(Problem("result-format", message, Span(path, 1, 1), help=cure))
    if data.get("errors") and not data.get("files"):
        message = f"`{path}` holds no verdicts: the input could not be used"
        notes = tuple(str(e.get("message")) for e in data["errors"] if isinstance(e, dict))
        raise InputError(Problem("no-verdicts", message, Span(path, 1, 1), notes=notes))


def _damaged(path: str, place: str, what: str) -> InputError:
    message = f"`{path}` is damaged: {place}: {what}"
    return InputError(Problem("damaged-result", message, Span(path, 1, 1)))


def _unknown(path: str, name: str, known: Sequence[str]) -> Problem:
    message = f"no property is called `{name}` in {path}"
    return Problem("unknown-property", message, Span(path, 1, 1), help=nearest(name, known))


def _with(file: Reviewed, only: Sequence[str]) -> Reviewed:
    kept = tuple(r for r in file.results if not only or r.name in only)
    return replace(file, results=kept)


# ---- the form of the document ------------------------------------------------------------------------------------


class _Part(BaseModel):
    model_config = ConfigDict(frozen=True)


class _Step(_Part):
    state: dict[str, Bit]
    excited: Names
    switched: Names
    stable: bool


class _Trace(_Part):
    title: str
    circuit: str
    steps: tuple[_Step, ...] = Field(min_length=1)
    loop: int | None


class _Hazard(_Part):
    signal: str
    class_: str | None = Field(alias="class")
    kind: str | None


class _Race(_Part):
    fork: str
    early: str
    late: str
    events: dict[str, str]
    trace: Bit
    step: int


class _Fault(_Part):
    term: str
    late: str | None
    events: dict[str, str]
    step: int


class _About(_Part):
    """Facts that stand about a failure or about one cause; others are left as they are."""

    model_config = ConfigDict(extra="allow", frozen=True)
    hazard: _Hazard | None = None
    race: _Race | None = None
    fault: _Fault | None = None
    change: str = ""
    decided_at: tuple[int, int] | None = None


class _Cause(_About):
    id: str
    explains: int
    claim: str
    traces: tuple[int, ...]


class _Facts(_About):
    causes: tuple[_Cause, ...] = ()
    causes_reason: str | None = None


class _Result(_Part):
    name: str
    check: str
    verdict: Literal["proved", "refuted", "undecided"]
    claim: str
    method: str
    seconds: float
    reason: str | None
    traces: tuple[_Trace, ...]
    vacuous: bool
    ranged: dict[str, int]
    facts: _Facts
    certificate: dict[str, Any] | None


class _Circuit(_Part):
    name: str
    inputs: Names
    nodes: Names
    outputs: Names
    delay: str
    winners: str


class _File(_Part):
    file: str
    title: str
    circuit: _Circuit
    results: tuple[_Result, ...]
    sources: dict[str, str] = {}
    understood: tuple[tuple[str, str], ...] = ()


class _Document(_Part):
    files: tuple[_File, ...]


# ---- from the form to results ------------------------------------------------------------------------------------


def _reviewed(path: str, data: _File) -> Reviewed:
    c = data.circuit
    circuit = Circuit(c.name, c.inputs, c.nodes, {}, c.outputs, delay=c.delay, winners=c.winners)
    results = tuple(_result(path, result) for result in data.results)
    understood = data.understood or _named(circuit)
    return Reviewed(data.file, data.title, circuit, results, data.sources, understood)


def _named(circuit: Circuit) -> tuple[tuple[str, str], ...]:
    """What a document says of a circuit that does not repeat the echo."""
    named = (("inputs", circuit.inputs), ("nodes", circuit.nodes), ("outputs", circuit.outputs))
    lines = [(what, ", ".join(names) or "none") for what, names in named]
    return (("circuit", circuit.name), *lines, ("delay model", circuit.delay), ("winners", circuit.winners))


def _result(path: str, data: _Result) -> Result:
    if data.check not in kinds():
        raise _damaged(path, data.name, f"there is no check `{data.check}`")
    traces = tuple(_trace(path, data, trace) for trace in data.traces)
    for cause in data.facts.causes:
        if not all(0 <= place < len(traces) for place in cause.traces):
            raise _damaged(path, data.name, f"cause {cause.id} names a trace that is not there")
    first = len(data.facts.causes[0].traces) if data.facts.causes else len(traces)
    return Result(
        name=data.name,
        check=data.check,
        verdict=data.verdict,
        claim=data.claim,
        method=data.method,
        seconds=data.seconds,
        reason=data.reason,
        traces=traces[:first],
        further=traces[first:],
        vacuous=data.vacuous,
        ranged=data.ranged,
        facts=data.facts.model_dump(by_alias=True, exclude_unset=True),
        certificate=data.certificate,
    )


def _trace(path: str, result: _Result, data: _Trace) -> Trace:
    signals = data.steps[0].state.keys()
    for step in data.steps:
        if step.state.keys() != signals or not signals >= {*step.excited, *step.switched}:
            raise _damaged(path, result.name, f"the steps of `{data.title}` do not speak of the same signals")
    if data.loop is not None and not 0 <= data.loop < len(data.steps):
        raise _damaged(path, result.name, f"the loop of `{data.title}` begins at no step")
    steps = tuple(Step(s.state, s.excited, s.switched, s.stable) for s in data.steps)
    return Trace(data.title, data.circuit, steps, data.loop)
