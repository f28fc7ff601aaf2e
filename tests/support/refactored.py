"""Netlists with a size, and what refactoring makes of them: other names, rewritten gates, a fault put in.

The netlist is a control block without a clock of its own: bits that are kept in two latches each, open in turn while
`sample` and `commit` are high, and logic between them. Latches are pairs of NAND gates or AND-OR gates that hold.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from random import Random

from settled.models.environment import Environment
from settled.models.logic import Expr, and_, not_, or_, rename, var, xor
from settled.models.netlist import Gate, Netlist

INPUTS = ("reset", "sample", "commit")
ENVIRONMENT = Environment(
    assume=(not_(and_(var("sample"), var("commit"))),),
    start={"reset": 1, "sample": 0, "commit": 0},
)


class Block:
    """A netlist in the making."""

    def __init__(self, rng: Random) -> None:
        self.rng = rng
        self.gates: dict[str, Expr] = {"clear": not_(var("reset"))}

    def add(self, name: str, function: Expr) -> str:
        """A gate; its name."""
        self.gates[name] = function
        return name

    def latch(self, name: str, data: str, enable: str) -> str:
        """A latch that follows `data` while `enable` is high and is cleared while `clear` is low."""
        q, d, en, clear = (var(n) for n in (name, data, enable, "clear"))
        if self.rng.random() < 0.5:
            s, r, p = (self.add(f"{name}_{part}", e) for part, e in self._nand_pins(name, d, en))
            self.add(name, not_(and_(var(s), var(p))))
            return name
        away = var(self.add(f"{name}_hold", not_(en)))
        follow = var(self.add(f"{name}_follow", and_(d, en, clear)))
        keep = var(self.add(f"{name}_keep", and_(q, away, clear)))
        cover = var(self.add(f"{name}_cover", and_(d, q, clear)))
        return self.add(name, or_(follow, keep, cover))

    @staticmethod
    def _nand_pins(name: str, d: Expr, en: Expr) -> Iterator[tuple[str, Expr]]:
        clear = var("clear")
        yield "set", not_(and_(d, en, clear))
        yield "rst", not_(and_(not_(d), en))
        yield "bar", not_(and_(var(f"{name}_rst"), var(name), clear))

    def logic(self, count: int, sources: list[str], tag: str) -> list[str]:
        """Random gates that read the sources and one another; the names of all of them."""
        made: list[str] = []
        for i in range(count):
            near = [*sources, *made[-24:], *made[-8:]]
            pins = [var(n) for n in self.rng.sample(sorted(set(near)), self.rng.choice((2, 2, 3)))]
            function = self.rng.choice((and_, or_, and_, or_, xor))(*pins)
            made.append(self.add(f"{tag}{i}", not_(function) if self.rng.random() < 0.5 else function))
        return made


def control_block(gates: int, seed: int = 0, data: int = 6) -> Netlist:
    """A netlist of exactly so many gates, at least 60, with latches in about half of them."""
    rng = Random(f"block {gates} {seed}")
    block = Block(rng)
    bits = gates // 20
    inputs = [f"d{i}" for i in range(data)]
    kept = [f"q{i}" for i in range(bits)]
    latches = Block(rng)
    for i in range(bits):
        willing = or_(*map(var, rng.sample(kept, 2)))
        enable = "sample" if i % 4 else latches.add(f"open{i}", and_(var("sample"), willing))
        latches.latch(f"m{i}", f"next{i}", enable)
        latches.latch(kept[i], f"m{i}", "commit")
    room = gates - len(latches.gates) - bits
    made = block.logic(room, [*inputs, *kept], "g")
    for i in range(bits):
        block.add(f"next{i}", xor(var(made[-1 - i]), var(rng.choice(inputs))))
    every = {**block.gates, **latches.gates}
    outputs = tuple(made[-bits - 8 : -bits])
    return Netlist("block", (*INPUTS, *inputs), tuple(Gate(n, e) for n, e in every.items()), outputs)


# ---- refactoring -----------------------------------------------------------------------------------------------------


@dataclass
class Rewriting:
    """Gates of another netlist in the making, one for each of the original and those that rewriting adds."""

    rng: Random
    made: dict[str, Expr]

    def add(self, function: Expr) -> Expr:
        """One more gate."""
        name = f"n{len(self.made)}"
        self.made[name] = function
        return var(name)

    def again(self, e: Expr) -> Expr:
        """The function of a gate, perhaps spread over several: De Morgan, double inversion, other brackets."""
        how = self.rng.choice(("as it was", "as it was", "inverted twice", "de morgan", "brackets"))
        inverted, body = (True, e.args[0]) if e.op == "not" else (False, e)
        if how == "inverted twice":
            return not_(self.add(not_(e)))
        if how == "de morgan" and body.op in ("and", "or"):
            pins = [self.add(not_(a)) if self.rng.random() < 0.7 else not_(a) for a in body.args]
            dual = (or_ if body.op == "and" else and_)(*pins)
            return dual if inverted else not_(dual)
        if how == "brackets" and body.op in ("and", "or", "xor") and len(body.args) > 2:
            args = self.rng.sample(body.args, len(body.args))
            maker = {"and": and_, "or": or_, "xor": xor}[body.op]
            whole = maker(args[0], self.add(maker(*args[1:])))
            return not_(whole) if inverted else whole
        return e


def refactored(netlist: Netlist, seed: int = 0) -> Netlist:
    """The netlist with other names, its gates in another order, and many of them rewritten locally."""
    rng = Random(f"refactored {seed}")
    order = rng.sample(range(len(netlist.gates)), len(netlist.gates))
    names = {netlist.gates[i].name: var(f"u{k}.z") for k, i in enumerate(order)}
    work = Rewriting(rng, {})
    gates: list[Gate] = []
    for i in order:
        gate = netlist.gates[i]
        function = work.again(rename([gate.function], names)[0])
        gates.append(Gate(names[gate.name].name, function))
    gates += [Gate(n, e) for n, e in work.made.items()]
    defined = {z: names[z] for z in netlist.outputs if z in names}
    return replace(netlist, name="refactored", gates=tuple(gates), defined=defined)


def with_fault(netlist: Netlist, seed: int = 0) -> Netlist:
    """The netlist with one gate of two or more inputs replaced: AND by OR, anything else by AND."""
    rng = Random(f"fault {seed}")
    while True:
        at = rng.randrange(len(netlist.gates))
        gate = netlist.gates[at]
        body = gate.function.args[0] if gate.function.op == "not" else gate.function
        if len(body.args) < 2:
            continue
        swapped = (or_ if body.op == "and" else and_)(*body.args)
        fault = Gate(gate.name, swapped if body is gate.function else not_(swapped))
        return replace(netlist, name="faulty", gates=(*netlist.gates[:at], fault, *netlist.gates[at + 1 :]))
