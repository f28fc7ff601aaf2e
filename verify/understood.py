"""What was understood of a file, said before any verdict: names and sentences, no judgement."""

from __future__ import annotations

from collections.abc import Sequence

from settled.models.circuit import Circuit, loops
from settled.models.environment import Environment, Guard
from settled.models.logic import TRUE, support, to_text
from settled.models.specification import CircuitSource

MODELS = {
    "feedback": "feedback (each node carries a delay, all other gates none)",
    "gate": "gate (every gate output carries a delay; wires have none: a promise of the layout)",
    "wire": "wire (every gate output and every connection carries a delay)",
    "table": "none (a flow table settles in one step)",
}
CHANGES = {
    "single": "one input changes at a time, in stable total states only",
    "simultaneous": "any set of inputs changes in one instant, in stable total states only",
    "burst": "any set of inputs changes, one after the other in any order, begun in stable total states only",
}


WINNERS = {"any": "any (excited nodes may switch together)", "one": "one (excited nodes switch one at a time)"}


def understood(source: CircuitSource, circuit: Circuit, environment: Environment) -> tuple[tuple[str, str], ...]:
    """Lines of the echo: what each is about, and what was understood."""
    found = loops(circuit.nodes, circuit.excitation)
    memory = [n for n in circuit.nodes if n in support(circuit.excitation[n])]
    what = "excitation" if source.netlist.equations else "gate"
    lines = [
        ("circuit", f"{circuit.name}: {_count(len(source.netlist.gates), what)}"),
        ("inputs", _names(circuit.inputs)),
        ("nodes", _names(circuit.nodes)),
        ("outputs", _names(circuit.outputs)),
        ("loops", "; ".join(_names(part, 8) for part in found) or "none: the circuit has no feedback"),
        *([("storage", f"nodes that read themselves: {_names(memory, 8)}")] if memory else []),
        ("delay model", MODELS[circuit.delay]),
        ("winners", WINNERS[circuit.winners]),
        ("environment", _mode(environment)),
        ("assumed", "; ".join(to_text(e) for e in environment.assume) or "nothing about the inputs"),
        *[("guard", text) for text in _guards(circuit, environment)],
        ("start", _start(environment)),
        *[("note", note) for note in circuit.notes],
    ]
    return tuple(lines)


def beside(circuit: Circuit) -> tuple[tuple[str, str], ...]:
    """Lines of the echo about another circuit that a property compares with."""
    winners = "" if circuit.delay == "table" else f"; winners: {WINNERS[circuit.winners]}"
    return (
        ("compared with", f"{circuit.name}: {_names(circuit.nodes)}"),
        ("its delays", f"{MODELS[circuit.delay]}{winners}"),
        *[("its note", note) for note in circuit.notes],
    )


MOST = 24


def _names(names: Sequence[str], most: int = MOST) -> str:
    if len(names) <= most:
        return ", ".join(names) or "none"
    return f"{', '.join(names[: most - 2])}, ... ({len(names)} in all)"


def _count(number: int, what: str) -> str:
    return f"{number} {what}{'' if number == 1 else 's'}"


def _mode(environment: Environment) -> str:
    if environment.mode == "fundamental":
        return f"fundamental mode; {CHANGES[environment.changes]}"
    return "input-output mode; an input may change whenever its guard is true"


def _guards(circuit: Circuit, environment: Environment) -> list[str]:
    return [_guard(name, environment.guards[name]) for name in circuit.inputs if name in environment.guards]


def _guard(name: str, guard: Guard) -> str:
    edges = ((f"{name}+", guard.rises), (f"{name}-", guard.falls))
    when = [f"{edge} when {to_text(e)}" for edge, e in edges if e is not TRUE]
    return ", ".join(when or [f"{name} at any time"]) + ("; must not wait for ever" if guard.must else "")


def _start(environment: Environment) -> str:
    values = [f"{s}={int(v)}" for s, v in environment.start.items()]
    sort = "stable total state" if environment.mode == "fundamental" else "total state"
    given = " ".join(values) if len(values) <= MOST else _names(values)
    return f"every {sort}{f' with {given}' if values else ''} that the assumptions admit"
