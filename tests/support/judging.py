"""A random question put to the program, and its result held against the naive oracle."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import oracle
import oracle_traces

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.netlist import Gate, Netlist
from settled.models.specification import CircuitSource, Property, Specification
from settled.verify.engines import attempt, engines
from settled.verify.limits import Limits
from settled.verify.questions import Task
from settled.verify.result import Result, document
from settled.verify.session import Session, Settings


def netlist_of(circuit: Circuit) -> Netlist:
    """The circuit as equations."""
    gates = tuple(Gate(n, e) for n, e in circuit.excitation.items())
    arbiters = {f"arbiter {i}": pair for i, pair in enumerate(circuit.exclusive, 1)}
    return Netlist(
        circuit.name, circuit.inputs, gates, circuit.outputs, circuit.defined, equations=True, arbiters=arbiters
    )


def session_of(
    circuit: Circuit, environment: Environment, properties: tuple[Property, ...], settings: Settings | None = None
) -> Session:
    """A session on a circuit made by a test."""
    source = CircuitSource(netlist_of(circuit), "gate", winners=circuit.winners)
    specification = Specification("case.toml", "case", source, environment, properties)
    return Session(specification, settings or Settings())


def ask_only(session: Session, name: str) -> None:
    """Let one engine answer every question of a session."""
    (engine,) = [e for e in engines() if e.name == name]
    environment, states = session.specification.environment, session.settings.states
    session.ask = lambda circuit, question: attempt(engine, Task(circuit, environment, Limits(states=states)), question)


def complaints(
    circuit: Circuit,
    environment: Environment,
    check: str,
    options: Mapping[str, Any],
    shortest: bool = True,
    settings: Settings | None = None,
    engine: str | None = None,
) -> tuple[list[str], str]:
    """What the oracle has against the program's result on one property, and the verdict of both.

    `engine`: the only one that is asked, without the others.
    """
    session = session_of(circuit, environment, (Property(check, check, options),), settings)
    if engine is not None:
        ask_only(session, engine)
    (result,) = session.results()
    expected = oracle.decide(circuit, environment, check, options)
    if result.verdict != expected.verdict:
        return [f"{check}: {result.verdict} ({result.reason}), but the oracle says {expected.verdict}"], result.verdict
    found = []
    if result.vacuous != (expected.vacuous and result.verdict == "proved"):
        found.append(f"{check}: vacuous is {result.vacuous}")
    for fact in ("needs_simultaneous", "some_run_settles"):
        if fact in expected.facts and result.verdict == "refuted" and result.facts.get(fact) != expected.facts[fact]:
            found.append(f"{check}: {fact} is {result.facts.get(fact)}")
    if result.verdict == "refuted":
        found += _against_traces(circuit, environment, check, options, session, result, expected, shortest)
    return found, result.verdict


def _against_traces(
    circuit: Circuit,
    environment: Environment,
    check: str,
    options: Mapping[str, Any],
    session: Session,
    result: Result,
    expected: oracle.Verdict,
    shortest: bool,
) -> list[str]:
    written = document([session.report([result])])["files"][0]["results"][0]
    against = oracle_traces.offending(circuit, environment, check, options, written["traces"], written["facts"])
    found = [f"{check}: {against}"] if against else []
    if shortest and expected.shortest is not None:
        steps = result.traces[0].steps
        length = (sum(any(x in circuit.inputs for x in s.switched) for s in steps), len(steps) - 1)
        if check == "hazard-free":
            last = result.facts["offending_step"]
            length = (sum(any(x in circuit.inputs for x in s.switched) for s in steps[: last + 1]), last)
        if length > expected.shortest:
            found.append(f"{check}: a run of {length}, but one of {expected.shortest} does")
    return found
