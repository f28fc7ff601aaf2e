"""Going through the counterexamples of a result document: step by step in a terminal, in full anywhere else."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence

from settled.models.problems import InputError, Problem
from settled.models.source import Span
from settled.verify.renderers import text
from settled.verify.renderers.page import Page
from settled.verify.reviewing.document import Reviewed, read_document
from settled.verify.reviewing.walk import failures
from settled.verify.terminal import Screen


def review(path: str, only: Sequence[str], screen: Screen) -> None:
    """Show the properties of a result document that are named in `only`, or all. Raises `InputError`."""
    files = read_document(path, only)
    try:
        shown, found = in_full(files, screen.page()), failures(files)
    except (AttributeError, IndexError, KeyError, TypeError, ValueError) as error:
        message = f"`{path}` is damaged: it speaks of `{error}` where something else stands"
        raise InputError(Problem("damaged-result", message, Span(path, 1, 1))) from error
    if found and in_terminal():
        from settled.verify.reviewing.terminal import walk_through

        walk_through(files, found, screen.page())
    else:
        screen.say(shown)


def in_terminal() -> bool:
    """Whether there is a terminal that can be walked through."""
    return sys.stdin.isatty() and sys.stdout.isatty() and os.environ.get("TERM", "dumb") != "dumb"


def in_full(files: Sequence[Reviewed], page: Page) -> str:
    """Every property with its runs, as it was shown when it was decided."""
    parts = []
    for file in files:
        parts.append(text.opening(file.file, file.title, file.understood, page))
        parts += [text.verdict(result, file.circuit, page) for result in file.results]
    parts.append(text.closing([result for file in files for result in file.results], (), page))
    return "\n".join(parts)
