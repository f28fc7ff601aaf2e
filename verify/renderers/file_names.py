"""Names for the files that stand beside the properties: `level_latch/race-free`, safe on every file system."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from functools import partial
from pathlib import PurePath

from settled.verify.renderers.cause_text import groups
from settled.verify.result import FileReport, Result

LONGEST = 60


def stems(reports: Sequence[FileReport]) -> Iterator[tuple[FileReport, Result, str]]:
    """Every result with the path, without suffix, of the files that belong to it; no two alike on any system."""
    folders = {"result.json", "report.html"}
    for report in reports:
        folder = _unlike(plain(PurePath(report.file).stem), folders, lambda name: [name])
        names: set[str] = set()
        for result in report.results:
            name = _unlike(plain(result.name), names, partial(_all, result))
            yield report, result, f"{folder}/{name}"


def pieces(result: Result, stem: str) -> list[tuple[str, str, Result]]:
    """What is shown of a result: for itself, or for each cause, the stem of its files, a heading, the result."""
    found = list(groups(result))
    stems = [stem] if len(found) == 1 else [f"{stem}-cause-{number}" for number in range(1, len(found) + 1)]
    return [(own, heading, group) for own, (heading, group) in zip(stems, found, strict=True)]


def numbered(stem: str, count: int) -> list[str]:
    """The stems of `count` things that belong to one property."""
    return [stem] if count == 1 else [f"{stem}-{number}" for number in range(1, count + 1)]


def _all(result: Result, stem: str) -> list[str]:
    """Every stem that belongs to a result."""
    parts = pieces(result, stem)
    return [stem, *(name for own, _, group in parts for name in [own, *numbered(own, len(group.traces))])]


def plain(name: str) -> str:
    """`name` in letters, digits, dots, underscores and hyphens."""
    return re.sub(r"[^A-Za-z0-9._-]+", "-", name)[:LONGEST].strip("-.") or "unnamed"


def _unlike(name: str, taken: set[str], stems: Callable[[str], Sequence[str]]) -> str:
    """`name`, numbered until all stems made from it are new; they are taken from then on."""
    found, number = name, 2
    while any(stem.lower() in taken for stem in stems(found)):
        found, number = f"{name}_{number}", number + 1
    taken |= {stem.lower() for stem in stems(found)}
    return found
