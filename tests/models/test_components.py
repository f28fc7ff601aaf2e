"""Components against the definition: two vertices are in one component when each reaches the other."""

from __future__ import annotations

from random import Random

from settled.models.components import components


def reach(graph: dict[int, list[int]], start: int) -> set[int]:
    seen, todo = {start}, [start]
    while todo:
        for w in graph[todo.pop()]:
            if w not in seen:
                seen.add(w)
                todo.append(w)
    return seen


def test_random_graphs() -> None:
    rng = Random(1)
    for _ in range(500):
        size = rng.randint(0, 9)
        graph = {v: [rng.randrange(size) for _ in range(rng.choice((0, 1, 1, 2)))] for v in range(size)}
        reached = {v: reach(graph, v) for v in graph}
        found = components(graph)
        assert sorted(v for part in found for v in part) == sorted(graph)
        for i, part in enumerate(found):
            for v in part:
                assert set(part) == {w for w in graph if w in reached[v] and v in reached[w]}
                assert reached[v] <= {w for earlier in found[: i + 1] for w in earlier}


def test_a_long_path_needs_no_recursion() -> None:
    graph = {v: [v + 1] for v in range(50_000)} | {50_000: [0]}
    assert [len(part) for part in components(graph)] == [50_001]
