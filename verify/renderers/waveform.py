"""Waveforms: a value change dump (IEEE 1364) of each run, for the viewer that people already have.

Untimed runs take one second a step, which nobody takes for a delay. A loop is gone round twice and closed. In the
dumps of a comparison each input change has the same time.
"""

from __future__ import annotations

import io
from collections.abc import Mapping, Sequence
from typing import Any

from settled.verify.renderers.cause_text import faults
from settled.verify.renderers.file_names import numbered, pieces, stems
from settled.verify.renderers.verilog_text import fresh, unbroken
from settled.verify.result import FileReport, Result, Trace
from settled.verify.timing import unroll

ROUNDS = 2


def to_vcd(trace: Trace, result: Result) -> str:
    """The run as a dump: a variable a signal, and beside them the number of the step and whether it is stable."""
    from vcd import VCDWriter

    out = io.StringIO()
    said = ". ".join([f"{result.name}: {trace.title}", *faults(result), _clock(trace)])
    note = " ".join(said.replace("$end", "$ end").split())
    writer = VCDWriter(out, timescale="1 s", date="none", comment=_ascii(note), version="settled")
    scope = unbroken(trace.circuit or "circuit")
    step = trace.steps[0]
    signals = {s: writer.register_var(scope, unbroken(s), "wire", 1, init=v) for s, v in step.state.items()}
    about = fresh("run", [scope])
    number = writer.register_var(about, "step", "integer", 32, init=0)
    stable = writer.register_var(about, "stable", "wire", 1, init=int(step.stable))
    places = unroll(trace, ROUNDS)
    times = moments(trace, result, len(places))
    for time, place in zip(times, places, strict=True):
        step = trace.steps[place]
        for name, value in step.state.items():
            writer.change(signals[name], time, value)
        writer.change(number, time, place)
        writer.change(stable, time, int(step.stable))
    writer.close(times[-1] + 1)
    return out.getvalue()


def moments(trace: Trace, result: Result, count: int) -> list[int]:
    """The second of each step; the runs of a comparison wait for each other before each input change."""
    stops: Sequence[Sequence[int]] = result.facts.get("in_step", ())
    side = [id(t) for t in result.traces].index(id(trace)) if stops else 0
    times, wait, before = [], 0, [0, 0]
    for i in range(count):
        for stop in (s for s in stops if s[side] == i - 1):
            wait += max(a - b for a, b in zip(stop, before, strict=True)) - (stop[side] - before[side])
            before = list(stop)
        times.append(i + wait)
    return times


def _clock(trace: Trace) -> str:
    loop = f" The loop from step {trace.loop} on is shown twice." if trace.loop is not None else ""
    return f"Untimed: one second is one step, only the order counts.{loop}"


def _ascii(text: str) -> str:
    return text.encode("ascii", "backslashreplace").decode()


def files(reports: Sequence[FileReport], _: Mapping[str, Any]) -> dict[str, str]:
    """A dump for each run of each property, of every cause where all are listed."""
    return {
        f"{name}.vcd": to_vcd(trace, group)
        for _, result, stem in stems(reports)
        for own, _, group in pieces(result, stem)
        for name, trace in zip(numbered(own, len(group.traces)), group.traces, strict=True)
    }


FILES = files
