"""Runs a Verilog test bench in Icarus Verilog, an outside simulator of IEEE 1364 (a Debian package, not our own)."""

from __future__ import annotations

import shutil
import subprocess
from itertools import pairwise
from pathlib import Path

import pytest

from settled.verify.renderers.verilog_text import identifier
from settled.verify.result import FileReport, Result, circuits
from settled.verify.timing import Schedule, schedule

needs_simulator = pytest.mark.skipif(shutil.which("iverilog") is None, reason="needs the Debian package iverilog")


def run_bench(text: str, folder: Path) -> list[str]:
    """What the bench prints; it must compile without a warning and end by itself."""
    source, program = folder / "bench.v", folder / "bench.vvp"
    source.write_text(text)
    compiled = subprocess.run(
        ["iverilog", "-g2005", "-Wall", "-o", program, source], capture_output=True, text=True, check=False
    )
    assert compiled.returncode == 0 and not compiled.stderr, compiled.stderr
    ran = subprocess.run(["vvp", "-n", program], capture_output=True, text=True, timeout=30, check=False)
    assert ran.returncode == 0 and not ran.stderr, ran.stderr
    return ran.stdout.splitlines()


def schedules(report: FileReport, result: Result) -> list[Schedule]:
    """The schedule of each run of a refuted property."""
    known, least = circuits(report, result), result.facts.get("offending_step")
    last = len(result.traces) - 1
    return [
        schedule(made, known[made.circuit].nodes, least if i == last else None) for i, made in enumerate(result.traces)
    ]


def complaint(report: FileReport, result: Result, printed: list[str]) -> str | None:
    """What is wrong with the simulation of a bench: no FAIL, or other events than those of the runs."""
    if sum(line.startswith("FAIL at ") for line in printed) != 1:
        return f"not exactly one FAIL: {printed}"
    for number, (made, found) in enumerate(zip(result.traces, schedules(report, result), strict=True), 1):
        expected = set()
        signals = circuits(report, result)[made.circuit].signals
        for time, (a, b) in zip(found.times[1:], pairwise(found.positions), strict=True):
            before, after = made.steps[a].state, made.steps[b].state
            moved = [s for s in signals if before[s] != after[s]]
            expected |= {f"{time} run_{number} {identifier(s).strip()}{'+' if after[s] else '-'}" for s in moved}
        logged = [line for line in printed if line.split()[1] == f"run_{number}"]
        within = {line for line in logged if int(line.split()[0]) <= found.times[-1]}
        if within != expected or len(set(logged)) != len(logged):
            return f"run {number}: missing {expected - within}, not expected {within - expected}"
    return None
