"""Large handshake circuits through the command line: seconds, peak megabytes and verdicts of a whole `settled check`.

    .venv/bin/python tests/bench/handshakes.py [SECONDS] [NAME ...]

SECONDS: the limit for one property (default 60). NAME: circuits to check, all of them by default. Each is written to a
property file first. Pipelines: no excitation is withdrawn, nothing stops, every request is acknowledged, and every
request reaches the far end. Arbiters and token rings: no two users at once, all pairs in one property.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable, Mapping
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "support"))

from handshakes import Case, arbiter_tree, open_pipeline, token_ring, two_clients, two_turns
from property_text import to_property_file

from settled.models.logic import and_, not_, var

Checks = list[tuple[str, Mapping[str, Any]]]


def pipeline(stages: int) -> tuple[Case, Checks]:
    """Four questions about a pipeline between a sender and a receiver."""
    asks = and_(var("rin"), not_(var("c1")))
    goals = [("leads-to", {"from": asks, "to": var(goal)}) for goal in ("c1", f"c{stages}")]
    return open_pipeline(stages), [("speed-independent", {}), ("deadlock-free", {}), *goals]


def arbiter(clients: int) -> tuple[Case, Checks]:
    """Mutual exclusion of every pair of clients."""
    return arbiter_tree(clients), [("never", {"expr": two_clients(clients)})]


def token(cells: int) -> tuple[Case, Checks]:
    """Mutual exclusion of every pair of users."""
    return token_ring(cells), [("never", {"expr": two_turns(cells)})]


CASES: dict[str, tuple[Callable[[int], tuple[Case, Checks]], int]] = {
    "pipeline-200": (pipeline, 200),
    "pipeline-600": (pipeline, 600),
    "pipeline-1000": (pipeline, 1000),
    "token-ring-16": (token, 16),
    "token-ring-32": (token, 32),
    "arbiter-8": (arbiter, 8),
    "arbiter-16": (arbiter, 16),
    "arbiter-32": (arbiter, 32),
    "arbiter-64": (arbiter, 64),
}


def measure(path: Path, seconds: str) -> tuple[float, float, str]:
    """Wall time, peak megabytes of the largest process, and the last line but one of what was printed."""
    command = [str(Path(sys.executable).parent / "settled"), "check", str(path), "--seconds", seconds]
    began = time.perf_counter()
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as child:
        assert child.stdout is not None
        said = child.stdout.read()
        _, _, used = os.wait4(child.pid, 0)
        child.returncode = 0
    verdicts = next((line for line in said.splitlines() if " proved, " in line), said.strip()[-80:])
    return time.perf_counter() - began, used.ru_maxrss / 1024, verdicts


def main() -> None:
    """Check the circuits that are named."""
    arguments = sys.argv[1:]
    seconds = arguments.pop(0) if arguments and arguments[0].replace(".", "").isdigit() else "60"
    with TemporaryDirectory() as folder:
        for name in arguments or CASES:
            make, size = CASES[name]
            (circuit, environment), checks = make(size)
            path = Path(folder) / f"{name}.toml"
            path.write_text(to_property_file(circuit, environment, checks))
            wall, megabytes, verdicts = measure(path, seconds)
            print(
                f"{name:16} {len(circuit.signals):5} signals {wall:8.1f} s {megabytes:6.0f} MB  {verdicts}", flush=True
            )


if __name__ == "__main__":
    main()
