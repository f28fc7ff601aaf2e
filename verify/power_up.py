"""What is said beside a verdict on power-up: three-valued simulation node by node, and whether `start` is reached."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import topological
from settled.models.states import Behaviour, unpack, value
from settled.models.three_valued import power_up, resolving, shown

RULE = (
    "from all nodes unknown, gate by gate, each operator by its own ternary extension; algorithms A and B after each "
    "input vector (Eichelberger 1965, recalled)"
)


def vectors_of(circuit: Circuit, packed: Sequence[int]) -> list[dict[str, int]]:
    """Packed input vectors as values by name."""
    return [{x: v >> i & 1 for i, x in enumerate(circuit.inputs)} for v in packed]


def lasting_values(circuit: Circuit, states: Iterable[int]) -> dict[str, str]:
    """`0` or `1` for each node that has one value in all of these total states, else `open`."""
    high = low = None
    for state in states:
        high = state if high is None else high & state
        low = state if low is None else low | state
    ones, zeros = high or 0, ~(low or 0)
    return {n: "1" if ones >> b & 1 else "0" if zeros >> b & 1 else "open" for n, b in _places(circuit)}


def _places(circuit: Circuit) -> list[tuple[str, int]]:
    return [(n, circuit.place[n]) for n in circuit.nodes]


def ternary_facts(circuit: Circuit, vectors: Sequence[int], exact: Mapping[str, str]) -> dict[str, Any]:
    """Three-valued simulation after `vectors` beside the exact values: known, really open, or pessimism.

    For pessimism, the `cause`: a node whose two values both lead to the one exact value, so that the simulation loses
    it where the branches of that node meet again; None when no single node explains it.
    """
    moved, settled = power_up(circuit, vectors_of(circuit, vectors))[-1]
    explained = resolving(circuit, moved, settled)
    nodes: dict[str, dict[str, str | None]] = {}
    for n in circuit.nodes:
        said = shown(settled[n])
        finding = "known" if said != "x" else "really open" if exact[n] == "open" else "pessimism"
        nodes[n] = {"simulated": said, "exact": exact[n], "finding": finding}
        if finding == "pessimism":
            nodes[n]["cause"] = _cause(circuit, n, explained[n])
    return {"rule": RULE, "after_vectors": len(vectors), "nodes": nodes}


def _cause(circuit: Circuit, node: str, candidates: Sequence[str]) -> str | None:
    """Of the nodes that explain it the first one that branches; `node` itself only when no other does."""
    uses = Counter(a.name for e in topological(circuit.excitation.values()) for a in e.args if a.op == "var")
    uses.update(e.name for e in circuit.excitation.values() if e.op == "var")
    return min(candidates, key=lambda s: (s == node, uses[s] < 2, circuit.place[s]), default=None)


def start_facts(circuit: Circuit, environment: Environment, ends: Sequence[int]) -> dict[str, Any]:
    """Whether the state that `start` describes is among the ends, with a note when it is not."""
    if not environment.start:
        return {}
    behaviour = Behaviour(circuit, environment)
    if any(behaviour.may_start(end) for end in ends):
        return {"start_reached": True}
    given = " ".join(f"{s}={int(v)}" for s, v in environment.start.items())
    found = ", ".join(dict.fromkeys(_values(circuit, environment, end) for end in ends[:4]))
    note = f"the start of this file ({given}) is not reached from power-up by this sequence, which ends with {found}"
    return {"start_reached": False, "note": note}


def _values(circuit: Circuit, environment: Environment, state: int) -> str:
    names = list(environment.start)
    values = value(circuit, [circuit.signal(s) for s in names], state)
    return " ".join(f"{s}={v}" for s, v in zip(names, values, strict=True))


def end_facts(circuit: Circuit, end: int) -> dict[str, int]:
    """The values of the nodes in the one end."""
    return {s: v for s, v in unpack(circuit, end).items() if s in circuit.nodes}
