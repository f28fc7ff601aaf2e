"""`settles` and `race-free` by three-valued simulation of all responses at once, as formulas for SAT.

For circuits of any size whose changes are clean. It does not refute: a node that three-valued simulation leaves
unknown may show a race, an oscillation, or nothing but that the simulation forgets what branches from one signal.
"""

from __future__ import annotations

from settled.verify.engines import Engine
from settled.verify.known_responses import NAME, Established, proof
from settled.verify.questions import Answer, Diverges, Oscillates, Task, undecided


def all_known(task: Task, _: Oscillates | Diverges) -> Answer:
    """`proved` when no response leaves a node unknown in the end."""
    found = proof(task)
    if not isinstance(found, Established):
        return undecided(found, NAME)
    certificate = {"kind": "three-valued simulation of all responses", "formulas": found.formulas}
    return Answer("proved", NAME, exercised=found.exercised, certificate=certificate)


ENGINE = Engine(NAME, rank=7, answers={Oscillates: all_known, Diverges: all_known}, apart=True)
