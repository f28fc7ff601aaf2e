"""A circuit against its flow table by exhaustive search over pairs of stable total states."""

from __future__ import annotations

from dataclasses import replace

from settled.encodings.packed import Packed, TooWide
from settled.models.environment import Guard
from settled.models.logic import support
from settled.verify.engines import Engine
from settled.verify.engines.pair_search import certificate_of, ranged
from settled.verify.explicit.pairs import PairSearch, Row, rows
from settled.verify.explicit.refutations import Refutation
from settled.verify.explicit.replies import Replies
from settled.verify.explicit.starts import starts
from settled.verify.explicit.table_replies import TableReplies
from settled.verify.limits import LimitReached
from settled.verify.pairing import environments_with_table, table_needs_partners
from settled.verify.questions import Answer, Departs, Task, undecided

NAME = "exhaustive search over pairs of a row and a stable state"


def departs(task: Task, question: Departs) -> Answer:
    """Look for a start state without a good partner.

    Guards that read what the table does not have are left out: what is proved of more changes holds for fewer.
    """
    rules, _ = environments_with_table(task.environment, question)
    strange = {x: missing for x, guard in rules.guards.items() if (missing := unreadable(guard, question))}
    rules = replace(rules, guards={x: guard for x, guard in rules.guards.items() if x not in strange})
    table = TableReplies(question.table, rules, question.outputs, task.limits)
    try:
        search = PairSearch(table, Replies(task.circuit, question.outputs, task.limits), task.limits)
        begin = start_rows(task, question, table)
    except TooWide as wide:
        raise LimitReached(str(wide)) from None
    found = search.run(begin)
    if found is not None and strange:
        (x, missing), *_ = strange.items()
        return undecided(f"the guard of {x} reads `{missing[0]}`, which the flow table does not have", NAME)
    if found is not None:
        runs, facts = Refutation(search, ("the flow table", "the circuit")).of(found)
        return Answer("refuted", NAME, runs=runs, ranged=ranged(search), facts=facts)
    exercised = any(search.lawful.get(a) for row in begin for a, _ in row.pairs)
    certificate = certificate_of(table.circuit, task.circuit, search.good())
    return Answer("proved", NAME, ranged=ranged(search), exercised=exercised, certificate=certificate)


def unreadable(guard: Guard, question: Departs) -> list[str]:
    """What a guard reads and the flow table does not have."""
    circuit = question.table.circuit
    return [s for s in support(guard.rises, guard.falls) if s not in circuit.place and s not in circuit.defined]


def start_rows(task: Task, question: Departs, table: TableReplies) -> list[Row]:
    """The start states that need a partner, each with its pairs."""
    _, rules = environments_with_table(task.environment, question)
    rights: list[int] = starts(Packed(task.circuit, rules), task.limits).tolist()
    needs = table_needs_partners(task.environment, question), True
    return rows(table.starts(), rights, task.circuit.input_mask, needs, task.limits)


ENGINE = Engine(NAME, rank=10, answers={Departs: departs})
