"""A flow table in a property file: `table = { file = "..." }`, or its lines themselves in `text`."""

from __future__ import annotations

from pathlib import Path

from settled.models.flow_table import FlowTable
from settled.models.problems import InputError
from settled.models.property_files.toml_document import Spot
from settled.models.property_files.toml_readers import table, text
from settled.models.readers.flow_table import parse, read


def flow_table(spot: Spot) -> FlowTable | None:
    """The flow table that an option gives; problems are noted in the document, those of another file as well."""
    if table(spot) is None:
        return None
    spot.only(("file", "text"), "a flow table")
    if spot.has("file") == spot.has("text"):
        spot.problem("conflict", "a flow table is given by either `file` or `text`", "one of the two")
        return None
    given = spot.child("file" if spot.has("file") else "text")
    if text(given) is None:
        return None
    try:
        if given.name == "file":
            return read(Path(spot.document.file).parent / given.value, named_at=given.span)
        return parse(given.value, "flow table", given.inside)
    except InputError as error:
        spot.document.problems.extend(error.problems)
        return None
