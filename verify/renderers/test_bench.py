"""Test benches: self-contained Verilog (IEEE 1364-2001) in which an ordinary simulator shows a failure.

Every node of the circuit is an assignment of its excitation with concrete delays, `hold` keeps it in the start state
until it is let go, and the inputs change when the run says so. A node that reads several signals which switch at one
moment computes its excitation in a function, which a simulator evaluates as a whole.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

from settled.models.logic import support
from settled.verify.renderers.bench_checks import Check, TimedRun, check, shown, shows
from settled.verify.renderers.cause_text import faults
from settled.verify.renderers.file_names import pieces, stems
from settled.verify.renderers.verilog_text import comment, expression, fresh, identifier
from settled.verify.result import FileReport, Result, Trace, circuits
from settled.verify.timing import schedule

NEEDED = {
    "gate": "One delay for each node is enough.",
    "edge": "No single delay for each node makes this run possible (proved); one for each edge does.",
    "firing": "No delays for each node and edge make this run possible (proved); each firing has its own.",
}


def to_verilog(report: FileReport, result: Result) -> str | None:
    """The bench for a refuted property, or None where a simulation shows nothing."""
    known = circuits(report, result)
    if not shows(result):
        return None
    runs = []
    for i, trace in enumerate(result.traces, 1):
        circuit = known[trace.circuit]
        least = result.facts.get("offending_step") if trace is result.traces[-1] else None
        runs.append(TimedRun(f"run_{i}", circuit, trace, schedule(trace, circuit.nodes, least)))
    found = check(result, runs)
    start = 10 * (1 + max(max(run.schedule.delays.values(), default=0) for run in runs) // 10)
    modules = [line for i, run in enumerate(runs, 1) for line in [*_module(run, i, start), ""]]
    return "\n".join([*_head(report, result, runs), *modules, *_bench(runs, found, start), "`end_keywords", ""])


def _head(report: FileReport, result: Result, runs: Sequence[TimedRun]) -> list[str]:
    circuit = report.circuit
    name = result.name if result.name == result.check else f"{result.name} ({result.check})"
    lines = [
        comment(f"Test bench for the refuted property {name} of {report.file}"),
        *map(comment, [result.claim, *faults(result)]),
        comment(f"Circuit {circuit.name} under {circuit.delay} delays. Prints FAIL when it shows the failure."),
        comment("Time units mean nothing by themselves: the delays only put the events in their order."),
        comment("Events that stand together are meant to happen at the very same moment."),
    ]
    for run in runs:
        times, positions = run.schedule.times, run.schedule.positions
        events = [f"{t} {_events(run, a, b)}" for t, (a, b) in zip(times[1:], pairwise(positions), strict=True)]
        lines += ["//", comment(f"{run.instance}: {run.trace.title}. {NEEDED[run.schedule.kind]}")]
        lines += [f"//   {comment(event)[3:]}" for event in ["0 let go", *events]]
    return [*lines, '`begin_keywords "1364-2005"', "`timescale 1s / 100ms", ""]


def _changed(trace: Trace, before: int, after: int, signals: Sequence[str]) -> list[str]:
    one, two = trace.steps[before].state, trace.steps[after].state
    return [s for s in signals if one[s] != two[s]]


def _events(run: TimedRun, before: int, after: int) -> str:
    now = run.trace.steps[after].state
    return "/".join(f"{s}{'+' if now[s] else '-'}" for s in _changed(run.trace, before, after, run.circuit.signals))


@dataclass(frozen=True)
class _Own:
    """Names of our own in the module of a run, unlike those of its signals."""

    taken: frozenset[str]

    def __call__(self, name: str) -> str:
        return identifier(fresh(name, self.taken))


def _module(run: TimedRun, number: int, start: int) -> Iterator[str]:
    circuit = run.circuit
    own = _Own(frozenset([*circuit.signals, *circuit.defined]))
    hold = own("hold")
    yield f"module circuit_{number};"
    yield from _declare("reg", [hold, *map(identifier, circuit.inputs)])
    yield from _declare("wire", [*map(identifier, circuit.nodes)])
    yield ""
    for node in circuit.nodes:
        yield from _node(run, node, own)
    for name in [s for s in run.trace.steps[0].state if s in circuit.defined]:
        yield f"  wire {identifier(name)};"
        yield f"  assign {identifier(name)} = {expression(circuit.defined[name])};"
    yield from ["", *_stimulus(run, hold, start), ""]
    for name in circuit.signals:
        net = identifier(name)
        said = f'$display("%0d {run.instance} {shown(name)}%s", $time - {start}, {net} ? "+" : "-")'
        yield f"  always @({net}) if (!{hold}) {said};"
    yield "endmodule"


def _declare(sort: str, names: Sequence[str]) -> list[str]:
    return [f"  {sort} {', '.join(names[i : i + 8])};" for i in range(0, len(names), 8)]


def _node(run: TimedRun, node: str, own: _Own) -> Iterator[str]:
    """The assignment of a node, and what it needs."""
    function = run.circuit.excitation[node]
    rise, fall = (run.schedule.delay(node, rises) for rises in (True, False))
    delay = str(rise[0]) if rise == fall and len(rise) == 1 else f"({rise[0]}, {fall[0]})"
    if len(rise) > 1 or len(fall) > 1:
        names = own(f"{node}_rise"), own(f"{node}_fall")
        delay = f"({names[0]}, {names[1]})"
        yield f"  integer {names[0]}, {names[1]};"
        for name, delays, edge in zip(names, (rise, fall), ("posedge", "negedge"), strict=True):
            later = [f"@({edge} {identifier(node)}) {name} = {d};" for d in delays[1:]]
            wait = [f"@(negedge {own('hold')});"] if later else []
            yield f"  initial begin {' '.join([f'{name} = {delays[0]};', *wait, *later])} end"
    value = expression(function)
    if _reads_a_tie(run, node):
        name, reads = own(f"{node}_next"), ", ".join(map(identifier, support(function)))
        yield f"  function {name}; input {reads}; {name} = {value}; endfunction"
        value = f"{name}({reads})"
    started = run.trace.steps[0].state[node]
    yield f"  assign #{delay} {identifier(node)} = {own('hold')} ? 1'b{started} : {value};"


def _reads_a_tie(run: TimedRun, node: str) -> bool:
    reads = support(run.circuit.excitation[node])
    return any(len(_changed(run.trace, a, b, reads)) > 1 for a, b in pairwise(run.schedule.positions))


def _stimulus(run: TimedRun, hold: str, start: int) -> Iterator[str]:
    """The start state, then every change of the inputs at its time."""
    inputs = run.circuit.inputs
    begin = "".join(f" {identifier(x)} = {run.trace.steps[0].state[x]};" for x in inputs)
    yield "  initial begin"
    yield f"    {hold} = 1;{begin}"
    yield f"    #{start} {hold} = 0;"
    last = 0
    for time, (a, b) in zip(run.schedule.times[1:], pairwise(run.schedule.positions), strict=True):
        moved = _changed(run.trace, a, b, inputs)
        if moved:
            now = run.trace.steps[b].state
            yield f"    #{time - last}" + "".join(f" {identifier(x)} = {now[x]};" for x in moved)
            last = time
    yield "  end"


def _bench(runs: Sequence[TimedRun], found: Check, start: int) -> Iterator[str]:
    yield "module bench;"
    yield from (f"  circuit_{i} {run.instance} ();" for i, run in enumerate(runs, 1))
    yield "  integer now;"
    yield "  reg failed = 0;"
    yield from (f"  {line}" for line in found.declare)
    yield "  initial begin"
    yield f"    #({start} + 0.5);"
    yield f"    for (now = 0; now <= {found.end}; now = now + 1) begin"
    yield "      if (!failed) begin"
    yield from (f"        {line}" for line in found.sample)
    yield "      end"
    yield "      #1;"
    yield "    end"
    yield '    if (!failed) $display("not shown");'
    yield "    $finish;"
    yield "  end"
    yield "endmodule"


def files(reports: Sequence[FileReport], _: Mapping[str, Any]) -> dict[str, str]:
    """A bench for each property that has one, for every cause where all are listed."""
    made = {
        f"{own}.v": to_verilog(report, group)
        for report, result, stem in stems(reports)
        for own, _, group in pieces(result, stem)
    }
    return {path: text for path, text in made.items() if text is not None}


FILES = files
