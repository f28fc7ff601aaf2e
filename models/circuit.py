"""A circuit under a delay model: inputs, nodes with their excitation functions, zero-delay defined signals."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property

from settled.models.components import components
from settled.models.logic import STABLE, Expr, Program, and_, not_, rename, substitute, support, var, xor


@dataclass(frozen=True, eq=False)
class Circuit:
    """What carries a delay, and what excites it (Huffman; Muller).

    * `inputs`: driven by the environment; `nodes`: everything that carries a delay, in a fixed order.
    * `excitation[n]`: the excitation function of node `n`, over inputs and nodes. Node `n` is excited when its
      value differs from it.
    * `defined[s]`: a zero-delay signal as an expression over inputs and nodes.
    * `outputs`: names of inputs, nodes or defined signals.
    * `delay`, `winners`: the delay model and the switching rule, for the echo and for the meaning of a step.
    * `exclusive`: pairs of nodes of which one step switches at most one: the grants of mutual-exclusion elements.
    * `notes`: sentences for the echo (such as the feedback lines chosen).
    """

    name: str
    inputs: tuple[str, ...]
    nodes: tuple[str, ...]
    excitation: Mapping[str, Expr]
    outputs: tuple[str, ...] = ()
    defined: Mapping[str, Expr] = field(default_factory=dict)
    delay: str = "feedback"
    winners: str = "any"
    notes: tuple[str, ...] = ()
    exclusive: tuple[tuple[str, str], ...] = ()

    @cached_property
    def signals(self) -> tuple[str, ...]:
        """Inputs, then nodes: the order of the bits of a packed total state, least significant first."""
        return self.inputs + self.nodes

    @cached_property
    def place(self) -> dict[str, int]:
        """Bit position of each input and node in a packed total state."""
        return {name: i for i, name in enumerate(self.signals)}

    @cached_property
    def input_mask(self) -> int:
        """The bits of the inputs in a packed total state."""
        return (1 << len(self.inputs)) - 1

    @cached_property
    def pairs(self) -> tuple[int, ...]:
        """The pairs of `exclusive`, packed."""
        return tuple(1 << self.place[a] | 1 << self.place[b] for a, b in self.exclusive)

    @cached_property
    def targets(self) -> Program:
        """The excitation functions, in the order of `excitation`, made ready for evaluation."""
        return Program([*self.excitation.values()])

    @cached_property
    def is_excited(self) -> dict[str, Expr]:
        """For each node, the expression that is true where it is excited."""
        return {n: xor(var(n), self.excitation[n]) for n in self.nodes}

    @cached_property
    def is_stable(self) -> Expr:
        """The expression that is true where no node is excited."""
        return and_(*(not_(e) for e in self.is_excited.values()))

    def resolve(self, *expressions: Expr) -> list[Expr]:
        """`expressions` over inputs and nodes only: definitions expanded, `stable` and `excited` spelt out."""

        def leaf(e: Expr) -> Expr:
            if e is STABLE:
                return self.is_stable
            if e.op == "excited":
                return self.is_excited[e.name]
            return self.defined.get(e.name, e)

        return substitute(expressions, leaf)

    def signal(self, name: str) -> Expr:
        """The signal `name` as an expression over inputs and nodes."""
        return self.defined.get(name, var(name))

    @cached_property
    def has_feedback(self) -> bool:
        """Whether some node's expression reads the node, directly or through others."""
        return bool(loops(self.nodes, self.excitation))


def expand(defined: Mapping[str, Expr]) -> dict[str, Expr]:
    """Definitions with the definitions they read put in. Raises `ValueError` naming a cycle if there is one."""
    done: dict[str, Expr] = {}
    for name in definition_order(defined):
        done[name] = rename([defined[name]], done)[0]
    return {name: done[name] for name in defined}


def definition_order(defined: Mapping[str, Expr]) -> list[str]:
    """Names of `defined`, each after those it reads. Raises `ValueError` whose text names those of a cycle."""
    reads = {name: support(body) for name, body in defined.items()}
    order: list[str] = []
    for part in components(reads):
        if len(part) > 1 or part[0] in reads[part[0]]:
            raise ValueError(", ".join(part))
        order += part
    return order


def loops(nodes: Sequence[str], excitation: Mapping[str, Expr]) -> list[list[str]]:
    """The feedback loops, as the sets of nodes that reach one another; each in node order, in order of first node."""
    reads = {name: support(excitation[name]) for name in nodes}
    rank = {n: i for i, n in enumerate(nodes)}
    found = [
        sorted(part, key=rank.__getitem__) for part in components(reads) if len(part) > 1 or part[0] in reads[part[0]]
    ]
    return sorted(found, key=lambda part: rank[part[0]])
