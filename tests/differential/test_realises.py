"""Circuits against flow tables: verdicts and the fewest changes to a difference equal the naive oracle's."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from random import Random

import oracle_tables
from judging import session_of
from random_circuits import condition, random_case

from settled.models.circuit import Circuit
from settled.models.environment import Environment, Guard
from settled.models.flow_table import Entry, FlowTable
from settled.models.problems import InputError
from settled.models.readers.flow_table import parse
from settled.models.source import span_at
from settled.models.specification import Property
from settled.verify.flow_table import flow_table
from settled.verify.limits import Limits
from settled.verify.renderers.flow_table_text import render
from settled.verify.result import Result

CASES = 700


def result_on(circuit: Circuit, environment: Environment, table: FlowTable) -> Result:
    (result,) = session_of(circuit, environment, (Property("p", "realises", {"table": table}),)).results()
    return result


def derived(seed: int) -> tuple[Circuit, Environment, FlowTable] | None:
    """A random circuit whose responses have one end each, with its flow table."""
    circuit, environment = random_case(f"table {seed}", nodes=4, mode="fundamental")
    rules = replace(environment, guards={}, changes="single" if environment.changes == "burst" else environment.changes)
    try:
        return circuit, rules, flow_table(circuit, rules, Limits())
    except InputError:
        return None


def changed(rng: Random, table: FlowTable) -> FlowTable:
    """Some entries elsewhere, unspecified, or with outputs that are not given; stable entries stay stable."""
    entries = dict(table.entries)
    for at in rng.sample(sorted(entries), rng.choice((0, 0, 1, 2))):
        outputs = tuple(rng.choice((None, 0, 1, bit)) for bit in entries[at].outputs)
        if not table.is_stable(*at) and rng.random() < 0.7:
            stable = [r for r in table.rows if table.is_stable(r, at[1])]
            entries[at] = Entry(rng.choice([None, *stable]), outputs)
        else:
            entries[at] = Entry(entries[at].after, outputs)
    return replace(table, entries=entries)


def rules_for(rng: Random, circuit: Circuit, table: FlowTable, environment: Environment) -> Environment:
    """Any way of changing inputs, and guards that the table can read."""
    names = [*table.inputs, *table.outputs]
    guarded = {x: Guard(condition(rng, names), condition(rng, names)) for x in circuit.inputs if rng.random() < 0.2}
    return replace(environment, changes=rng.choice(("single", "single", "simultaneous", "burst")), guards=guarded)


def test_every_verdict_is_the_oracles() -> None:
    verdicts: Counter[str] = Counter()
    for seed in range(CASES):
        case = derived(seed)
        if case is None:
            continue
        rng = Random(f"realises {seed}")
        circuit, environment, table = case
        table, rules = changed(rng, table), rules_for(rng, circuit, table, environment)
        expected = oracle_tables.realises(table, circuit, rules)
        result = result_on(circuit, rules, table)
        assert (result.verdict, result.vacuous) == (expected.verdict, expected.vacuous), seed
        if result.verdict == "refuted":
            assert result.facts["fewest_changes"] == expected.facts["fewest_changes"], seed
        verdicts[result.verdict + (" in vain" if result.vacuous else "")] += 1
    assert min(verdicts["proved"], verdicts["refuted"]) > 60, verdicts


def test_a_table_that_is_printed_reads_back_and_is_realised(share: Callable[[int], int]) -> None:
    exercised = 0
    for seed in range(share(CASES)):
        case = derived(seed)
        if case is None:
            continue
        circuit, environment, table = case
        text = render(table)
        again = parse(text, table.name, lambda start, end, text=text: span_at("t.csv", text, start, end))
        assert (again.inputs, again.outputs, again.rows) == (table.inputs, table.outputs, table.rows)
        assert again.entries == table.entries
        result = result_on(circuit, environment, again)
        assert result.verdict == "proved", (seed, result.claim)
        exercised += not result.vacuous
    assert exercised > share(100)
