"""`result.json`: the result document as a file; `--json` prints the same text."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from typing import Any

from settled.verify.result import FileReport


def to_text(document: Mapping[str, Any]) -> str:
    """The document as JSON in ASCII, with a final newline."""
    return json.dumps(document, indent=2) + "\n"


def files(_: Sequence[FileReport], document: Mapping[str, Any]) -> dict[str, str]:
    """The one file."""
    return {"result.json": to_text(document)}


FILES = files
