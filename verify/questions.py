"""Questions about a circuit in its environment, and answers to them: the language between properties and engines.

Every property kind asks one of these questions; every engine answers those it can. A new kind that fits a question
needs no engine, a new engine needs no kind.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.flow_table import FlowTable
from settled.models.logic import Expr
from settled.models.states import Run
from settled.verify.limits import Limits


@dataclass(frozen=True)
class Question:
    """What is asked. The answer `refuted` means that the failure the question speaks of exists."""

    @property
    def circuits(self) -> tuple[Circuit, ...]:
        """Circuits beside the one that is asked about, whose runs an answer may show."""
        return ()


@dataclass(frozen=True)
class StableCount(Question):
    """Does an admitted input vector have fewer than `least` or more than `most` stable internal states?"""

    least: int = 1
    most: int | None = None


@dataclass(frozen=True)
class Reaches(Question):
    """Is a total state reachable in which `bad` is true? `only_stable`: only stable ones count."""

    bad: Expr
    only_stable: bool = False


@dataclass(frozen=True)
class Oscillates(Question):
    """Can a fair run from a reachable total state go on for ever while the inputs are held?"""


@dataclass(frozen=True)
class Diverges(Question):
    """Can two runs after one input change or burst end in different stable total states?"""


@dataclass(frozen=True)
class Flickers(Question):
    """Can one of `signals` change more than once in the response to one input change or burst?"""

    signals: tuple[str, ...]


@dataclass(frozen=True)
class DivergesAfterThree(Question):
    """Can one change and three changes of an input, with settling between, end in different internal states?"""


@dataclass(frozen=True)
class Withdraws(Question):
    """Can a step or an input change take away the excitation of a node that does not itself switch?

    Nodes in `excepted` do not count. False of exactly the semi-modular circuits (Muller 1959, recalled).
    """

    excepted: tuple[str, ...] = ()


@dataclass(frozen=True)
class Deadlocks(Question):
    """Is a total state reachable in which no node is excited and no input may change (`assume` and guards allowing)?"""


@dataclass(frozen=True)
class Evades(Question):
    """Can a fair run from a reachable total state in which `source` is true go on or end without `target`?

    Changes of the environment are part of the run; what must not wait for ever is in the semantics of `must`.
    """

    source: Expr
    target: Expr


@dataclass(frozen=True)
class PowersUp(Question):
    """Can runs from any internal state, through `vectors`, end in different total states, or go on for ever?

    Each packed input vector is applied in one instant once the circuit has settled under the one before.
    """

    vectors: tuple[int, ...]


@dataclass(frozen=True)
class Differs(Question):
    """Can the circuit and `other`, which get the same changes, come to differ on `outputs`, or not settle?

    True when some start state has no good partner (semantics of equivalence). `other` has the same inputs in the same
    order, a name of its own, and `outputs` among its outputs. `transients`: an output of `other` must not have a
    hazard where that of the circuit has none, either.
    """

    other: Circuit
    outputs: tuple[str, ...]
    transients: bool = False

    @property
    def circuits(self) -> tuple[Circuit, ...]:
        """The other circuit."""
        return (self.other,)


@dataclass(frozen=True)
class Departs(Question):
    """Can the circuit come to differ from a flow table that gets the same changes, on `outputs`, or not settle?

    As `Differs`, with the table as the original and the circuit as the other one. The table has the circuit's inputs.
    """

    table: FlowTable
    outputs: tuple[str, ...]

    @property
    def circuits(self) -> tuple[Circuit, ...]:
        """The table as a circuit."""
        return (self.table.circuit,)


@dataclass(frozen=True)
class Answer:
    """What an engine found.

    * `verdict`: `proved`, `refuted` or `undecided` (then `reason` says why).
    * `runs`: the failure, as runs from a start state; checked by `replay` before anyone sees them.
    * `ranged`: counts of what was covered (`total_states`, `stable_states`, `input_changes`), where counted.
    * `exercised`: False when there was nothing to range over.
    * `facts`: more about the failure, as in the result document.
    * `scripts`: SMT-LIB 2.6 scripts by name; a proof stands when any SMT solver answers `unsat` to each.
    """

    verdict: str
    method: str
    reason: str | None = None
    runs: tuple[Run, ...] = ()
    ranged: Mapping[str, int] = field(default_factory=dict)
    exercised: bool = True
    facts: Mapping[str, Any] = field(default_factory=dict)
    certificate: Mapping[str, Any] | None = None
    scripts: Mapping[str, str] = field(default_factory=dict)


@dataclass
class Task:
    """One circuit in one environment under limits. Engines keep what they may use again in `memory`."""

    circuit: Circuit
    environment: Environment
    limits: Limits
    memory: dict[str, Any] = field(default_factory=dict)


def undecided(reason: str, method: str) -> Answer:
    """The answer of an engine that came to no decision."""
    return Answer("undecided", method, reason=reason)
