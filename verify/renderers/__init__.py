"""Renderers: what people and programs get to see of a report. One file each.

A member that writes files of its own under `--out` states `FILES`, a function from the reports and the result
document to the text of each file by its path relative to the directory; it is found by listing this folder.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from importlib import import_module
from pathlib import Path
from pkgutil import iter_modules
from typing import Any

from settled.verify.result import FileReport

Files = Callable[[Sequence[FileReport], Mapping[str, Any]], Mapping[str, str]]


def writers() -> list[Files]:
    """The `FILES` functions of all members that have one."""
    members = [import_module(f"{__name__}.{m.name}") for m in iter_modules(__path__)]
    return [member.FILES for member in members if hasattr(member, "FILES")]


def write(directory: Path, reports: Sequence[FileReport], document: Mapping[str, Any]) -> None:
    """Write the files of every member under `directory`, which is made if need be. Raises `OSError`."""
    for files in writers():
        for name, text in files(reports, document).items():
            path = directory / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_text(text, encoding="utf-8")
