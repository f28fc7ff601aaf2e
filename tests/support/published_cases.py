"""Published and recorded cases as property files, so that they are checked the way a user would check them.

Notation of the data files: a total state is `inputs.nodes`, bits in the order of the file; delays of connections are
left out of it, since in a stable state every connection has the value of its source.
"""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from property_text import table

from settled.models.states import unpack
from settled.verify import check
from settled.verify.result import Result
from settled.verify.session import Session, Settings, load

FOLDER = Path(__file__).parents[1] / "published"
Values = Mapping[str, int]
Table = Mapping[str, Any]


def cases(name: str) -> list[dict[str, Any]]:
    """The cases of a data file, each with its `id`, `source` and `status`."""
    found: list[dict[str, Any]] = json.loads((FOLDER / name).read_text(encoding="utf-8"))
    return found


@dataclass(frozen=True)
class Subject:
    """The circuit of a case under a delay model: `gates` maps each node to the text of its excitation."""

    inputs: tuple[str, ...]
    gates: Mapping[str, str]
    delay: str = "gate"
    winners: str = "any"
    cells: Mapping[str, list[str]] = field(default_factory=dict)

    def file(self, environment: Table, properties: Iterable[Table]) -> str:
        """The text of a property file; guards stand under `inputs` of the environment."""
        model = {"inputs": self.inputs, "delay": self.delay, "winners": self.winners}
        lines = [*table("circuit", model), *table("circuit.excitation", self.gates)]
        if self.delay == "wire" and self.cells:
            lines += table("circuit.cells", self.cells)
        lines += table("environment", environment)
        for one in properties:
            lines += table("[property]", one)
        return "\n".join(lines)

    def check(self, environment: Table, *properties: Table) -> tuple[Result, ...]:
        """The results of a property file."""
        results: tuple[Result, ...] = check("case.toml", text=self.file(environment, properties)).results
        return results

    def session(self, environment: Table, *properties: Table) -> Session:
        """A session on the circuit, for what is read off it directly."""
        asked = properties or ({"check": "always", "expr": "1"},)
        return Session(load("case.toml", self.file(environment, asked)), Settings())

    def values(self, state: str | Values) -> dict[str, int]:
        """The values that a state in the notation of the data gives."""
        if not isinstance(state, str):
            return dict(state)
        bits = state.replace(".", "")
        return {name: int(bit) for name, bit in zip([*self.inputs, *self.gates], bits, strict=True)}

    def notation(self, session: Session, packed: int) -> str:
        """A packed total state in the notation of the data."""
        now = unpack(session.circuit, packed)
        return ".".join("".join(str(now[name]) for name in names) for names in (self.inputs, self.gates))

    def stable(self) -> str:
        """The expression that is true where no node is excited (delays of gates only)."""
        return " & ".join(f"({n} ~^ ({body}))" for n, body in self.gates.items())

    def one_change(self, before: str | Values, goal: Values) -> dict[str, Any]:
        """The environment in which the one thing that happens is the change from `before` to the inputs in `goal`.

        Inputs that change do so in one instant, and none changes back.
        """
        start = self.values(before)
        old = {x: start[x] for x in self.inputs}
        new = {**old, **goal}
        moving = {x: {"rises": str(new[x]), "falls": str(1 - new[x])} for x in self.inputs}
        vectors = f"{conjunction(old)} | {conjunction(new)}"
        return {"changes": "simultaneous", "assume": [vectors], "start": start, "inputs": moving}

    def excited_together(self) -> str:
        """The expression that is true where two gates or more are excited."""
        names = [f"excited({n})" for n in self.gates]
        pairs = [f"{a} & {b}" for i, a in enumerate(names) for b in names[:i]]
        return " | ".join(pairs) or "0"


def conjunction(values: Values) -> str:
    """The expression that is true where the signals have these values."""
    return "(" + (" & ".join(name if value else f"~{name}" for name, value in values.items()) or "1") + ")"


def frozen(inputs: Iterable[str]) -> dict[str, Any]:
    """Guards under which none of `inputs` changes."""
    return {x: {"rises": "0", "falls": "0"} for x in inputs}


@dataclass(frozen=True)
class Transition:
    """What the program says of one input change: `word` as in the data, `results` for further looks."""

    word: str
    results: tuple[Result, ...]


def transition(subject: Subject, before: str | Values, goal: Values, ends: list[dict[str, int]]) -> Transition:
    """Classify one input change, and assert that exactly the stable states `ends` (over some nodes) follow."""
    environment = subject.one_change(before, goal)
    start = subject.values(before)
    after = conjunction({x: goal.get(x, start[x]) for x in subject.inputs})
    here = conjunction({x: start[x] for x in subject.inputs})
    anywhere = " | ".join(f"{after} & {conjunction(end)}" for end in ends) or "0"
    results = subject.check(
        environment,
        {"check": "settles"},
        {"check": "race-free"},
        {"check": "never", "expr": subject.excited_together()},
        {"check": "always", "when": "stable", "expr": f"{here} | {anywhere}"},
        *({"check": "never", "when": "stable", "expr": f"{after} & {conjunction(end)}"} for end in ends),
    )
    settles, race, alone, only, *each = results
    assert settles.ranged["input_changes"] == 1, "one stable state and one change were meant"
    assert only.verdict == "proved", "an end that the data does not list"
    assert [r.verdict for r in each] == ["refuted"] * len(ends), "an end of the data is not reached"
    return Transition(_word(settles, race, alone), results)


def _word(settles: Result, race: Result, alone: Result) -> str:
    if settles.verdict == "refuted":
        return "oscillation_possible" if settles.ranged["stable_states"] > 1 else "oscillation"
    if race.verdict == "refuted":
        return "critical_race"
    return "no_race" if alone.verdict == "proved" else "noncritical_race"
