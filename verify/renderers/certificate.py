"""Certificates: the scripts (SMT-LIB 2.6) to which any SMT solver must answer `unsat`, in a folder for each proof."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from settled.verify.renderers.file_names import stems
from settled.verify.result import FileReport


def files(reports: Sequence[FileReport], _: Mapping[str, Any]) -> dict[str, str]:
    """One file for each statement of each proof that has scripts."""
    return {
        f"{stem}-proof/{name}.smt2": text for _, result, stem in stems(reports) for name, text in result.scripts.items()
    }


FILES = files
