"""From TOML text to a `Document`; what is not TOML becomes a problem at its place."""

from __future__ import annotations

import re
import tomllib

from settled.models.problems import InputError, Problem
from settled.models.property_files.toml_document import Document, where
from settled.models.property_files.toml_positions import LEVELS, Place
from settled.models.source import Span

SIZE_LIMIT = 2 * 10**6
"""Bytes of a property file that are read; a larger circuit belongs in a netlist file."""

_WHERE = re.compile(r"(.*) \(at (?:line (\d+), column (\d+)|end of document)\)\Z", re.DOTALL)
_BARE_WORD = re.compile(r"[A-Za-z_][A-Za-z0-9_-]*")
_BACKSLASH = "in double quotes a backslash is written `\\\\`; in single quotes it stands for itself"


def load(file: str, text: str) -> Document:
    """The document of a TOML text. Raises `InputError` for what is not TOML."""
    text = text.replace("\r\n", "\n")
    document = Document(file, text)
    if not text.strip():
        raise InputError(Problem("empty-file", f"`{file}` is empty", Span(file, 1, 1)))
    if document.positions.too_deep is not None:
        at = document.positions.too_deep
        message = f"keys, arrays and tables nest deeper than {LEVELS} levels"
        raise InputError(Problem("too-deep", message, document.span(at, at + 1), f"level {LEVELS + 1}"))
    try:
        document.data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(_not_toml(document, str(error))) from None
    except (ValueError, RecursionError):
        raise InputError(_too_long(document)) from None
    return document


def _not_toml(document: Document, error: str) -> list[Problem]:
    if document.positions.repeated and re.match("Cannot|Duplicate", error):
        return [_repeated(document, *pair) for pair in document.positions.repeated]
    match = _WHERE.match(error)
    what, line, column = match.groups() if match else (error, None, None)
    if line is None or column is None:
        at, found = len(document.text.rstrip("\n")), "the end of the file"
    else:
        at = document.line_starts[int(line) - 1] + int(column) - 1
        found = "the end of the line" if document.text[at : at + 1] in ("\n", "") else f"`{document.text[at]}`"
    if what.startswith("Unescaped"):
        at = document.text.rindex("\\", 0, at)
    message, help = _in_words(what, found, document.text, at)
    return [Problem("toml-syntax", message, document.span(at, at + 1), "not TOML from here on", help=help)]


def _in_words(what: str, found: str, text: str, at: int) -> tuple[str, str]:
    """Message and cure for what `tomllib` says about the place `at`."""
    word = _BARE_WORD.match(text, at)
    if what == "Invalid value":
        message = f"expected a value after `=`, found `{word[0]}`" if word else f"expected a value, found {found}"
        return message, f'text stands in quotes: `"{word[0]}"`' if word else ""
    if what.startswith("Illegal character") and found == "the end of the line":
        return "expected a closing quote, found the end of the line", ""
    if what.startswith("Cannot"):
        return "a key or table is given twice", ""
    if what.startswith("Unescaped"):
        return f"`\\{text[at + 1]}` is no escape of TOML", _BACKSLASH
    plain = what[:1].lower() + what[1:].replace("'", "`")
    help = _BACKSLASH if what == "Invalid hex value" else ""
    return (f"{plain}, found {found}" if plain.startswith("expected") else plain), help


def _repeated(document: Document, first: Place, second: Place) -> Problem:
    name = document.text[slice(*second.key)]
    note = f"the first one stands at {where(document.span(*first.key))}"
    return Problem("duplicate-key", f"`{name}` is given twice", document.span(*second.key), "the second one", (note,))


def _too_long(document: Document) -> list[Problem]:
    """The numbers that are too long to be read."""
    values = {place.value for place in document.positions.places.values()}
    long = [at for at in sorted(values) if re.match(r"[+-]?[0-9_]{1000}", document.text[slice(*at)])]
    spans = [document.span(*at) for at in long] or [Span(document.file, 1, 1)]
    return [Problem("bad-value", "a number has too many digits", span, "too large") for span in spans]
