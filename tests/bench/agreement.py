"""Every engine against every other on random circuits: one verdict, and each run walked again.

    .venv/bin/python tests/bench/agreement.py [CIRCUITS] [FIRST]

For each of CIRCUITS seeds (default 5000), from FIRST on, a random circuit and environment and one check, all checks in
turn; every fifth circuit has nodes that exclude one another in pairs. Every engine that answers the question decides
it by itself. The command prints how often each engine came to which verdict, and ends with an error at the first
disagreement. The reach engine guesses invariants for every other circuit.
"""

from __future__ import annotations

import sys
from collections import Counter
from dataclasses import replace
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "support"))

from random_circuits import Question, random_question

from settled.models.states import Behaviour
from settled.verify.engines import able, attempt
from settled.verify.limits import Limits
from settled.verify.properties import kinds
from settled.verify.questions import Task
from settled.verify.replay import replay
from settled.verify.symbolic import reach

CHECKS = (
    "settles",
    "race-free",
    "hazard-free",
    "never",
    "always",
    "speed-independent",
    "deadlock-free",
    "leads-to",
    "essential-hazard-free",
    "initialises",
    "stable-states",
)
STEP = 500


def some_question(seed: int, check: str) -> Question:
    """A random question; the nodes of every fifth circuit exclude one another in pairs."""
    question = random_question(f"agreement {seed}", check)
    if seed % 5:
        return question
    nodes = question.circuit.nodes
    pairs = tuple(zip(nodes[::2], nodes[1::2], strict=False))
    return question._replace(circuit=replace(question.circuit, exclusive=pairs))


def verdicts(seed: int, check: str) -> dict[str, str]:
    """What each engine decides; the runs of refutations have been walked."""
    case, kind = some_question(seed, check), kinds()[check]
    asked = kind.question(case.circuit, case.options)
    behaviour, found = Behaviour(case.circuit, case.environment), {}
    for engine in able(asked):
        answer = attempt(engine, Task(case.circuit, case.environment, Limits(seconds=120)), asked)
        if answer.verdict == "refuted":
            replay(kind, behaviour, asked, answer)
        found[engine.name] = answer.verdict
    return found


def main() -> None:
    """Compare, and print the counts."""
    circuits, first = (int(a) for a in (*sys.argv[1:], *("5000", "0")[len(sys.argv) - 1 :]))
    counts: Counter[tuple[str, str]] = Counter()
    for number in range(circuits):
        seed, check = first + number, CHECKS[number % len(CHECKS)]
        reach.LARGE = 0 if number // len(CHECKS) % 2 else 100
        found = verdicts(seed, check)
        if len(set(found.values()) - {"undecided"}) > 1:
            raise SystemExit(f"circuit {seed}, {check}: {found}")
        counts.update(found.items())
        if not (number + 1) % STEP:
            print(f"{number + 1:,} circuits", flush=True)
    for (engine, verdict), count in sorted(counts.items()):
        print(f"{engine:45} {verdict:10} {count:6,}")


if __name__ == "__main__":
    main()
