"""Certificates: an inductive invariant, checked by another solver than the one that found it.

z3 checks it against `settled.encodings.moves`, two copies of the state with the moves written from the definitions,
and not against the one-copy formulas that the search used. The same three statements can be written as SMT-LIB 2.6
scripts, each of which any SMT solver must answer with `unsat`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import z3

from settled.encodings.excitation import formulas
from settled.encodings.moves import Moves, begins
from settled.encodings.system import System, after
from settled.models.logic import Expr, support, to_text
from settled.verify.limits import Limits


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
    clauses: tuple[tuple[tuple[str, bool], ...], ...]
    claim: str

    def as_data(self) -> dict[str, Any]:
        """For the result document."""
        watching = [v for v in self.system.variables if v not in set(self.system.base)]
        return {
            "claim": self.claim,
            "observers": {v: to_text(self.system.next_value(v)) for v in watching},
            "clauses": [[("" if value else "~") + name for name, value in clause] for clause in self.clauses],
        }


class Statement:
    """The three statements of a proof as z3 formulas; variables are called by number, `n17`, and `n17_next` after."""

    def __init__(self, proof: Proof) -> None:
        self.proof, system = proof, proof.system
        self.now = {v: z3.Bool(f"n{i}") for i, v in enumerate(system.variables)}
        self.then = {v: z3.Bool(f"n{i}_next") for i, v in enumerate(system.variables)}
        watched = [system.may[v][k] for v in system.variables[len(system.base) :] for k in (0, 1)]
        held = [*system.restraint.held.values(), system.restraint.picks]
        read = support(proof.bad, *watched, *held)
        later = {after(v): x for v, x in self.then.items()}
        known = {**self.now, **later}
        self.choices = {s: z3.Bool(f"c{i}") for i, s in enumerate(dict.fromkeys(read)) if s not in known}
        self.present = {**known, **self.choices}

    def queries(self) -> dict[str, list[Any]]:
        """By name, assertions that must have no model together."""
        invariant, after = self._invariant(self.now), self._invariant(self.then)
        return {
            "start": [self._start(), z3.Not(z3.And(*invariant))],
            "step": [*invariant, self._step(), z3.Not(z3.And(*after))],
            "property": [*invariant, *formulas([self.proof.bad], self.present)],
        }

    def _invariant(self, values: Mapping[str, Any]) -> list[Any]:
        literal = {(v, bit): x if bit else z3.Not(x) for v, x in values.items() for bit in (False, True)}
        clauses = [z3.Or(*(literal[pair] for pair in clause)) for clause in self.proof.clauses]
        return [*formulas([self.proof.system.always], values), *clauses]

    def _start(self) -> Any:
        system = self.proof.system
        watching = formulas([system.start], self.now) if len(system.variables) > len(system.base) else []
        return z3.And(begins(system.circuit, system.environment, self.now), *watching)

    def _step(self) -> Any:
        system = self.proof.system
        moves = Moves(system.circuit, system.environment, system.restraint, self.present, self.then).formula()
        rules = []
        for v in system.variables[len(system.base) :]:
            zero, one = formulas(system.may[v], self.present)
            rules += [z3.Implies(self.then[v], one), z3.Implies(z3.Not(self.then[v]), zero)]
        return z3.And(moves, *rules)


def check(proof: Proof, limits: Limits) -> None:
    """Let z3 confirm a proof. Raises `CertificateFailed`, and `LimitReached` when time is up."""
    for name, assertions in Statement(proof).queries().items():
        solver = z3.SolverFor("QF_FD")
        solver.set("timeout", max(1, int(1000 * (limits.seconds - limits.spent()))))
        solver.add(*assertions)
        outcome = solver.check()
        if outcome == z3.sat:
            raise CertificateFailed(f"`{proof.claim}`: the statement `{name}` of the invariant does not hold")
        if outcome == z3.unknown:
            if solver.reason_unknown() == "interrupted from keyboard":
                raise KeyboardInterrupt
            limits.refuse(
                f"time limit of {limits.seconds:g} s reached while z3 checked the proof; raise it with --seconds N"
            )


def scripts(proof: Proof) -> Iterator[tuple[str, str]]:
    """The SMT-LIB 2.6 scripts of a proof, as (name, text): `start`, `step`, `property`. Each must answer `unsat`."""
    statement = Statement(proof)
    names = [f"; {x} = {v}" for v, x in {**statement.now, **statement.choices}.items()]
    for name, assertions in statement.queries().items():
        solver = z3.Solver()
        solver.add(*assertions)
        body = [line for line in solver.to_smt2().splitlines() if not line.startswith((";", "(set-info"))]
        head = [f"; {name}: {proof.claim}", "(set-info :smt-lib-version 2.6)", "(set-logic QF_UF)"]
        yield name, "\n".join([*names, *head, *body, ""])


__all__ = ["CertificateFailed", "Proof", "check", "scripts"]
