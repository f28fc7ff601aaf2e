"""Strongly connected components of a directed graph (Tarjan 1972, recalled), without recursion.

Our own because it stands on the way of every command, where importing a graph library would take longer than the
rest of a small check.
"""

from __future__ import annotations

from collections.abc import Hashable, Iterable, Mapping
from typing import TypeVar

V = TypeVar("V", bound=Hashable)


def components(successors: Mapping[V, Iterable[V]]) -> list[list[V]]:
    """The components, each after all components that it reaches. Successors that are no keys are ignored."""
    number: dict[V, int] = {}
    low: dict[V, int] = {}
    open_: list[V] = []
    pending: set[V] = set()
    found: list[list[V]] = []
    for root in successors:
        if root in number:
            continue
        path = [(root, iter(successors[root]))]
        while path:
            v, rest = path[-1]
            if v not in number:
                number[v] = low[v] = len(number)
                open_.append(v)
                pending.add(v)
            for w in rest:
                if w not in number and w in successors:
                    path.append((w, iter(successors[w])))
                    break
                if w in pending:
                    low[v] = min(low[v], number[w])
            else:
                path.pop()
                if path:
                    low[path[-1][0]] = min(low[path[-1][0]], low[v])
                if low[v] == number[v]:
                    part = [open_.pop()]
                    while part[-1] != v:
                        part.append(open_.pop())
                    pending.difference_update(part)
                    found.append(part[::-1])
    return found
