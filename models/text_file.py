"""Read a text file that a user named; everything that can go wrong is a diagnostic."""

from __future__ import annotations

import errno
import os
import stat
from collections.abc import Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from hashlib import sha256
from pathlib import Path

from settled.models.problems import InputError, Problem, nearest
from settled.models.source import Span, span_at

_record: ContextVar[dict[str, str] | None] = ContextVar("record", default=None)


@contextmanager
def recording() -> Iterator[dict[str, str]]:
    """While it is open, collects the SHA-256 (hexadecimal) of the content of every file that is read, by path."""
    found: dict[str, str] = {}
    token = _record.set(found)
    try:
        yield found
    finally:
        _record.reset(token)


def read_text(path: str | Path, *, limit: int, named_at: Span | None = None) -> str:
    """The text of a UTF-8 file of at most `limit` bytes, without byte order mark, lines ending in `\\n`.

    `named_at` is the place that named the file, if another file did. Raises `InputError`.
    """
    span = named_at or Span(str(path), 1, 1)
    try:
        with open(path, "rb") as file:
            raw = file.read(limit + 1)
    except (OSError, ValueError) as error:
        raise InputError(_unreadable(Path(path), error, span)) from None
    if len(raw) > limit:
        message = f"`{path}` is larger than the limit of {limit // 10**6} MB for such a file"
        raise InputError(Problem("too-large", message, span))
    return decode(raw, str(path))


def problem_of(path: Path, named_at: Span) -> Problem | None:
    """What is wrong with `path` if it is no file that can be opened."""
    try:
        if stat.S_ISDIR(path.stat().st_mode):
            raise IsADirectoryError(errno.EISDIR, "")
        if not os.access(path, os.R_OK):
            raise PermissionError(errno.EACCES, "")
    except (OSError, ValueError) as error:
        return _unreadable(path, error, named_at)
    return None


def decode(raw: bytes, file: str) -> str:
    """`raw` as text; an error names the first byte that is not UTF-8, or is NUL, with its place."""
    record = _record.get()
    if record is not None:
        record[file] = sha256(raw).hexdigest()
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        text = raw[: error.start].decode("utf-8-sig", errors="replace")
        message = f"`{file}` is not text in UTF-8: byte 0x{raw[error.start]:02x} cannot be read"
        place = span_at(file, text, len(text))
        raise InputError(Problem("not-text", message, place, "a byte that is not UTF-8")) from None
    if "\0" in text:
        place = span_at(file, text, text.index("\0"))
        raise InputError(Problem("not-text", f"`{file}` is not text: it holds a NUL character", place, "NUL"))
    return text.replace("\r\n", "\n")


def _unreadable(path: Path, error: OSError | ValueError, span: Span) -> Problem:
    if isinstance(error, FileNotFoundError):
        return Problem("file-not-found", f"there is no file `{path}`", span, "named here", help=_neighbour(path))
    if isinstance(error, IsADirectoryError):
        return Problem("unreadable", f"`{path}` is a directory, not a file", span, "named here")
    why = os.strerror(error.errno).lower() if isinstance(error, OSError) and error.errno else "not a file name"
    return Problem("unreadable", f"`{path}` cannot be read: {why}", span, "named here")


def _neighbour(path: Path) -> str:
    try:
        return nearest(path.name, sorted(os.listdir(path.parent)))
    except OSError:
        return f"there is no directory `{path.parent}`"
