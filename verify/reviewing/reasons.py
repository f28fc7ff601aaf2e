"""Why a node is excited: since when, and through which inputs of its gate.

A result document has no equations. They are taken from the files that were read for it, as long as these are there and
unchanged; else the document itself says since when a node is excited and what switched then.
"""

from __future__ import annotations

from functools import cached_property
from hashlib import sha256
from pathlib import Path

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import support, to_text
from settled.models.problems import InputError
from settled.models.states import Behaviour, pack
from settled.verify.causes.history import Event, History
from settled.verify.placing import placed
from settled.verify.result import Step, Trace
from settled.verify.reviewing.document import Reviewed
from settled.verify.session import load, questions

LONGEST = 200
"""Characters of an equation that are shown."""


class Reasons:
    """What excites the nodes on the runs of one file. `missing`: why there are no equations, if so."""

    def __init__(self, file: Reviewed) -> None:
        self.file = file
        self.missing: str | None = None

    @cached_property
    def circuits(self) -> dict[str, Circuit]:
        """The circuits with their equations, by name; none when the files are gone or have changed."""
        self.missing = self._changed()
        if self.missing is not None:
            return {}
        try:
            specification = load(self.file.file)
            circuit = placed(specification.circuit)
            asked = questions(circuit, specification.properties)
        except InputError as error:
            self.missing = f"{self.file.file}: {error.problems[0].message}"
            return {}
        others = {other.name: other for question in asked.values() for other in question.circuits}
        return {**others, circuit.name: circuit}

    def _changed(self) -> str | None:
        if self.file.file == "-":
            return "the circuit came from standard input"
        if not self.file.sources:
            return "the document does not say which files were read"
        for path, digest in self.file.sources.items():
            try:
                now = sha256(Path(path).read_bytes()).hexdigest()
            except (OSError, ValueError):
                return f"{path} cannot be read any more"
            if now != digest:
                return f"{path} has changed since"
        return None

    def of(self, trace: Trace, number: int) -> list[tuple[str, str]]:
        """Each node that is excited in a step of a run, as the event that is due, with the reason."""
        step = trace.steps[number]
        circuit = self.circuits.get(trace.circuit)
        known = circuit is not None and {*circuit.signals} <= step.state.keys()
        found = []
        for node in step.excited:
            due = f"{node}{'-' if step.state[node] else '+'}"
            why = _by_gate(circuit, trace, number, node) if known and circuit else _by_steps(trace, number, node)
            found.append((due, why))
        return found


def since(trace: Trace, number: int, node: str) -> int:
    """The step from which on a node is excited to switch as it does."""
    value = trace.steps[number].state[node]
    while number and _waits(trace.steps[number - 1], node, value):
        number -= 1
    return number


def _waits(step: Step, node: str, value: int) -> bool:
    return node in step.excited and step.state[node] == value


def _by_steps(trace: Trace, number: int, node: str) -> str:
    begun = since(trace, number, node)
    return f"due since step {begun}" + (
        f", after {_events(trace, begun, trace.steps[begun].switched)}" if begun else ""
    )


def _by_gate(circuit: Circuit, trace: Trace, number: int, node: str) -> str:
    states = [pack(circuit, step.state) for step in trace.steps[: number + 1]]
    history = History(Behaviour(circuit, Environment()), states, 0)
    event = Event(node, number + 1)
    begun, causes = history.since(event), [cause.name for cause in history.causes(event)]
    by = f", by {_events(trace, begun, causes)}" if causes else ""
    equation = to_text(circuit.excitation[node], lambda leaf: leaf.name)
    equation = equation if len(equation) <= LONGEST else f"{equation[:LONGEST]}..."
    values = " ".join(f"{s}={trace.steps[number].state[s]}" for s in support(circuit.excitation[node]))
    return f"due since step {begun}{by}: {node} = {equation}" + (f", {values}" if values else "")


def _events(trace: Trace, number: int, names: list[str] | tuple[str, ...]) -> str:
    state = trace.steps[number].state
    return "/".join(f"{name}{'+' if state[name] else '-'}" for name in names)
