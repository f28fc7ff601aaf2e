"""How far an engine may go, and the exception with which it says that it went no further."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, field


class LimitReached(Exception):
    """A limit ended the work before a decision; the text says which limit, how far it came and how to raise it."""


@dataclass
class Limits:
    """Limits for one property: seconds of wall time and total states. `report` hears of progress."""

    seconds: float = 60.0
    states: int = 4_000_000
    report: Callable[[str], None] | None = None
    began: float = field(default_factory=time.monotonic)

    def spent(self) -> float:
        """Seconds since the limits were set up."""
        return time.monotonic() - self.began

    def tick(self, visited: int, changes: int) -> None:
        """Say how far the work has come. Raises `LimitReached` beyond a limit."""
        deep = f"{changes} input change{'' if changes == 1 else 's'} deep"
        if visited > self.states:
            self.refuse(f"limit of {self.states:,} total states reached, {deep}; raise it with --states N")
        if self.spent() > self.seconds:
            self.refuse(
                f"time limit of {self.seconds:g} s reached at {visited:,} total states; raise it with --seconds N"
            )
        if self.report is not None:
            self.report(f"{visited:,} total states, {deep}")

    def refuse(self, reason: str) -> None:
        """Raise `LimitReached` with a reason."""
        raise LimitReached(reason)
