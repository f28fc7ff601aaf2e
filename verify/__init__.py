"""A property becomes questions, an engine answers them, answers become verdicts with evidence.

The public door: `from settled.verify import check`.
"""

from __future__ import annotations

from typing import Any


def __getattr__(name: str) -> Any:
    if name == "check":
        from settled.verify.session import check

        return check
    raise AttributeError(f"module `settled.verify` has no attribute `{name}`")
