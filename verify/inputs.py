"""Which file a user means: a path, `-` for standard input, or the name of a gallery file."""

from __future__ import annotations

import os
import sys
from importlib.resources import files

from settled.models.problems import InputError, Problem, nearest
from settled.models.property_files.toml_loading import SIZE_LIMIT
from settled.models.source import Span
from settled.models.text_file import decode, read_text

STDIN = "-"


def locate(name: str) -> tuple[str, str | None]:
    """The path that `name` stands for and, of standard input, the text. Raises `InputError`.

    A bare name of no file here, with or without `.toml`, is looked up in the gallery; a directory, such as `--out`
    may have made under the name, does not hide it.
    """
    if name == STDIN:
        return STDIN, _standard_input()
    if os.path.basename(name) != name or (os.path.lexists(name) and not os.path.isdir(name)):
        return name, None
    known = gallery()
    if name not in known:
        if os.path.isdir(name):
            return name, None
        message = f"there is neither a file nor a gallery file `{name}`"
        help = nearest(name, [*os.listdir(), *known])
        raise InputError(Problem("file-not-found", message, Span(name, 1, 1), help=help))
    return known[name], None


def gallery() -> dict[str, str]:
    """The paths of the files in the gallery by their names, property files also without their suffix."""
    paths = {path.name: str(path) for path in files("settled.models").joinpath("gallery").iterdir() if path.is_file()}
    return paths | {name.removesuffix(".toml"): path for name, path in paths.items() if name.endswith(".toml")}


def excerpt(path: str) -> str | None:
    """The text of a file that a problem points into, or None when it cannot be shown."""
    try:
        return read_text(path, limit=SIZE_LIMIT)
    except InputError:
        return None


def _standard_input() -> str:
    try:
        raw = sys.stdin.buffer.read(SIZE_LIMIT + 1) if sys.stdin else b""
    except OSError as error:
        message = f"standard input cannot be read: {os.strerror(error.errno or 0).lower()}"
        raise InputError(Problem("unreadable", message, Span(STDIN, 1, 1))) from None
    if len(raw) > SIZE_LIMIT:
        message = f"standard input is larger than the limit of {SIZE_LIMIT // 10**6} MB for a property file"
        raise InputError(Problem("too-large", message, Span(STDIN, 1, 1)))
    return decode(raw, STDIN)
