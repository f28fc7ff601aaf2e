"""Families of circuits with a size: our engines one by one, and beside them what a user would otherwise script.

    .venv/bin/python tests/bench/families.py [SECONDS] [FAMILY ...]

Every contestant answers exactly the same question, in a process of its own that is killed after SECONDS (default 60);
once it fails at a size, larger ones are not tried. The command prints, for every size, seconds and peak megabytes,
and how many times longer the best peer took than the best engine; at the end the largest size that each solved.
Verdicts must be equal, or the command ends with an error. FAMILY: names to run, all of them by default. See README.md
beside this file.
"""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from multiprocessing import get_context
from multiprocessing.connection import Connection
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "support"))

from families import latch_chain, pipeline, ripple_counter
from handshakes import arbiter_tree, ring, two_clients
from logic_families import carry_chain, huffman, random_logic
from peers import PEERS, commands

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import and_, not_, var
from settled.verify.engines import able, attempt
from settled.verify.limits import Limits
from settled.verify.questions import Flickers, Question, Reaches, Task, Withdraws

Case = tuple[Circuit, Environment, Question]
Make = Callable[[int], Case]
Decide = Callable[[Case, float], str]


def semi_modular(case: tuple[Circuit, Environment]) -> Case:
    """Can an excitation be taken away?"""
    return (*case, Withdraws())


def hazard(case: tuple[Circuit, Environment]) -> Case:
    """Can the last output change twice in a response?"""
    return (*case, Flickers(case[0].outputs[-1:]))


def grants_exclude(clients: int) -> Case:
    """Can two clients have the grant at once?"""
    return (*arbiter_tree(clients, winners="one"), Reaches(two_clients(clients)))


def pattern(case: tuple[Circuit, Environment]) -> Case:
    """Can the first eight nodes have alternating values in a stable state?"""
    nodes = case[0].nodes[:8]
    wanted = and_(*(var(n) if i % 2 else not_(var(n)) for i, n in enumerate(nodes)))
    return (*case, Reaches(and_(wanted, case[0].is_stable)))


def one(case: tuple[Circuit, Environment]) -> tuple[Circuit, Environment]:
    """The case with one node switching at a time."""
    return replace(case[0], winners="one"), case[1]


FAMILIES: dict[str, tuple[Make, Sequence[int]]] = {
    "pipeline": (lambda n: semi_modular(pipeline(n)), (4, 8, 16, 32, 64, 128, 256, 512, 1000, 2000, 4000, 10000)),
    "ring": (lambda n: semi_modular(ring(n, 2, winners="one")), (4, 8, 16, 32, 64, 128, 256, 512, 1000)),
    "counter": (lambda n: semi_modular(one(ripple_counter(n))), (2, 3, 4, 6, 8, 10, 12, 14)),
    "counter-hazard": (lambda n: hazard(one(ripple_counter(n))), (2, 3, 4, 6, 8, 10, 12, 14)),
    "latches": (lambda n: hazard(one(latch_chain(n))), (2, 4, 6, 8, 12, 16, 24, 32, 64, 128)),
    "arbiter": (grants_exclude, (2, 4, 6, 8, 12, 16, 24, 32, 64)),
    "huffman": (lambda n: pattern(huffman(n, winners="one")), (8, 12, 16, 20, 24, 32, 48, 64)),
    "carry": (lambda n: hazard(carry_chain(n, winners="one")), (1, 2, 4, 8, 16, 32, 64, 128, 256)),
    "logic": (lambda n: hazard(random_logic(n, winners="one")), (10, 20, 50, 100, 200, 500, 1000, 2000)),
}


@dataclass(frozen=True)
class Measured:
    """One contestant at one size; without a verdict it was killed at the limit, or gave up."""

    verdict: str | None
    seconds: float
    megabytes: float

    def __str__(self) -> str:
        return f"{self.seconds:8.2f} {self.megabytes:5.0f}" if self.verdict else f"{'-':>8} {self.megabytes:5.0f}"


def contestants(question: Question) -> dict[str, Decide]:
    """By name, ways of deciding a case within so many seconds: our engines first."""
    found: dict[str, Decide] = {}
    for engine in able(question):
        found[engine.name] = lambda case, seconds, engine=engine: (
            attempt(engine, Task(case[0], case[1], Limits(seconds=seconds, states=1 << 40)), case[2]).verdict
        )
    for name, peer in PEERS.items():
        found[name] = lambda case, seconds, peer=peer: peer(commands(*case))
    return found


def child(decide: Decide, make: Make, size: int, most: float, line: Connection) -> None:
    """Measure one contestant, in its own process."""
    case = make(size)
    began = time.perf_counter()
    verdict = decide(case, most)
    seconds = time.perf_counter() - began
    line.send((verdict, seconds, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024))


def measure(decide: Decide, make: Make, size: int, most: float) -> Measured:
    """Seconds and megabytes of one contestant, killed when it is late."""
    here, there = get_context("fork").Pipe(duplex=False)
    process = get_context("fork").Process(target=child, args=(decide, make, size, most, there))
    process.start()
    there.close()
    try:
        verdict, seconds, megabytes = here.recv() if here.poll(most + 5) else (None, most, 0.0)
    except EOFError:
        verdict, seconds, megabytes = None, most, 0.0
    process.kill()
    process.join()
    decided = verdict if verdict in ("proved", "refuted") and seconds <= most else None
    return Measured(decided, seconds if decided else most, megabytes)


def race(name: str, most: float) -> None:
    """Print the lines of one family."""
    make, sizes = FAMILIES[name]
    ways = contestants(make(sizes[0])[2])
    solved = dict.fromkeys(ways, 0)
    print(f"\n{name:14} {'size':>5} {'nodes':>6} {'verdict':8} " + " ".join(f"{w[:14]:>14}" for w in ways) + "  ratio")
    running = list(ways)
    for size in sizes:
        found = {w: measure(ways[w], make, size, most) for w in running}
        running = [w for w in running if found[w].verdict]
        verdicts = {found[w].verdict for w in running}
        if len(verdicts) > 1:
            raise SystemExit(f"{name} of {size}: {[(w, found[w].verdict) for w in running]}")
        solved |= dict.fromkeys(running, size)
        shown = " ".join(str(found.get(w) or "").rjust(14) for w in ways)
        nodes = len(make(size)[0].nodes)
        print(f"{'':14} {size:5} {nodes:6} {''.join(map(str, verdicts)) or '-':8} {shown} {ratio(found)}", flush=True)
        if not running:
            break
    print(f"{'':14} largest size within {most:g} s: " + ", ".join(f"{w} {s or 'none'}" for w, s in solved.items()))


def ratio(found: dict[str, Measured]) -> str:
    """How many times longer the best peer took than the best engine; `>` when no peer came to an end."""
    ours = min((m.seconds for w, m in found.items() if w not in PEERS and m.verdict), default=None)
    theirs = min((m.seconds for w, m in found.items() if w in PEERS and m.verdict), default=None)
    if ours is None or theirs is None:
        return f"{'>' if ours else '-':>6}"
    return f"{theirs / ours:6.1f}"


def main() -> None:
    """Run the families that are named."""
    arguments = sys.argv[1:]
    most = float(arguments.pop(0)) if arguments and arguments[0].replace(".", "").isdigit() else 60.0
    for name in arguments or FAMILIES:
        race(name, most)


if __name__ == "__main__":
    main()
