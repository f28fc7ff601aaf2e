"""Diagnostics as data: what is wrong with an input, where, and what to do about it. Renderers print them."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from settled.models.source import Span


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing wrong with the user's input.

    `code` is a short stable word such as `unknown-name`; `message` is one sentence in lower case that stands alone;
    `spot` says what the marked place is; `notes` name what else took part; `help` is the cure, if there is one.
    """

    code: str
    message: str
    span: Span | None = None
    spot: str = ""
    notes: tuple[str, ...] = ()
    help: str = ""


class InputError(Exception):
    """The user's input cannot be used. Carries every problem found, in the order of the file."""

    def __init__(self, problems: Problem | Sequence[Problem]) -> None:
        self.problems = (problems,) if isinstance(problems, Problem) else tuple(problems)
        super().__init__("; ".join(p.message for p in self.problems))


def nearest(name: str, known: Iterable[str]) -> str:
    """A help sentence with the known name nearest to `name`, or the empty string when none is near."""
    close = difflib.get_close_matches(name, list(known), n=1, cutoff=0.6)
    return f"did you mean `{close[0]}`?" if close else ""
