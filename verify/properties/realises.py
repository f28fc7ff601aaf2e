"""`realises`: the circuit does what a flow table says, as far as the table says anything."""

from __future__ import annotations

from typing import Any

from settled.models.circuit import Circuit
from settled.models.flow_table import FlowTable
from settled.models.problems import InputError, Problem, nearest
from settled.models.specification import Shape
from settled.models.states import Behaviour, Run, walk
from settled.verify.comparisons import Side, circuit_side, common_history, judge
from settled.verify.explicit.table_replies import TableReplies
from settled.verify.limits import Limits
from settled.verify.pairing import environments_with_table, table_needs_partners
from settled.verify.properties import Kind, Options
from settled.verify.questions import Answer, Departs


def _question(circuit: Circuit, options: Options) -> Departs:
    """Raises `InputError` when the table does not fit the circuit."""
    table: FlowTable = options["table"]
    outputs = tuple(options.get("outputs", table.outputs))
    signals = [*circuit.inputs, *circuit.nodes, *circuit.defined]
    notes = [_missing("the flow table has", "input", x, table.inputs) for x in circuit.inputs if x not in table.inputs]
    notes += [
        _missing(f"`{circuit.name}` has", "input", x, circuit.inputs) for x in table.inputs if x not in circuit.inputs
    ]
    notes += [_missing("the flow table has", "output", z, table.outputs) for z in outputs if z not in table.outputs]
    notes += [_missing(f"`{circuit.name}` has", "signal", z, signals) for z in outputs if z not in signals]
    if notes:
        message = f"the flow table and `{circuit.name}` cannot be compared: their ports differ"
        raise InputError(Problem("ports-differ", message, notes=tuple(notes)))
    return Departs(table.reordered(circuit.inputs, _name(circuit, table)), outputs)


def _missing(who: str, what: str, name: str, known: Any) -> str:
    near = nearest(name, known)
    return f"{who} no {what} `{name}`{f'; {near}' if near else ''}"


def _name(circuit: Circuit, table: FlowTable) -> str:
    return table.name if table.name != circuit.name else f"{table.name} (flow table)"


def _claim(circuit: Circuit, options: Options) -> str:
    name = _name(circuit, options["table"])
    table = name if name == "flow table" else f"flow table {name}"
    return f"Through every change that the {table} specifies {circuit.name} settles and shows the outputs it gives."


def _sides(behaviour: Behaviour, question: Departs) -> tuple[TableReplies, Behaviour]:
    rules, own = environments_with_table(behaviour.environment, question)
    table = TableReplies(question.table, rules, question.outputs, Limits())
    return table, Behaviour(behaviour.circuit, own)


def _walk(behaviour: Behaviour, question: Departs, run: Run) -> None:
    table, circuit = _sides(behaviour, question)
    if run.circuit == circuit.circuit.name:
        walk(circuit, run)
        return
    row, vector = question.table.place(run.states[0])
    if not table.may_start(row, vector) or not question.table.is_stable(row, vector):
        raise ValueError("the run of the flow table does not begin in a start state")
    walk(table.behaviour, run, anywhere=True)
    for state in run.states:
        question.table.place(state)


def _offends(behaviour: Behaviour, question: Departs, answer: Answer) -> tuple[str, dict[str, Any]]:
    table, circuit = _sides(behaviour, question)
    needs = table_needs_partners(behaviour.environment, question)
    sides = _table_side(table, needs), circuit_side(circuit, question.outputs)
    if len(answer.runs) == 2:
        _check_applied(table, sides, (answer.runs[0], answer.runs[1]), answer)
    return judge(sides, answer, question.outputs)


def _check_applied(table: TableReplies, sides: tuple[Side, Side], runs: tuple[Run, Run], answer: Answer) -> None:
    """Each change of the runs meets specified entries only."""
    changes = common_history(sides, runs, answer.facts["fewest_changes"])
    before = [runs[0].states[place[0]] for place in answer.facts["in_step"]]
    for state, change in zip(before, changes, strict=True):
        if not table.applies(state, change):
            raise ValueError("a change leads into an entry that is not specified")


def _table_side(table: TableReplies, needs_partners: bool) -> Side:
    def starts_under(vector: int) -> bool:
        return any(state & table.circuit.input_mask == vector for state in table.starts())

    def describe(state: int) -> str:
        row, vector = table.table.place(state)
        return " ".join([*(f"{x}={vector >> i & 1}" for i, x in enumerate(table.table.inputs)), f"row {row}"])

    return Side(table.behaviour, table.bits, starts_under, needs_partners, describe)


KIND = Kind(
    "realises",
    Shape(required={"table"}, optional={"outputs"}, mode="fundamental"),
    _question,
    _claim,
    _offends,
    walk=_walk,
    vacuous="no pair of start states has an allowed input change",
)
