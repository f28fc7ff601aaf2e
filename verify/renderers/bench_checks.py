"""What a test bench looks at: for each question, Verilog that prints FAIL when the simulation shows the failure.

Statements run half-way between two whole time units, where nothing switches, until one of them sets `failed`; `now`
is the number of whole units since the start state was let go.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

from settled.models.circuit import Circuit
from settled.models.logic import Expr, and_, to_text
from settled.verify.questions import (
    Deadlocks,
    Differs,
    Diverges,
    DivergesAfterThree,
    Evades,
    Flickers,
    Oscillates,
    PowersUp,
    Question,
    Reaches,
    StableCount,
    Withdraws,
)
from settled.verify.renderers.verilog_text import bits, expression, identifier
from settled.verify.result import Result, Trace
from settled.verify.timing import Schedule

PATIENCE = 10
"""How many rounds an oscillation is watched beyond those that were scheduled."""


@dataclass(frozen=True)
class TimedRun:
    """One run of a bench: its instance in the bench, its circuit, and when its steps happen."""

    instance: str
    circuit: Circuit
    trace: Trace
    schedule: Schedule

    def text(self, e: Expr) -> str:
        """An expression over the circuit's signals, as seen from the bench."""
        return expression(self.circuit.resolve(e)[0], self.instance)

    def together(self, signals: Sequence[str]) -> str:
        """Signals as one vector, as seen from the bench."""
        return "{" + ", ".join(identifier(s, self.instance) for s in signals) + "}"

    @property
    def round(self) -> int:
        """How long one round of the loop takes."""
        assert self.trace.loop is not None
        return self.schedule.times[-1] - self.schedule.times[-1 - (len(self.trace.steps) - self.trace.loop)]


@dataclass(frozen=True)
class Check:
    """`end`: up to when samples are taken; `declare`: variables; `sample`: statements, made at every sample."""

    end: int
    sample: list[str]
    declare: list[str] = field(default_factory=list)


def shows(result: Result) -> bool:
    """Whether a simulation can show the failure: there is one, it moves or parts, and its question is known."""
    if isinstance(result.question, StableCount):
        return any(trace.loop is not None for trace in result.traces)
    return type(result.question) in MAKERS and len(result.traces) > isinstance(result.question, Differs)


def check(result: Result, runs: Sequence[TimedRun]) -> Check:
    """The check that fits the question of a refuted property for which `shows` is true."""
    assert result.question is not None
    found = MAKERS[type(result.question)](result, result.question, runs)
    return replace(found, end=max(found.end, *(run.schedule.times[-1] for run in runs)))


def fail(what: str, *arguments: str) -> str:
    """The statement that reports the failure; the simulation goes on to its end, but looks no further."""
    more = "".join(f", {argument}" for argument in arguments)
    return f'begin $display("FAIL at %0d: {what}", now{more}); failed = 1; end'


def shown(name: str) -> str:
    """A name inside a format string."""
    return quoted(identifier(name).strip())


def quoted(text: str) -> str:
    """Any text inside a format string."""
    plain = text.encode("ascii", "backslashreplace").decode()
    return plain.replace("\\", "\\\\").replace('"', '\\"').replace("%", "%%")


def _ends(_: Result, __: Question, runs: Sequence[TimedRun]) -> Check:
    last, other = (run.trace.steps[-1].state for run in runs[:2])
    return _apart(runs, [n for n in runs[0].circuit.nodes if last[n] != other[n]])


def _apart(runs: Sequence[TimedRun], names: Sequence[str]) -> Check:
    """At the end of both runs the named signals differ."""
    end = max(run.schedule.times[-1] for run in runs)
    values = [[run.text(run.circuit.signal(n)) for n in names] for run in runs[:2]]
    what = [f"{run.instance} ends with {' '.join(f'{shown(n)}=%b' for n in names)}" for run in runs[:2]]
    one, two = ("{" + ", ".join(v) + "}" for v in values)
    said = fail(", ".join(what), *values[0], *values[1])
    return Check(end, [f"if (now == {end} && {one} !== {two})", f"  {said}"])


def _glitch(result: Result, _: Question, runs: Sequence[TimedRun]) -> Check:
    (run,) = runs
    name = result.facts["hazard"]["signal"]
    signal = run.text(run.circuit.signal(name))
    before, end = run.schedule.times[result.facts["before"]], run.schedule.times[-1]
    sample = [
        f"if (now == {before}) begin was = {signal}; changes = 0; end",
        f"if (now > {before} && ({signal}) !== was) begin was = {signal}; changes = changes + 1; end",
        "if (changes == 2)",
        f"  {fail(f'{shown(name)} changes a second time in one response')}",
    ]
    return Check(end, sample, ["reg was;", "integer changes = 0;"])


def _bad(result: Result, question: Question, runs: Sequence[TimedRun]) -> Check:
    assert isinstance(question, Reaches)
    (run,) = runs
    bad = and_(question.bad, run.circuit.is_stable) if question.only_stable else question.bad
    said = fail(quoted(f"{to_text(question.bad)} is true in a {'stable ' if question.only_stable else ''}total state"))
    return Check(run.schedule.times[-1], [f"if ({run.text(bad)})", f"  {said}"])


def _round(_: Result, __: Question, runs: Sequence[TimedRun]) -> Check:
    (run,) = runs
    longer = 0 if run.schedule.kind == "firing" else PATIENCE * run.round
    end, width = run.schedule.times[-1] + longer, f"[{len(run.circuit.nodes) - 1}:0]"
    sample = [
        "if (nodes !== was) moved = now;",
        "was = nodes;",
        f"if (now == {end} && now - moved < {run.round})",
        f"  {fail('it still goes round, with the inputs held')}",
    ]
    return Check(
        end,
        sample,
        [f"reg {width} was;", "integer moved = 0;", f"wire {width} nodes = {run.together(run.circuit.nodes)};"],
    )


def _withdrawal(result: Result, _: Question, runs: Sequence[TimedRun]) -> Check:
    (run,) = runs
    sample, declare = [], []
    for number, node in enumerate(result.facts["withdrawn"]):
        excited, value = run.text(run.circuit.is_excited[node]), identifier(node, run.instance)
        declare.append(f"reg due_{number} = 0, was_{number};")
        sample += [
            f"if (!failed && due_{number} && !({excited}) && {value} === was_{number})",
            f"  {fail(f'{shown(node)} was due to switch, and no longer is')}",
            f"due_{number} = {excited}; was_{number} = {value};",
        ]
    return Check(run.schedule.times[-1], sample, declare)


def _dead_end(_: Result, __: Question, runs: Sequence[TimedRun]) -> Check:
    (run,) = runs
    end = run.schedule.times[-1] + 1 + max(run.schedule.delays.values(), default=0)
    last = run.trace.steps[-1].state
    signals = run.circuit.signals
    wanted = bits([last[s] for s in signals])
    said = fail("a dead end: no node is excited, and no input may change")
    return Check(end, [f"if (now == {end} && {run.together(signals)} === {wanted})", f"  {said}"])


def _evasion(result: Result, question: Question, runs: Sequence[TimedRun]) -> Check:
    assert isinstance(question, Evades)
    (run,) = runs
    times, begun = run.schedule.times, result.facts["from_step"]
    since = begun if run.trace.loop is None else min(begun, run.trace.loop)
    sample = [
        f"if (now == {times[begun]}) begun = {run.text(question.source)};",
        f"if (now >= {times[since]} && ({run.text(question.target)})) met = 1;",
        f"if (now == {times[-1]} && begun && !met)",
        f"  {fail('what should follow has not come')}",
    ]
    return Check(times[-1], sample, ["reg begun = 0, met = 0;"])


def _power_up(result: Result, question: Question, runs: Sequence[TimedRun]) -> Check:
    return (_round if len(runs) == 1 else _ends)(result, question, runs)


def _difference(result: Result, question: Question, runs: Sequence[TimedRun]) -> Check:
    """Of two circuits: one goes round, one has a hazard of its own, or their outputs differ in the end."""
    going_round = [run for run in runs if run.trace.loop is not None]
    if going_round:
        return _round(result, question, going_round[:1])
    if "hazard" in result.facts:
        return _glitch(result, question, runs[1:])
    return _apart(runs, list(result.facts["difference"]))


MAKERS: dict[type[Question], Callable[[Result, Question, Sequence[TimedRun]], Check]] = {
    Diverges: _ends,
    DivergesAfterThree: _ends,
    Flickers: _glitch,
    Reaches: _bad,
    Oscillates: _round,
    StableCount: _round,
    Withdraws: _withdrawal,
    Deadlocks: _dead_end,
    Evades: _evasion,
    PowersUp: _power_up,
    Differs: _difference,
}
