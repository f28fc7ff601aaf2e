"""Certificates: an inductive invariant, checked by another solver than the one that found it.

z3 reads the same SMT-LIB 2.6 scripts that are written for anyone else. They speak of two copies of the state and of
the moves as `settled.encodings.moves` has them from the definitions, not of the one-copy formulas of the search.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Protocol, TypeVar

from settled.encodings.moves import begins, follows, implies, moves
from settled.encodings.smtlib import script
from settled.encodings.system import System, after
from settled.models.logic import FALSE, TRUE, Expr, and_, not_, or_, rename, support, to_text, var
from settled.verify.limits import Limits

T = TypeVar("T")
Clause = tuple[tuple[str, bool], ...]

BATCH = 50


class CertificateFailed(Exception):
    """An invariant that another solver does not accept: a fault in this program, never a verdict."""


@dataclass(frozen=True)
class Proof:
    """That no state with `bad` true is reachable in `system`, because the clauses hold in every reachable state.

    `clauses`: literals as (variable, value); together with the system's assumptions they are inductive.
    `claim` says in words what cannot be reached.
    """

    system: System
    bad: Expr
    clauses: tuple[Clause, ...]
    claim: str


class Statements:
    """What must have no model for a proof to stand, as expressions; `after(v)` is `v` after the move.

    `known`: clauses that another proof has shown to hold in every reachable state, with the assumptions; they are
    premises here. Without them the assumptions are among what is to be shown.
    """

    def __init__(self, proof: Proof, known: Sequence[Clause] | None = None) -> None:
        self.proof, self.system = proof, proof.system
        given = set(known or ())
        self.own = [clause for clause in proof.clauses if clause not in given]
        self.clauses = [expression(clause) for clause in self.own]
        self.premises = [self.system.always, *(expression(clause) for clause in known or ())]
        self.shown = [] if known is not None else [self.system.always]
        self.later = {v: var(after(v)) for v in self.system.variables}

    def start(self) -> Expr:
        """A start state outside the invariant."""
        watching = self.system.start if self.system.watching else TRUE
        begun = and_(begins(self.system.circuit, self.system.environment), watching)
        return and_(begun, not_(and_(*self.shown, *self.clauses)))

    def step(self, numbers: Iterable[int]) -> Expr:
        """A move from the invariant that breaks one of the clauses, or the assumptions."""
        system = self.system
        kept = rename([*self.shown, *(self.clauses[i] for i in numbers)], self.later)
        if not kept:
            return FALSE
        rules = [moves(system.circuit, system.environment, system.restraint)]
        for v in system.watching:
            zero, one = system.may[v]
            rules += [implies(self.later[v], one), implies(not_(self.later[v]), zero)]
        return and_(self._invariant, *rules, not_(and_(*kept)))

    def excluded(self, bad: Expr) -> Expr:
        """A state of the invariant that is bad."""
        return and_(self._invariant, bad)

    @cached_property
    def _invariant(self) -> Expr:
        return and_(*self.premises, *self.clauses)

    def script(self, assertion: Expr, comments: Sequence[str] = ()) -> str:
        """The statement as a script; variables go by number, `n17`, and `n17_next` after the move, choices as `c3`."""
        names = {s: self._numbers.get(s) or f"c{i}" for i, s in enumerate(support(assertion))}
        table = [f"{number} = {s}" for s, number in names.items()] if comments else []
        return script([assertion], names, [*comments, *table])

    @cached_property
    def _numbers(self) -> dict[str, str]:
        now = {v: f"n{i}" for i, v in enumerate(self.system.variables)}
        return now | {after(v): f"{number}_next" for v, number in now.items()}

    def scripts(self) -> Iterator[tuple[str, str]]:
        """The statements by name as scripts; what is trivial is left out."""
        parts = {
            "start": (self.start(), "every start state satisfies the invariant"),
            "step": (self.step(range(len(self.clauses))), "no move leads out of the invariant"),
            "property": (self.excluded(self.proof.bad), "the invariant excludes what must not be"),
        }
        for name, (assertion, words) in parts.items():
            if assertion is not FALSE:
                yield name, self.script(assertion, [f"{self.proof.claim}: {words}", "expected answer: unsat"])


def expression(clause: Clause) -> Expr:
    """A clause as a disjunction."""
    return or_(*(var(v) if bit else not_(var(v)) for v, bit in clause))


class Argument(Protocol):
    """A conclusion from clauses that have been proved."""

    def script(self) -> str:
        """A script that any SMT solver must answer `unsat`."""

    def check(self, limits: Limits) -> None:
        """Let z3 confirm it. Raises `CertificateFailed` and `LimitReached`."""

    def as_data(self) -> list[list[str]]:
        """Its steps for the result document."""


class Certificate:
    """Proofs about one circuit; what they share, clauses over its own variables, is shown once.

    `arguments`: what is concluded from the clauses of the proofs.
    """

    def __init__(
        self, base: System, known: Sequence[Clause], proofs: Sequence[Proof], arguments: Sequence[Argument] = ()
    ) -> None:
        self.arguments = arguments
        shared = Proof(base, FALSE, tuple(known), "the clauses over the circuit's own signals")
        self.statements = {"circuit": Statements(shared)}
        self.statements |= {f"part-{i}": Statements(proof, known) for i, proof in enumerate(proofs, 1)}

    def check(self, limits: Limits) -> None:
        """Let z3 confirm everything. Raises `CertificateFailed`, and `LimitReached` when time is up."""
        for statements in self.statements.values():
            check(statements, limits)
        for argument in self.arguments:
            argument.check(limits)

    def scripts(self) -> dict[str, str]:
        """SMT-LIB 2.6 scripts by name, each to answer `unsat`; a part's assume what those of the circuit show."""
        parts = self.statements.items()
        found = {f"{part}-{name}": text for part, statements in parts for name, text in statements.scripts()}
        return found | {f"argument-{i}": argument.script() for i, argument in enumerate(self.arguments, 1)}

    def as_data(self) -> dict[str, Any]:
        """For the result document: the shared clauses, and of each part its claim, observers and further clauses."""
        shared, *parts = self.statements.values()
        arguments = {"arguments": [argument.as_data() for argument in self.arguments]} if self.arguments else {}
        return arguments | {
            "clauses": _texts(shared.own),
            "parts": [
                {
                    "claim": part.proof.claim,
                    "observers": {v: to_text(part.system.next_value(v)) for v in part.system.watching},
                    "clauses": _texts(part.own),
                }
                for part in parts
            ],
        }


def _texts(clauses: Iterable[Clause]) -> list[list[str]]:
    return [[("" if value else "~") + name for name, value in clause] for clause in clauses]


def check(statements: Statements, limits: Limits) -> None:
    """Let z3 confirm a proof. Raises `CertificateFailed`, and `LimitReached` when time is up.

    What the clauses near by suffice for is confirmed piece by piece; the rest as a whole.
    """
    near = Near(statements, limits)
    parts = {
        "start": statements.start(),
        "step": statements.step(near.clauses_left()),
        "property": statements.excluded(near.bad_left()),
    }
    for name, assertion in parts.items():
        if assertion is not FALSE and not impossible(statements.script(assertion), limits):
            claim = statements.proof.claim
            raise CertificateFailed(f"`{claim}`: the statement `{name}` of the invariant does not hold")


def impossible(text: str, limits: Limits) -> bool:
    """Whether z3 answers `unsat` to a script. Raises `LimitReached`."""
    import z3

    limits.check("while z3 checks the proof")
    solver = z3.SolverFor("QF_FD")
    solver.set("timeout", int(1000 * limits.left()) + 1)
    solver.from_string(text)
    outcome = solver.check()
    if outcome == z3.unknown:
        if solver.reason_unknown() == "interrupted from keyboard":
            raise KeyboardInterrupt
        limits.check("while z3 checks the proof")
        limits.refuse(f"z3 gives up on the proof: {solver.reason_unknown()}")
    return bool(outcome == z3.unsat)


class Near:
    """Confirms pieces of a proof, a batch at a time, under weaker premises: the clauses near the pieces, and of the
    moves only that a node that moves takes the value of its excitation."""

    def __init__(self, statements: Statements, limits: Limits) -> None:
        self.statements, self.limits = statements, limits
        self.excitation = statements.system.circuit.excitation
        self.premises = [*statements.premises, *statements.clauses]
        self.about: dict[str, list[int]] = defaultdict(list)
        for i, clause in enumerate(self.premises):
            for name in support(clause):
                self.about[name].append(i)

    def clauses_left(self) -> list[int]:
        """Numbers of the clauses that a move might break, for all that is known near them."""
        left: list[int] = []
        for batch in batched(range(len(self.statements.clauses)), BATCH):
            clauses = [self.statements.clauses[i] for i in batch]
            names = support(*clauses)
            rules = [follows(self.statements.system.circuit, n) for n in names if n in self.excitation]
            kept = rename(clauses, self.statements.later)
            if not self._impossible(names, and_(*rules, not_(and_(*kept)))):
                left += batch
        return left

    def bad_left(self) -> Expr:
        """The alternatives of the bad states that are not excluded by what is known near them."""
        bad = self.statements.proof.bad
        left: list[Expr] = []
        for batch in batched(bad.args if bad.op == "or" else (bad,), BATCH):
            if not self._impossible(support(*batch), or_(*batch)):
                left += batch
        return or_(*left)

    def _impossible(self, names: Sequence[str], assertion: Expr) -> bool:
        read = {*names, *support(*(self.excitation[n] for n in names if n in self.excitation))}
        near = sorted({i for name in read for i in self.about.get(name, ())})
        text = self.statements.script(and_(*(self.premises[i] for i in near), assertion))
        return impossible(text, self.limits)


def batched(items: Sequence[T], size: int) -> Iterator[Sequence[T]]:
    """The items in order, `size` at a time."""
    return (items[at : at + size] for at in range(0, len(items), size))
