"""How quickly circuits are proved equivalent or shown to differ: the whole way of a property, with two jobs.

Controllers of about 40 nodes whose states are recoded; control blocks of so many gates (default 500) against their
refactored selves, and against those with one gate replaced. The searches over pairs of stable states, by themselves
and under the same limit of time, are the peers: what they leave open has no number.

    python tests/bench/equivalence.py [GATES ...]
"""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable, Sequence
from functools import partial
from multiprocessing import get_context
from multiprocessing.connection import Connection
from pathlib import Path
from types import ModuleType

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "support"))

from judging import netlist_of, session_of
from recoded import controller, counter
from refactored import ENVIRONMENT, control_block, refactored, with_fault

from settled.encodings.delays import place
from settled.models.circuit import Circuit
from settled.models.specification import CircuitSource, Property
from settled.verify.engines import attempt, pair_search, scheduled_pairs
from settled.verify.limits import Limits
from settled.verify.questions import Differs, Task
from settled.verify.session import Settings

SECONDS = 60.0
FAULTS = (0, 1, 6, 7)
PEERS: Sequence[ModuleType] = (scheduled_pairs, pair_search)

Pair = tuple[Circuit, Circuit]
Found = tuple[str, str]
"""A verdict, and how many changes show a difference."""


def recoded(states: int, one: str, two: str) -> Pair:
    """One controller under two state codes."""
    codes = {
        "binary": [*range(states)],
        "gray": [i ^ i >> 1 for i in range(states)],
        "one bit a state": [0, *(1 << i for i in range(states - 1))],
    }
    return controller(codes[one], "original"), controller(codes[two], "recoded")


def against_itself(gates: int, fault: int | None = None) -> Pair:
    """A control block and what refactoring made of it, perhaps with a fault."""
    block = control_block(gates)
    other = refactored(block)
    return place(block, "gate"), place(other if fault is None else with_fault(other, fault), "gate")


def cases(sizes: Sequence[int]) -> dict[str, Callable[[], Pair]]:
    """What is measured, by name."""
    found: dict[str, Callable[[], Pair]] = {
        "6 states, binary and one bit a state": partial(recoded, 6, "binary", "one bit a state"),
        "8 states, binary and Gray code": partial(recoded, 8, "binary", "gray"),
        "8-bit counter, binary and Gray code": lambda: (counter(8, False, "original"), counter(8, True, "recoded")),
    }
    for size in sizes:
        found[f"{size} gates, refactored"] = partial(against_itself, size)
        found |= {f"{size} gates, fault {fault}": partial(against_itself, size, fault) for fault in FAULTS}
    return found


def ours(pair: Pair) -> Found:
    """What the whole program says."""
    original, other = pair
    to = CircuitSource(netlist_of(other), "gate")
    asked = (Property("p", "equivalent", {"to": to}),)
    (result,) = session_of(original, ENVIRONMENT, asked, Settings(seconds=SECONDS)).results()
    return result.verdict, str(result.facts.get("fewest_changes", ""))


def peer(engine: ModuleType, pair: Pair) -> Found:
    """What one search over pairs says."""
    original, other = pair
    task = Task(original, ENVIRONMENT, Limits(seconds=SECONDS))
    answer = attempt(engine.ENGINE, task, Differs(other, original.outputs))
    return answer.verdict, str(answer.facts.get("fewest_changes", ""))


def child(work: Callable[[Pair], Found], make: Callable[[], Pair], line: Connection) -> None:
    """Measure in this process and those that it starts."""
    pair = make()
    began, idle = time.perf_counter(), time.process_time()
    found = work(pair)
    seconds = time.perf_counter() - began
    below = resource.getrusage(resource.RUSAGE_CHILDREN)
    line.send((*found, seconds, time.process_time() - idle + below.ru_utime + below.ru_stime))


def measure(work: Callable[[Pair], Found], make: Callable[[], Pair]) -> tuple[str, str, float, float]:
    """Verdict, changes, seconds, and seconds of processor time, in a process of its own."""
    here, there = get_context("fork").Pipe()
    process = get_context("fork").Process(target=child, args=(work, make, there))
    process.start()
    found: tuple[str, str, float, float] = here.recv()
    process.join()
    return found


def main() -> None:
    """Print one line a case."""
    sizes = [int(size) for size in sys.argv[1:]] or [500]
    names = [engine.__name__.rsplit(".", 1)[1] for engine in PEERS]
    print(f"{'case':38} {'verdict':9} {'changes':>7} {'s':>6} {'cpu s':>6}  " + "  ".join(f"{n:>15}" for n in names))
    for name, make in cases(sizes).items():
        verdict, changes, seconds, busy = measure(ours, make)
        print(f"{name:38} {verdict:9} {changes:>7} {seconds:6.1f} {busy:6.1f}", end="  ", flush=True)
        for engine in PEERS:
            other = measure(partial(peer, engine), make)
            decided = other[0] != "undecided"
            assert not decided or verdict in (other[0], "undecided"), (name, other)
            print(f"{other[2]:15.1f}" if decided else f"{'-':>15}", end="  ", flush=True)
        print()


if __name__ == "__main__":
    main()
