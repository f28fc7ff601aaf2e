"""The proof that two circuits correspond under pairs of nodes on all loops: equal excitations, equal outputs.

Theorem. Let both circuits settle in every run, and let each change have one end, from their start states. Let K be
nodes of the original on every loop of it, m an injective map to nodes of the other circuit on every loop of that, each
pair equal or inverse. For every input vector that `assume` admits and all values of K, let what the nodes of K are
excited to, with all nodes outside K without delay, correspond to the same of m(K); where these values of K reproduce
themselves, let the compared outputs be equal. Then each stable total state of the original corresponds to one of the
other circuit with the same inputs and, up to inversion, the same values of K; start states that correspond are good
pairs.

Proof. Stable states are the values of inputs and K that reproduce themselves, hence correspond one to one, with equal
outputs; so start states correspond, where values of `start` that name other signals of the original are read over K.
Take a corresponding pair and a change or burst; let all members arrive before any node switches, then let the nodes
outside the cut switch one at a time until they are calm, which they become because no loop is left, then one excited
node of K and its partner, and so on, nodes of K in turn. Delays are arbitrary, a step of one node is lawful under both
switching rules and between exclusive pairs, and no node waits for ever: these are fair runs of both circuits, so they
end, in corresponding states. As every other run ends there too, the pair of ends corresponds. Guards are read off the
original in stable states, where they are functions of inputs and K as well.
"""

from __future__ import annotations

from dataclasses import replace
from functools import cached_property

from settled.models.environment import Guard
from settled.models.logic import FALSE, Expr, not_, rename, var, xor
from settled.verify.limits import Limits
from settled.verify.matching.cuts import Pairs
from settled.verify.matching.guesses import Partner
from settled.verify.never import Never, confirm
from settled.verify.questions import Differs, Task
from settled.verify.settled_states import Settled


class Correspondence:
    """Both circuits over the inputs and the pairs of a joint cut. Variables are the original's nodes."""

    def __init__(self, task: Task, question: Differs, pairs: Pairs) -> None:
        self.original, self.other, self.environment, self.pairs = task.circuit, question.other, task.environment, pairs
        self.outputs = question.outputs
        self.left = Settled(self.original, [*pairs])
        self.right = Settled(self.other, [p.node for p in pairs.values()])
        self._names = {p.node: _signed(var(n), p) for n, p in pairs.items()}

    @cached_property
    def assumed(self) -> list[Expr]:
        """What is true of the inputs."""
        return self.original.resolve(*self.environment.assume)

    @cached_property
    def nodes(self) -> dict[str, Expr]:
        """By node of the original in the cut, where it and its partner are excited to what does not correspond."""
        found = {}
        for n, p in self.pairs.items():
            theirs = _signed(self._facing(self.right.follows[p.node]), p)
            found[n] = _differ(self.left.follows[n], theirs)
        return found

    @cached_property
    def shown(self) -> dict[str, Expr]:
        """By compared output, where it differs in stable states."""
        found = {}
        for z in self.outputs:
            theirs = self._facing(self.right.in_rest(self.other.signal(z)))
            found[z] = _differ(self.left.in_rest(self.original.signal(z)), theirs)
        return found

    def wrong_nodes(self, limits: Limits) -> list[str]:
        """The nodes of the cut that do not correspond for some admitted inputs and values of the cut."""
        never = Never(self.assumed, limits)
        return [n for n, e in self.nodes.items() if not never([e])]

    def wrong_outputs(self, limits: Limits) -> list[str]:
        """The compared outputs that differ in some stable states that correspond."""
        never = Never([*self.assumed, *self.left.conditions], limits)
        return [z for z, e in self.shown.items() if not never([e])]

    def confirm(self, limits: Limits) -> None:
        """Let z3 confirm that nothing is wrong. Raises `NotConfirmed`."""
        confirm(self.assumed, [*self.nodes.values()], limits)
        confirm([*self.assumed, *self.left.conditions], [*self.shown.values()], limits)

    def _facing(self, e: Expr) -> Expr:
        """An expression over inputs and nodes of the other cut, over those of the original."""
        return rename([e], self._names)[0]

    def facing_task(self, limits: Limits) -> Task:
        """The other circuit where it meets the original: guards and `start` read over the corresponding nodes."""
        back = {n: _signed(var(p.node), p) for n, p in self.pairs.items()}

        def over(e: Expr) -> Expr:
            return rename([self.left.in_rest(e)], back)[0]

        guards = {x: Guard(over(g.rises), over(g.falls), g.must) for x, g in self.environment.guards.items()}
        named = {s: s if s in self.other.inputs else f"{s} of {self.original.name}" for s in self.environment.start}
        defined = {new: over(self.original.signal(s)) for s, new in named.items() if new != s}
        start = {named[s]: v for s, v in self.environment.start.items()}
        circuit = replace(self.other, defined={**self.other.defined, **defined})
        return Task(circuit, replace(self.environment, guards=guards, start=start), limits)


def _differ(a: Expr, b: Expr) -> Expr:
    return FALSE if a is b else xor(a, b)


def _signed(e: Expr, partner: Partner) -> Expr:
    return not_(e) if partner.inverse else e
