"""Names for the files that stand beside the properties: `level_latch/race-free`, safe on every file system."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from pathlib import PurePath

from settled.verify.result import FileReport, Result

LONGEST = 60


def stems(reports: Sequence[FileReport]) -> Iterator[tuple[FileReport, Result, str]]:
    """Every result with the path, without suffix, of the files that belong to it; no two alike on any system."""
    folders = {"result.json", "report.html"}
    for report in reports:
        folder = _unlike(plain(PurePath(report.file).stem), folders)
        names: set[str] = set()
        for result in report.results:
            yield report, result, f"{folder}/{_unlike(plain(result.name), names)}"


def numbered(stem: str, count: int) -> list[str]:
    """The stems of `count` things that belong to one property."""
    return [stem] if count == 1 else [f"{stem}-{number}" for number in range(1, count + 1)]


def plain(name: str) -> str:
    """`name` in letters, digits, dots, underscores and hyphens."""
    return re.sub(r"[^A-Za-z0-9._-]+", "-", name)[:LONGEST].strip("-.") or "unnamed"


def _unlike(name: str, taken: set[str]) -> str:
    found, number = name, 2
    while found.lower() in taken:
        found, number = f"{name}_{number}", number + 1
    taken.add(found.lower())
    return found
