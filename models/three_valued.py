"""Three-valued simulation: what is known of a circuit when some values are not (Eichelberger 1965, "Hazard detection
in combinational and sequential switching circuits", algorithms A and B; recalled).

Every operator of an expression is evaluated on its own, by the exact ternary extension of that operator: 1 or 0 when
all completions of its operands give it, else unknown. That is what a three-valued simulator does gate by gate; it
forgets that two operands may be the same unknown (the pessimism of reconvergence).

A value is two words (can be 0, can be 1), one bit for each of many cases that are simulated at once; unknown is both.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from heapq import heappop, heappush

from settled.models.circuit import Circuit
from settled.models.components import components
from settled.models.logic import Expr, support, topological

Value = tuple[int, int]
Values = dict[str, Value]
FREE: Value = (0, 0)


def known(value: int | bool, cases: int = 1) -> Value:
    """The value 0 or 1 in every case of the word `cases`."""
    return (0, cases) if value else (cases, 0)


def unknown(cases: int = 1) -> Value:
    """Unknown in every case of the word `cases`."""
    return cases, cases


def join(a: Value, b: Value) -> Value:
    """The least upper bound: unknown where the two differ."""
    return a[0] | b[0], a[1] | b[1]


class Ternary:
    """Expressions made ready for ternary evaluation; `stable` and `excited` must have been resolved."""

    def __init__(self, roots: Sequence[Expr]) -> None:
        order = list(topological(roots))
        place = {e: i for i, e in enumerate(order)}
        self._lines = [(e.op, e.name, [place[a] for a in e.args]) for e in order]
        self._roots = [place[r] for r in roots]

    def run(self, values: Mapping[str, Value], cases: int = 1) -> list[Value]:
        """The roots' values, one bit for each case."""
        done: list[Value] = []
        for op, name, args in self._lines:
            if op == "var":
                done.append(values[name])
            elif op == "const":
                done.append(known(name == "1", cases))
            else:
                done.append(_operator(op, [done[a] for a in args]))
        return [done[r] for r in self._roots]


def _operator(op: str, args: list[Value]) -> Value:
    if op == "not":
        return args[0][1], args[0][0]
    if op == "ite":
        (c0, c1), (t0, t1), (e0, e1) = args
        return c1 & t0 | c0 & e0, c1 & t1 | c0 & e1
    zero, one = args[0]
    for other_zero, other_one in args[1:]:
        if op == "and":
            zero, one = zero | other_zero, one & other_one
        elif op == "or":
            zero, one = zero & other_zero, one | other_one
        else:
            zero, one = zero & other_zero | one & other_one, zero & other_one | one & other_zero
    return zero, one


class Simulator:
    """Three-valued simulation of a circuit. A node is evaluated again whenever something that it reads has changed."""

    def __init__(self, circuit: Circuit) -> None:
        self.circuit = circuit
        reads = {n: support(circuit.excitation[n]) for n in circuit.nodes}
        self._order = [n for part in components(reads) for n in part]
        self._programs = [Ternary([circuit.excitation[n]]) for n in self._order]
        self._readers: dict[str, list[int]] = {n: [] for n in circuit.signals}
        for i, n in enumerate(self._order):
            for signal in reads[n]:
                self._readers[signal].append(i)

    def spread(self, values: Values, cases: int = 1) -> Values:
        """Algorithm A: everything that nodes may become while the inputs keep their values."""
        return self._follow(values, cases, join)

    def settle(self, values: Values, cases: int = 1, held: Mapping[str, Value] | None = None) -> Values:
        """Algorithm B, from a result of algorithm A: what nodes come to when every delay has passed.

        `held` gives, for a node, the cases in which it is held at 0 and at 1: there, only those ends are spoken of in
        which the node has that value.
        """
        fixed = held or {}
        begin = {s: _hold(v, fixed.get(s, FREE)) for s, v in values.items()}
        return self._follow(begin, cases, lambda _, target: target, fixed)

    def targets(self, values: Values, cases: int = 1) -> Values:
        """What each node's excitation comes to."""
        return {n: p.run(values, cases)[0] for n, p in zip(self._order, self._programs, strict=True)}

    def _follow(
        self,
        values: Values,
        cases: int,
        update: Callable[[Value, Value], Value],
        held: Mapping[str, Value] | None = None,
    ) -> Values:
        now = dict(values)
        queue = list(range(len(self._order)))
        waiting = set(queue)
        while queue:
            i = heappop(queue)
            waiting.discard(i)
            n = self._order[i]
            after = _hold(update(now[n], self._programs[i].run(now, cases)[0]), (held or {}).get(n, FREE))
            if after != now[n]:
                now[n] = after
                for reader in self._readers[n]:
                    if reader not in waiting:
                        waiting.add(reader)
                        heappush(queue, reader)
        return now


def _hold(value: Value, held: Value) -> Value:
    return value[0] & ~held[1] | held[0], value[1] & ~held[0] | held[1]


def power_up(circuit: Circuit, vectors: Sequence[Mapping[str, int]]) -> list[tuple[Values, Values]]:
    """From all nodes unknown, with each input vector applied in one instant and settling after each.

    The results of algorithms A and B for each vector.
    """
    simulator = Simulator(circuit)
    settled = {n: unknown() for n in circuit.nodes}
    found = []
    for vector in vectors:
        moved = simulator.spread(settled | {x: known(vector[x]) for x in circuit.inputs})
        settled = simulator.settle(moved)
        found.append((moved, settled))
    return found


def resolving(circuit: Circuit, moved: Values, settled: Values) -> dict[str, list[str]]:
    """For each node that is unknown in `settled`, the nodes whose two values both lead it to one and the same value.

    `moved`, `settled`: results of algorithms A and B. In every end that the circuit comes to, the node then has this
    value: it is unknown only because the simulation forgets that an unknown which branches is one signal.
    """
    simulator = Simulator(circuit)
    open_ = [n for n in circuit.nodes if settled[n] == unknown()]
    cases = (1 << 2 * len(open_)) - 1
    held = {n: (1 << 2 * i, 2 << 2 * i) for i, n in enumerate(open_)}
    wide = {s: (v[0] * cases, v[1] * cases) for s, v in moved.items()}
    ends = simulator.settle(wide, cases, held)
    targets = simulator.targets(ends, cases)
    return {n: [s for i, s in enumerate(open_) if _agree(ends[n], targets[s], i)] for n in open_}


def _agree(value: Value, target: Value, number: int) -> bool:
    """Whether a node has one value in the cases of node `number` held at 0 and held at 1, as far as it stays there."""
    zero, one = (bit >> 2 * number for bit in value)
    target_zero, target_one = (bit >> 2 * number for bit in target)
    lasting = [target_zero & 1, target_one >> 1 & 1]
    seen = [(zero >> i & 1, one >> i & 1) for i in (0, 1) if lasting[i]]
    return len(set(seen)) == 1 and seen[0] != unknown()


def shown(value: Value) -> str:
    """`0`, `1` or `x`, of one case."""
    return {(1, 0): "0", (0, 1): "1"}.get(value, "x")
