"""How far an engine may go, and the exception with which it says that it went no further."""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass, field

UNIT = 1 << 20 if sys.platform == "darwin" else 1 << 10
"""What the peak memory of a process is counted in, per megabyte."""


class LimitReached(Exception):
    """A limit ended the work before a decision; the text says which limit, how far it came and how to raise it."""


@dataclass
class Limits:
    """Limits for one property: seconds of wall time, total states, megabytes of memory of a process.

    `report` hears of progress; `listen` is called at every tick and may raise to end the work.
    """

    seconds: float = 60.0
    states: int = 4_000_000
    megabytes: int = 8_000
    report: Callable[[str], None] | None = None
    listen: Callable[[], None] | None = None
    began: float = field(default_factory=time.monotonic)

    def spent(self) -> float:
        """Seconds since the limits were set up."""
        return time.monotonic() - self.began

    def left(self) -> float:
        """Seconds until the time limit."""
        return max(0.0, self.seconds - self.spent())

    def tick(self, visited: int, changes: int) -> None:
        """Say how far an exploration has come. Raises `LimitReached` beyond a limit."""
        deep = f"{changes} input change{'' if changes == 1 else 's'} deep"
        if visited > self.states:
            self.refuse(f"limit of {self.states:,} total states reached, {deep}; raise it with --states N")
        self.check(f"at {visited:,} total states, {deep}")

    def check(self, progress: str) -> None:
        """Say how far the work has come, in words. Raises `LimitReached` beyond the limit of time or memory."""
        if self.listen is not None:
            self.listen()
        if self.spent() > self.seconds:
            self.refuse(f"time limit of {self.seconds:g} s reached {progress}; raise it with --seconds N")
        if peak_megabytes() > self.megabytes:
            self.refuse(f"memory limit of {self.megabytes:,} MB reached {progress}; raise it with --memory N")
        if self.report is not None:
            self.report(progress)

    def refuse(self, reason: str) -> None:
        """Raise `LimitReached` with a reason."""
        raise LimitReached(reason)


def peak_megabytes() -> float:
    """The most memory that this process has had, in megabytes; read ten times a second, as asking takes long."""
    global _peak
    now = time.monotonic()
    if now >= _peak[0] + 0.1:
        _peak = now, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / UNIT
    return _peak[1]


_peak = (-1.0, 0.0)
"""When the peak was last read, and what it was."""
