"""What a check found, and the same as the result document (JSON, `format` 1)."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from importlib.metadata import version
from typing import Any

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Program
from settled.models.problems import Problem
from settled.models.states import Run, excited, unpack
from settled.verify.questions import Question

FORMAT = 1


@dataclass(frozen=True)
class Step:
    """One total state of a run: values of inputs, nodes, outputs and named signals, and how it was entered."""

    state: Mapping[str, int]
    excited: tuple[str, ...]
    switched: tuple[str, ...]
    stable: bool


@dataclass(frozen=True)
class Trace:
    """A run with its values spelt out; `loop` is the index of the step that the last state moves to."""

    title: str
    circuit: str
    steps: tuple[Step, ...]
    loop: int | None = None


@dataclass(frozen=True)
class Result:
    """The verdict on one property, with all that it rests on.

    `further`: the runs of further causes, after those in `traces`; `question`: what the engine was asked.
    """

    name: str
    check: str
    verdict: str
    claim: str
    method: str
    seconds: float
    reason: str | None = None
    traces: tuple[Trace, ...] = ()
    further: tuple[Trace, ...] = ()
    vacuous: bool = False
    ranged: Mapping[str, int] = field(default_factory=dict)
    facts: Mapping[str, Any] = field(default_factory=dict)
    certificate: Mapping[str, Any] | None = None
    scripts: Mapping[str, str] = field(default_factory=dict)
    question: Question | None = None


@dataclass(frozen=True)
class FileReport:
    """Everything about one file: what was understood of it, and a result for each property.

    `inputs` holds the SHA-256 (hexadecimal) of every file that was read, by its path.
    """

    file: str
    title: str
    circuit: Circuit
    environment: Environment
    understood: tuple[tuple[str, str], ...]
    results: tuple[Result, ...]
    inputs: Mapping[str, str] = field(default_factory=dict)


def trace(circuit: Circuit, run: Run, also: Sequence[str] = ()) -> Trace:
    """The steps of a run, with the values of inputs, nodes, outputs and the signals in `also`."""
    names = list(dict.fromkeys([*circuit.signals, *circuit.outputs, *also]))
    shown = Program(circuit.resolve(*map(circuit.signal, names)))
    steps = []
    for i, state in enumerate(run.states):
        values = shown.run(unpack(circuit, state))
        waiting = excited(circuit, state)
        moved = (run.states[i - 1] ^ state) if i else 0
        steps.append(
            Step(
                dict(zip(names, values, strict=True)),
                tuple(n for n in circuit.nodes if waiting >> circuit.place[n] & 1),
                tuple(s for s in circuit.signals if moved >> circuit.place[s] & 1),
                waiting == 0,
            )
        )
    return Trace(run.title, run.circuit, tuple(steps), run.loop)


def circuits(report: FileReport, result: Result) -> dict[str, Circuit]:
    """The circuits whose runs a result may show, by name."""
    others = result.question.circuits if result.question is not None else ()
    return {circuit.name: circuit for circuit in (*others, report.circuit)}


def document(reports: Sequence[FileReport], problems: Sequence[Mapping[str, Any]] = ()) -> dict[str, Any]:
    """The result document; `errors` stands in it only when there are some."""
    body: dict[str, Any] = {"settled": version("settled"), "format": FORMAT}
    if problems:
        body["errors"] = list(problems)
    if reports or not problems:
        body["files"] = [_file(report) for report in reports]
    return body


def _file(report: FileReport) -> dict[str, Any]:
    c = report.circuit
    circuit = {
        "name": c.name,
        "inputs": list(c.inputs),
        "nodes": list(c.nodes),
        "outputs": list(c.outputs),
        "delay": c.delay,
        "winners": c.winners,
    }
    results = [_result(r) for r in report.results]
    sources = {"sources": dict(report.inputs)} if report.inputs else {}
    echo = {"understood": [list(line) for line in report.understood]} if report.understood else {}
    return {"file": report.file, "title": report.title, "circuit": circuit, **sources, **echo, "results": results}


def _result(r: Result) -> dict[str, Any]:
    traces = [
        {
            "title": t.title,
            "circuit": t.circuit,
            "steps": [
                {"state": dict(s.state), "excited": list(s.excited), "switched": list(s.switched), "stable": s.stable}
                for s in t.steps
            ],
            "loop": t.loop,
        }
        for t in (*r.traces, *r.further)
    ]
    return {
        "name": r.name,
        "check": r.check,
        "verdict": r.verdict,
        "claim": r.claim,
        "method": r.method,
        "seconds": round(r.seconds, 3),
        "reason": r.reason,
        "traces": traces,
        "vacuous": r.vacuous,
        "ranged": dict(r.ranged),
        "facts": dict(r.facts),
        "certificate": dict(r.certificate) if r.certificate is not None else None,
    }


def exit_status(reports: Sequence[FileReport], problems: Sequence[Problem] = (), allow_vacuous: bool = False) -> int:
    """0 all proved; 1 at least one refuted; 3 none refuted, at least one undecided or vacuous; 2 input error."""
    results = [r for report in reports for r in report.results]
    if problems:
        return 2
    if any(r.verdict == "refuted" for r in results):
        return 1
    open_ = any(r.verdict == "undecided" or (r.vacuous and not allow_vacuous) for r in results)
    return 3 if open_ else 0
