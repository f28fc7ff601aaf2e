"""The nets of a flat design: which of them are one, what drives each, and who reads it.

Nets that ports join are one net, called by its name on the highest level; the other names are aliases. A net has
exactly one driver: an input, a gate, an assignment, a supply.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from settled.models.logic import Expr, rename, support, var
from settled.models.netlist import Delay, Gate
from settled.models.problems import InputError, Problem
from settled.models.readers.verilog_hierarchy import Owner
from settled.models.source import Span


@dataclass(frozen=True)
class User:
    """What drives or reads a net, in words, and where."""

    what: str
    span: Span

    def __str__(self) -> str:
        return f"{self.what} at {self.span.file}:{self.span.line}:{self.span.column}"


@dataclass
class Nets:
    """Collects gates and definitions. First join all nets, then drive them."""

    alias: dict[str, str] = field(default_factory=dict)
    joined: dict[str, Expr] = field(default_factory=dict)
    drivers: dict[str, User] = field(default_factory=dict)
    readers: dict[str, User] = field(default_factory=dict)
    gates: list[Gate] = field(default_factory=list)
    defined: dict[str, Expr] = field(default_factory=dict)

    def join(self, inner: str, outer: str, by: User) -> None:
        """Make the net `inner` another name of `outer`."""
        if inner in self.alias or self.name(outer) == inner:
            message = f"{by.what} joins nets `{self.name(inner)}` and `{self.name(outer)}`"
            help = "connect each net inside an instance to one net outside"
            raise InputError(Problem("joined-nets", message, by.span, help=help))
        self.alias[inner] = outer

    def joined_all(self) -> None:
        """No more nets are joined from here on."""
        self.joined = {name: var(self.name(name)) for name in self.alias}

    def name(self, net: str) -> str:
        """The name of a net on the highest level."""
        while net in self.alias:
            net = self.alias[net]
        return net

    def drive(self, net: str, by: User) -> None:
        """Note the driver of a net; a second one is an error."""
        name = self.name(net)
        if name in self.drivers:
            message = f"net `{name}` has two drivers"
            notes = (f"one is {self.drivers[name]}", f"the other one is {by}")
            help = "accepted: one driver a net, without tri-state or wired logic"
            raise InputError(Problem("multiply-driven", message, by.span, "one of them", notes, help))
        self.drivers[name] = by

    def read(self, net: str, by: User) -> None:
        """Note that a net must have a driver."""
        self.readers.setdefault(self.name(net), by)

    def gate(self, net: str, body: Expr, by: User, owner: Owner | None, delay: Delay | None = None) -> None:
        """Let a gate drive a net."""
        self.drive(net, by)
        name = self.name(net)
        self.gates.append(Gate(name, self._body(body, by), by.span, delay))
        if owner is not None:
            owner.add(name)

    def define(self, net: str, body: Expr, by: User) -> None:
        """Let a net be another net or a constant, without delay."""
        self.drive(net, by)
        self.defined[self.name(net)] = self._body(body, by)

    def _body(self, body: Expr, by: User) -> Expr:
        """A function under the names of the highest level; what it reads is noted."""
        reads = support(body)
        for read in reads:
            self.read(read, by)
        return body if self.joined.keys().isdisjoint(reads) else rename([body], self.joined)[0]

    def loops(self) -> list[Problem]:
        """Definitions that lead back to themselves: no gate is in such a loop, so nothing gives it a value."""
        problems = []
        seen: set[str] = set()
        for start in self.defined:
            path = [start]
            while path[-1] not in seen and (body := self.defined.get(path[-1])) is not None and body.op == "var":
                seen.add(path[-1])
                path.append(body.name)
            if path[-1] in path[:-1]:
                cycle = path[path.index(path[-1]) :]
                by = self.drivers[cycle[0]]
                message = "assignments without a gate form a loop: " + " reads ".join(f"`{name}`" for name in cycle)
                problems.append(Problem("assignment-loop", message, by.span, help="put a gate into the loop"))
        return problems
