"""Where a reviewer stands among the runs of a result document, and the ways to move on."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from settled.verify.renderers.cause_text import groups
from settled.verify.renderers.trace_text import beginning
from settled.verify.result import Result, Trace
from settled.verify.reviewing.document import Reviewed


@dataclass(frozen=True)
class Failure:
    """One refutation, or one of its causes: the file, a heading for the cause, the result as of it alone."""

    file: Reviewed
    heading: str
    result: Result


def failures(files: Sequence[Reviewed]) -> list[Failure]:
    """Everything that there are runs to walk through, in the order of the document."""
    return [
        Failure(file, heading, group)
        for file in files
        for result in file.results
        if result.traces
        for heading, group in groups(result)
    ]


@dataclass
class Walk:
    """A failure, one of its runs, and a step of that. Every move stays where it is when there is nothing to go to."""

    failures: list[Failure]
    failure: int = 0
    run: int = 0
    step: int = 0
    said: str = field(default="")

    @property
    def here(self) -> Failure:
        """The failure that is looked at."""
        return self.failures[self.failure]

    @property
    def traces(self) -> tuple[Trace, ...]:
        """The runs of the failure."""
        return self.here.result.traces

    @property
    def trace(self) -> Trace:
        """The run that is looked at."""
        return self.traces[self.run]

    @property
    def parting(self) -> int | None:
        """The last step that the runs have in common, if they have any."""
        common = beginning(self.traces) if len(self.traces) > 1 else 0
        return common - 1 if common else None

    def move(self, steps: int) -> None:
        """Forward, or back; from the last step of a run that goes round to where its loop begins."""
        last, loop = len(self.trace.steps) - 1, self.trace.loop
        if steps > 0 and self.step == last and loop is not None:
            self.step, self.said = loop, f"back to step {loop}: this goes round for ever"
        else:
            self.step, self.said = min(max(self.step + steps, 0), last), ""

    def to(self, step: int) -> None:
        """To a step; a negative one counts from the end."""
        self.step, self.said = step % len(self.trace.steps), ""

    def part(self) -> None:
        """To where the runs part."""
        if self.parting is None:
            self.said = "there is one run only" if len(self.traces) == 1 else "the runs have no common beginning"
        else:
            self.to(self.parting)

    def other(self) -> None:
        """To another run: to the same step as long as both have it in common, else to its first step of its own."""
        if len(self.traces) == 1:
            self.said = "there is one run only"
            return
        common = self.parting
        self.run = (self.run + 1) % len(self.traces)
        own = self.step if common is None else common + 1
        self.to(self.step if common is not None and self.step <= common else min(own, len(self.trace.steps) - 1))

    def next(self, failures: int) -> None:
        """To the next failure, or back to the one before."""
        there = min(max(self.failure + failures, 0), len(self.failures) - 1)
        if there == self.failure:
            self.said = "there is no further failure" if failures > 0 else "this is the first failure"
        else:
            self.failure, self.run, self.step, self.said = there, 0, 0, ""
