"""Certificates: an inductive invariant, checked by another solver than the one that found it.

z3 reads the same SMT-LIB 2.6 scripts that are written for anyone else. They speak of two copies of the state and of
the moves as `settled.encodings.moves` has them from the definitions, not of the one-copy formulas of the search.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, TypeVar

from settled.encodings.moves import begins, follows, implies, moves
from settled.encodings.smtlib import script
from settled.encodings.system import System, after
from settled.models.logic import FALSE, Expr, and_, not_, or_, rename, support, to_text, var
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

    def as_data(self) -> dict[str, Any]:
        """For the result document."""
        return {
            "claim": self.claim,
            "observers": {v: to_text(self.system.next_value(v)) for v in self.system.watching},
            "clauses": [[("" if value else "~") + name for name, value in clause] for clause in self.clauses],
        }


class Statements:
    """What must have no model for a proof to stand, as expressions; `after(v)` is `v` after the move."""

    def __init__(self, proof: Proof) -> None:
        self.proof, self.system = proof, proof.system
        self.clauses = [or_(*(var(v) if bit else not_(var(v)) for v, bit in clause)) for clause in proof.clauses]
        self.later = {v: var(after(v)) for v in self.system.variables}

    def start(self) -> Expr:
        """A start state outside the invariant."""
        watching = self.system.start if self.system.watching else not_(FALSE)
        return and_(begins(self.system.circuit, self.system.environment), watching, not_(self._invariant))

    def step(self, numbers: Iterable[int]) -> Expr:
        """A move from the invariant that breaks one of the clauses, or the assumptions."""
        system = self.system
        kept = rename([system.always, *(self.clauses[i] for i in numbers)], self.later)
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
        return and_(self.system.always, *self.clauses)

    def script(self, assertion: Expr, comments: Sequence[str] = ()) -> str:
        """The statement as a script; variables go by number, `n17`, and `n17_next` after the move, choices as `c3`."""
        names = {}
        for i, v in enumerate(self.system.variables):
            names[v], names[after(v)] = f"n{i}", f"n{i}_next"
        read = support(assertion)
        names |= {s: f"c{i}" for i, s in enumerate(s for s in read if s not in names)}
        table = [f"{names[s]} = {s}" for s in read] if comments else []
        return script([assertion], names, [*comments, *table])


def scripts(proof: Proof) -> Iterator[tuple[str, str]]:
    """The SMT-LIB 2.6 scripts of a proof as (name, text): `start`, `step` and `property`; each must answer `unsat`."""
    statements = Statements(proof)
    every = range(len(proof.clauses))
    parts = {
        "start": (statements.start(), "every start state satisfies the invariant"),
        "step": (statements.step(every), "no move leads out of the invariant"),
        "property": (statements.excluded(proof.bad), "the invariant excludes what must not be"),
    }
    for name, (assertion, words) in parts.items():
        yield name, statements.script(assertion, [f"{proof.claim}: {words}", "expected answer: unsat"])


def check(proof: Proof, limits: Limits) -> None:
    """Let z3 confirm a proof. Raises `CertificateFailed`, and `LimitReached` when time is up.

    What the clauses near by suffice for is confirmed piece by piece; the rest as a whole.
    """
    statements = Statements(proof)
    near = Near(statements, limits)
    parts = {
        "start": statements.start(),
        "step": statements.step(near.clauses_left()),
        "property": statements.excluded(near.bad_left()),
    }
    for name, assertion in parts.items():
        if not impossible(statements.script(assertion), limits):
            raise CertificateFailed(f"`{proof.claim}`: the statement `{name}` of the invariant does not hold")


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
        self.statements, self.proof, self.limits = statements, statements.proof, limits
        self.excitation = self.proof.system.circuit.excitation
        self.about: dict[str, list[int]] = defaultdict(list)
        for i, clause in enumerate(self.proof.clauses):
            for name, _ in clause:
                self.about[name].append(i)

    def clauses_left(self) -> list[int]:
        """Numbers of the clauses that a move might break, for all that is known near them."""
        left: list[int] = []
        for batch in batched(range(len(self.proof.clauses)), BATCH):
            names = sorted({name for i in batch for name, _ in self.proof.clauses[i]})
            rules = [follows(self.proof.system.circuit, n) for n in names if n in self.excitation]
            kept = rename([self.statements.clauses[i] for i in batch], self.statements.later)
            if not self._impossible(names, and_(*rules, not_(and_(*kept)))):
                left += batch
        return left

    def bad_left(self) -> Expr:
        """The alternatives of the bad states that are not excluded by what is known near them."""
        bad = self.proof.bad
        left: list[Expr] = []
        for batch in batched(bad.args if bad.op == "or" else (bad,), BATCH):
            if not self._impossible(support(*batch), or_(*batch)):
                left += batch
        return or_(*left)

    def _impossible(self, names: Sequence[str], assertion: Expr) -> bool:
        read = {*names, *support(*(self.excitation[n] for n in names if n in self.excitation))}
        near = sorted({i for name in read for i in self.about.get(name, ())})
        text = self.statements.script(and_(*(self.statements.clauses[i] for i in near), assertion))
        return impossible(text, self.limits)


def batched(items: Sequence[T], size: int) -> Iterator[Sequence[T]]:
    """The items in order, `size` at a time."""
    return (items[at : at + size] for at in range(0, len(items), size))
