"""Exhaustive search against a plain breadth-first search over integers, on the same circuits in the same run.

    .venv/bin/python tests/bench/exhaustive.py [SECONDS]

Every family is made larger until one step takes longer than SECONDS (default 20). Counts must be equal.
"""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable
from multiprocessing import get_context
from multiprocessing.connection import Connection
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "support"))

from families import latch_chain, pipeline, ripple_counter

from settled.encodings.packed import Packed
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.states import Behaviour, Situation
from settled.verify.explicit.graph import Graph
from settled.verify.limits import Limits

FAMILIES: dict[str, tuple[Callable[[int], tuple[Circuit, Environment]], range]] = {
    "pipeline": (pipeline, range(4, 14)),
    "ripple counter": (ripple_counter, range(1, 9)),
    "latch chain": (latch_chain, range(1, 10)),
}


def ours(circuit: Circuit, environment: Environment) -> int:
    """Explore, and look for oscillations and races as a check of a property would."""
    graph = Graph(Packed(circuit, environment), Limits(seconds=600, states=20_000_000))
    assert not graph.cores or environment.mode == "input-output"
    assert environment.mode == "input-output" or (graph.outcome >= -2).all()
    return len(graph)


def plain(circuit: Circuit, environment: Environment) -> int:
    """Breadth-first over single states with the executable meaning: only the reachable states are counted."""
    behaviour = Behaviour(circuit, environment)
    seen = {Situation(int(s)) for s in Graph(Packed(circuit, environment), Limits()).search.layers[0, 0]}
    todo = list(seen)
    while todo:
        fresh = {after for at in todo for after in behaviour.moves(at)} - seen
        seen |= fresh
        todo = list(fresh)
    return len(seen)


def child(work: Callable[[Circuit, Environment], int], make: Callable, size: int, line: Connection) -> None:
    began = time.perf_counter()
    count = work(*make(size))
    line.send((count, time.perf_counter() - began, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024))


def measure(work: Callable[[Circuit, Environment], int], make: Callable, size: int) -> tuple[int, float, float]:
    """States, seconds, megabytes, in a process of its own."""
    here, there = get_context("fork").Pipe()
    process = get_context("fork").Process(target=child, args=(work, make, size, there))
    process.start()
    found = here.recv()
    process.join()
    return found


def main() -> None:
    """Print one line a size."""
    most = float(sys.argv[1]) if len(sys.argv) > 1 else 20.0
    print(f"{'family':15} {'size':>4} {'states':>10} {'s':>8} {'MB':>6} {'plain s':>8} {'ratio':>6}")
    for name, (make, sizes) in FAMILIES.items():
        slow = False
        for size in sizes:
            states, seconds, memory = measure(ours, make, size)
            other = None if slow else measure(plain, make, size)
            assert other is None or other[0] == states, (name, size, states, other)
            slow = slow or (other is not None and other[1] > most / 4)
            text = f"{other[1]:8.2f} {other[1] / seconds:6.1f}" if other else f"{'-':>8} {'-':>6}"
            print(f"{name:15} {size:4} {states:10,} {seconds:8.2f} {memory:6.0f} {text}", flush=True)
            if seconds > most:
                break


if __name__ == "__main__":
    main()
