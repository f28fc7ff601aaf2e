"""Nodes on every loop: of one circuit by itself, and pairs of corresponding nodes that cut two circuits together.

Short loops come first, since those are the latches, and on a loop the node that most others read.
"""

from __future__ import annotations

from collections import Counter, deque
from collections.abc import Mapping, Sequence
from functools import cache

from settled.models.circuit import Circuit, loops
from settled.models.logic import support
from settled.verify.matching.guesses import Guesses, Partner

Parts = dict[str, int]
Pairs = dict[str, Partner]


class Loops:
    """The loops of one circuit, and what is left of them when nodes are cut. `left`: by node the number of its part."""

    def __init__(self, circuit: Circuit) -> None:
        self.circuit = circuit
        self._reads = {n: [s for s in support(e) if s in circuit.excitation] for n, e in circuit.excitation.items()}
        self.readers = Counter(s for read in self._reads.values() for s in read)
        self.left = self._whole = self._parts(circuit.nodes)
        self.length = cache(self._length)

    def _length(self, node: str) -> int:
        most = len(self._whole)
        return len(_loop(self._reads, self._whole, node, most)) if node in self._whole else most + 1

    def _parts(self, nodes: Sequence[str]) -> Parts:
        found = loops(nodes, {n: self.circuit.excitation[n] for n in nodes})
        return {n: i for i, part in enumerate(found) for n in part}

    def cut(self, *nodes: str) -> None:
        """Take nodes out of all loops."""
        self.left = {n: i for n, i in self.left.items() if n not in nodes}

    def prune(self) -> None:
        """Forget nodes that are on no loop any more."""
        self.left = self._parts([*self.left])

    def loop(self, node: str, most: int) -> list[str]:
        """A shortest loop of what is left, through a node, of at most so many nodes; empty when there is none."""
        return _loop(self._reads, self.left, node, most) if node in self.left else []


def _loop(reads: Mapping[str, Sequence[str]], parts: Parts, node: str, most: int) -> list[str]:
    came: dict[str, str | None] = {node: None}
    queue = deque([(node, 1)])
    while queue:
        here, length = queue.popleft()
        for before in reads[here]:
            if before == node:
                return _path(came, here)
            if length < most and before not in came and parts.get(before) == parts[node]:
                came[before] = here
                queue.append((before, length + 1))
    return []


def _path(came: Mapping[str, str | None], last: str) -> list[str]:
    path, at = [last], came[last]
    while at is not None:
        path.append(at)
        at = came[at]
    return path


def own_cut(circuit: Circuit) -> list[str]:
    """Nodes on every loop of one circuit."""
    side, chosen, length = Loops(circuit), [], 1
    while side.left:
        for node in side.left:
            loop = side.loop(node, length)
            if loop:
                chosen.append(max(loop, key=lambda n: (side.readers[n], n)))
                side.cut(chosen[-1])
        side.prune()
        length += 1
    return chosen


class JointCut:
    """A choice of pairs that cuts both sides. `chosen`: pairs to begin with."""

    def __init__(self, original: Loops, other: Loops, guesses: Guesses, chosen: Pairs) -> None:
        self.original, self.other, self.guesses = original, other, guesses
        self.chosen: Pairs = {}
        self._taken: set[str] = set()
        self._of: dict[str, list[str]] = {}
        for n, partners in guesses.items():
            for p in partners:
                self._of.setdefault(p.node, []).append(n)
        self._choose(chosen)

    def run(self) -> Pairs | None:
        """The pairs, by node of the original; None where a loop has no node left to be paired."""
        length = 1
        while self.original.left or self.other.left:
            for side in (self.original, self.other):
                side.prune()
                for node in side.left:
                    loop = side.loop(node, length)
                    if loop and not self._cut(side, loop):
                        return None
            length += 1
        return self.chosen

    def _choose(self, pairs: Pairs) -> None:
        partners = {p.node for p in pairs.values()}
        self.chosen |= pairs
        self._taken |= partners
        self.original.cut(*pairs)
        self.other.cut(*partners)

    def _cut(self, side: Loops, loop: Sequence[str]) -> bool:
        pairs = [pair for n in loop for pair in self._pairs(side, n)]
        if pairs:
            self._choose(dict([min(pairs, key=self._strangeness)]))
        return bool(pairs)

    def _pairs(self, side: Loops, node: str) -> list[tuple[str, Partner]]:
        nodes = [node] if side is self.original else self._of.get(node, [])
        found = [(n, p) for n in nodes if n not in self.chosen for p in self.guesses.get(n, ())]
        return [(n, p) for n, p in found if p.node not in self._taken and (side is self.original or p.node == node)]

    def _strangeness(self, pair: tuple[str, Partner]) -> tuple[bool, bool, int, int, int, str, str]:
        """Little for pairs that are likely: both on loops, like-named, on short loops, and read by many."""
        n, p = pair
        on_loops = n in self.original.left and p.node in self.other.left
        lengths = self.original.length(n), self.other.length(p.node)
        readers = self.original.readers[n] + self.other.readers[p.node]
        return not on_loops, n != p.node, max(lengths), abs(lengths[0] - lengths[1]), -readers, n, p.node
