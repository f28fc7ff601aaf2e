"""What a user sees while files are checked: verdicts as they come, problems, and a line of progress.

Verdicts go to standard output, all else to standard error; the line of progress only to a terminal.
"""

from __future__ import annotations

import os
import sys
import time
import traceback
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TextIO

from settled.models.problems import Problem
from settled.verify.inputs import excerpt
from settled.verify.renderers import problems as problems_text
from settled.verify.renderers import text
from settled.verify.renderers.page import Page, columns, visible
from settled.verify.result import Result
from settled.verify.session import Session


class Progress:
    """One line that is overwritten as the work goes on, at most ten times a second; silent but on a terminal."""

    def __init__(self, stream: TextIO) -> None:
        self.stream, self.shown = stream, stream.isatty()
        self.subject = ""
        self._width, self._next = 0, 0.0

    def __call__(self, said: str) -> None:
        """Show how far the work on the subject has come."""
        if not self.shown or time.monotonic() < self._next:
            return
        self._next = time.monotonic() + 0.1
        line = visible(f"{self.subject}: {said}" if said != self.subject else said)
        line = line[: Page.of(self.stream).width - 3]
        self.stream.write(f"\r{line}{' ' * (self._width - columns(line))}")
        self.stream.flush()
        self._width = columns(line)

    def clear(self) -> None:
        """Take the line away, and with it the `^C` that a terminal puts behind it."""
        if self._width:
            self.stream.write(f"\r{' ' * (self._width + 2)}\r")
            self.stream.flush()
        self._width, self._next = 0, 0.0


class Screen:
    """Shows what becomes of each file; `silent` keeps verdicts off standard output, `whole` has every signal shown."""

    def __init__(self, silent: bool = False, whole: bool = False) -> None:
        self.silent, self.whole = silent, whole
        self.progress = Progress(sys.stderr)
        self._opened = 0

    def page(self) -> Page:
        """The page of standard output."""
        return replace(page(), whole=self.whole)

    def say(self, said: str) -> None:
        """Text on standard output, at once."""
        self.progress.clear()
        if not self.silent:
            print(said, flush=True)

    def warn(self, said: str) -> None:
        """Text on standard error, after all that went to standard output."""
        self.progress.clear()
        sys.stdout.flush()
        print(said, file=sys.stderr, flush=True)

    def opened(self, session: Session) -> None:
        """A file has been understood."""
        spec = session.specification
        self.say(
            ("\n" if self._opened else "") + text.opening(spec.path, spec.title, session.understood(), self.page())
        )
        self._opened += 1

    def decided(self, session: Session, result: Result) -> None:
        """There is a verdict."""
        self.say(text.verdict(result, session.circuit, self.page()))

    def closed(self, results: Sequence[Result], left_out: Sequence[str]) -> None:
        """All files are done but those in `left_out`."""
        self.say(text.closing(results, left_out, self.page()))

    def refused(self, problems: Sequence[Problem], texts: Mapping[str, str | None]) -> None:
        """A file cannot be used; `texts` holds what came from elsewhere than a file."""
        color = Page.of(sys.stderr).color
        if not self.silent:
            shown = problems_text.render(problems, color=color, sources=lambda file: texts.get(file) or excerpt(file))
            self.warn(shown + "\n")

    def broke(self, file: str, error: Exception) -> None:
        """This program is at fault. The environment variable SETTLED_DEBUG asks for the traceback."""
        said = visible(f"{type(error).__name__}: {error}" if str(error) else type(error).__name__)
        self.warn(f"internal error at {visible(file)}: {said}\nThis is a fault in settled and no verdict.")
        if os.environ.get("SETTLED_DEBUG"):
            traceback.print_exception(error)


def page() -> Page:
    """The page of standard output."""
    return Page.of(sys.stdout)
