"""How many refutations an ordinary simulator shows, and with how few delays.

Over the gallery and random circuits of gates: each refuted race, hazard and invariant becomes a Verilog test bench, is
compiled and run, and its events are compared with those of the run. `one a gate`: one delay for each node makes the
run; of the others z3 has proved that no such delays exist.

    python tests/bench/simulated.py [CIRCUITS]
"""

from __future__ import annotations

import sys
from collections import Counter
from collections.abc import Iterator
from pathlib import Path
from tempfile import TemporaryDirectory

sys.path.insert(0, str(Path(__file__).parents[1] / "support"))

from judging import session_of
from random_circuits import forward, mixed, pieces, random_question
from simulator import complaint, run_bench, schedules

from settled.models.specification import Property
from settled.verify import check
from settled.verify.inputs import gallery
from settled.verify.renderers.test_bench import to_verilog
from settled.verify.result import FileReport
from settled.verify.session import Settings

CHECKS = ("race-free", "hazard-free", "never")
GATES = (forward, pieces, pieces, mixed)
KINDS = ("one a gate", "one an edge", "one a firing")


def reports(circuits: int) -> Iterator[tuple[str, FileReport]]:
    """What is to be shown, by where it comes from."""
    for name in sorted(name for name in gallery() if name.endswith(".toml")):
        yield "gallery", check(gallery()[name])
    for seed in range(circuits):
        for name in CHECKS:
            asked = random_question(f"circuit {seed}", name, styles=GATES)
            session = session_of(*asked[:2], (Property(name, name, asked.options),), Settings(seconds=20))
            yield "random", session.report(list(session.results()))


def main(circuits: int) -> None:
    """Print a line for each check and origin."""
    table: dict[tuple[str, str], Counter[str]] = {}
    with TemporaryDirectory() as folder:
        for origin, report in reports(circuits):
            for result in report.results:
                if result.verdict != "refuted" or result.check not in CHECKS:
                    continue
                text, row = to_verilog(report, result), table.setdefault((origin, result.check), Counter())
                row["refuted"] += 1
                row["shown"] += text is not None and complaint(report, result, run_bench(text, Path(folder))) is None
                needed = max(("gate", "edge", "firing").index(run.kind) for run in schedules(report, result))
                row[KINDS[needed]] += 1
    columns = ("refuted", "shown", *KINDS)
    print(f"{'origin':10}{'check':14}" + "".join(f"{name:>14}" for name in columns))
    for (origin, name), row in sorted(table.items()):
        print(f"{origin:10}{name:14}" + "".join(f"{row[column]:14}" for column in columns))


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 300)
