"""Power-up by three-valued simulation: where it knows every node after each vector, all runs end alike.

Sound for every fair run of either winner rule: whatever a node may become lies under the result of algorithm A, and
once the values under which a node's excitation is known have come, the node follows for good (Eichelberger 1965;
Brzozowski and Seger 1995; both recalled). A node that is unknown on the way may stand for an oscillation that a later
vector ends; the definition does not wait for it.
"""

from __future__ import annotations

from settled.models.states import pack
from settled.models.three_valued import power_up, shown, unknown
from settled.verify.engines import Engine
from settled.verify.power_up import end_facts, lasting_values, start_facts, ternary_facts, vectors_of
from settled.verify.questions import Answer, PowersUp, Task, undecided

NAME = "three-valued simulation"


def powers_up(task: Task, question: PowersUp) -> Answer:
    """`proved` when every node is known after each vector."""
    circuit = task.circuit
    ends = [settled for _, settled in power_up(circuit, vectors_of(circuit, question.vectors))]
    for number, settled in enumerate(ends, 1):
        open_ = [n for n in circuit.nodes if settled[n] == unknown()]
        if open_:
            return undecided(f"{len(open_)} nodes are unknown after {number} vectors, `{open_[0]}` among them", NAME)
    values = {s: shown(v) for s, v in ends[-1].items()}
    end = pack(circuit, {s: int(v) for s, v in values.items()})
    facts = {
        "end": end_facts(circuit, end),
        "ternary": ternary_facts(circuit, question.vectors, lasting_values(circuit, [end])),
        **start_facts(circuit, task.environment, [end]),
    }
    return Answer("proved", NAME, ranged={"input_vectors": len(question.vectors)}, facts=facts)


ENGINE = Engine(NAME, rank=5, answers={PowersUp: powers_up})
