"""How quickly the command line answers: whole processes, best of five, with peak memory and beside bare Python.

.venv/bin/python tests/bench/command_line.py
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path

SETTLED = str(Path(sys.executable).with_name("settled"))
COMMANDS = {
    "python -c pass": [sys.executable, "-c", "pass"],
    "python -c 'import numpy, z3'": [sys.executable, "-c", "import numpy, z3"],
    "settled --help": [SETTLED, "--help"],
    "settled check wake_latch": [SETTLED, "check", "wake_latch"],
    "settled check sample_flip_flop (six NAND, all properties)": [SETTLED, "check", "sample_flip_flop"],
    "settled check sample_flip_flop_wires": [SETTLED, "check", "sample_flip_flop_wires"],
}


def measure(command: list[str]) -> tuple[float, float]:
    """Seconds and megabytes of one run."""
    began = time.perf_counter()
    process = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    _, _, used = os.wait4(process.pid, 0)
    return time.perf_counter() - began, used.ru_maxrss / 1024


def main() -> None:
    """Print one line a command."""
    print(f"{'seconds':>8} {'MB':>6} {'x python':>9}  command")
    base = None
    for name, command in COMMANDS.items():
        runs = [measure(command) for _ in range(5)]
        seconds, memory = min(r[0] for r in runs), max(r[1] for r in runs)
        base = base or seconds
        print(f"{seconds:8.3f} {memory:6.0f} {seconds / base:9.1f}  {name}")


if __name__ == "__main__":
    main()
