"""What `--out` writes for a proof convinces another SMT solver: cvc5 answers `unsat` to every script."""

from __future__ import annotations

from pathlib import Path

import cvc5
from families import pipeline, ripple_counter
from judging import session_of

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.specification import Property
from settled.verify.renderers.certificate import files
from settled.verify.result import Result
from settled.verify.session import Settings


def answers(path: Path) -> str:
    solver = cvc5.Solver()
    parser = cvc5.InputParser(solver)
    parser.setFileInput(cvc5.InputLanguage.SMT_LIB_2_6, str(path))
    said = ""
    while not (command := parser.nextCommand()).isNull():
        said += command.invoke(solver, parser.getSymbolManager())
    return said.strip()


def decided(circuit: Circuit, environment: Environment, *checks: str) -> tuple[dict[str, str], list[Result]]:
    """Decided by the engines apart alone: exhaustive search may visit one state."""
    properties = tuple(Property(c, c, {}) for c in checks)
    session = session_of(circuit, environment, properties, Settings(states=1))
    results = list(session.results())
    return files([session.report(results)], {}), results


def test_scripts_of_a_handshake_circuit(tmp_path: Path) -> None:
    found, results = decided(*pipeline(12, "any"), "speed-independent", "deadlock-free")
    assert {r.verdict for r in results} == {"proved"} and len(found) == 6
    check_all(tmp_path, found)


def test_scripts_of_a_circuit_in_fundamental_mode(tmp_path: Path) -> None:
    found, results = decided(*ripple_counter(1), "settles", "race-free", "hazard-free")
    assert {r.verdict for r in results} == {"proved"} and found
    check_all(tmp_path, found)


def check_all(folder: Path, found: dict[str, str]) -> None:
    for number, (name, text) in enumerate(found.items()):
        path = folder / f"{number}.smt2"
        path.write_text(text)
        assert answers(path) == "unsat", name
