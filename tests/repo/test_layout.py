"""The repository itself: what stands where, which way imports point, and that nothing is missing from the package."""

from __future__ import annotations

import ast
import re
import tomllib
from collections.abc import Iterator
from fnmatch import fnmatch
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
LAYERS = {"models": set(), "encodings": {"models"}, "verify": {"models", "encodings"}}
SOLVERS = {"z3", "pysat", "dd", "cvc5"}
SETTINGS = tomllib.loads((ROOT / "pyproject.toml").read_text())


def sources(*folders: str) -> Iterator[Path]:
    for folder in folders:
        yield from sorted((ROOT / folder).rglob("*.py"))


def imports(path: Path) -> Iterator[str]:
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            yield node.module or ""


def test_the_top_level_holds_exactly_what_it_should() -> None:
    tracked = {p.name for p in ROOT.iterdir() if not p.name.startswith(".") and not p.name.endswith(".egg-info")}
    assert tracked - {"build", "dist"} == {
        "pyproject.toml", "README.md", "DEVELOPERS.md", "LICENSE", "verify", "encodings", "tests", "models",
    }  # fmt: skip


@pytest.mark.parametrize("layer", LAYERS)
def test_imports_point_one_way(layer: str) -> None:
    for path in sources(layer):
        for name in imports(path):
            assert name.split(".")[0] not in LAYERS, f"{path}: imports `{name}` without `settled.`"
            if name.startswith("settled."):
                assert name.split(".")[1] in LAYERS[layer] | {layer}, f"{path}: imports `{name}`"


def test_tests_import_the_installed_package() -> None:
    for path in sources("tests"):
        assert not {n.split(".")[0] for n in imports(path)} & (set(LAYERS) - {"encodings"}), path


def test_no_solver_below_the_encodings() -> None:
    for path in sources("models"):
        assert not {n.split(".")[0] for n in imports(path)} & SOLVERS, path


def test_encodings_does_not_shadow_the_codecs() -> None:
    assert not (ROOT / "encodings" / "__init__.py").exists()


def test_every_package_is_listed() -> None:
    listed = set(SETTINGS["tool"]["setuptools"]["packages"])
    found = {"settled." + ".".join(p.parent.relative_to(ROOT).parts) for p in sources(*LAYERS)}
    assert listed == found


def test_every_data_file_is_shipped() -> None:
    patterns = SETTINGS["tool"]["setuptools"]["package-data"]
    for layer in LAYERS:
        for path in (ROOT / layer).rglob("*"):
            if path.is_file() and path.suffix not in (".py", ".pyc"):
                package = "settled." + ".".join(path.parent.relative_to(ROOT).parts)
                inside = any(fnmatch(path.name, pattern) for pattern in patterns.get(package, []))
                assert inside, f"{path} is in no wheel"


def test_every_layer_is_typed() -> None:
    assert all((ROOT / layer / "py.typed").exists() for layer in LAYERS)


def test_only_the_command_line_prints() -> None:
    for path in sources(*LAYERS):
        calls = [n for n in ast.walk(ast.parse(path.read_text())) if isinstance(n, ast.Call)]
        printing = any(isinstance(c.func, ast.Name) and c.func.id == "print" for c in calls)
        assert not printing or path.name in ("cli.py", "terminal.py"), f"{path} prints"


def test_nothing_is_evaluated() -> None:
    for path in sources(*LAYERS):
        for node in ast.walk(ast.parse(path.read_text())):
            if isinstance(node, ast.Call) and isinstance(node.func, ast.Name):
                assert node.func.id not in ("eval", "exec", "sympify", "parse_expr"), path


def test_files_keep_to_a_readable_size() -> None:
    for path in sources(*LAYERS):
        assert len(path.read_text().splitlines()) <= 400, f"{path} is longer than 400 lines"


def test_links_in_the_documents_lead_somewhere() -> None:
    for name in ("README.md", "DEVELOPERS.md", "tests/README.md"):
        text = (ROOT / name).read_text()
        headings = {re.sub(r"[^\w\- ]", "", h.lower()).replace(" ", "-") for h in re.findall(r"^#+ (.*)$", text, re.M)}
        for target in re.findall(r"\]\(([^)]+)\)", text):
            path, _, anchor = target.partition("#")
            assert not path or ((ROOT / name).parent / path).exists(), f"{name}: {target}"
            assert path or anchor in headings, f"{name}: {target}"
