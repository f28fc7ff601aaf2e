"""Property files: TOML text to a `Specification`, with every problem of the file reported at its place, at once."""

from __future__ import annotations

from collections.abc import Mapping

from settled.models.environment import Environment
from settled.models.property_files import circuit_table
from settled.models.property_files.environment_table import check_alone, read_environment, surrounded
from settled.models.property_files.name_scope import Scope
from settled.models.property_files.property_table import Context, read_properties
from settled.models.property_files.toml_document import Spot
from settled.models.property_files.toml_loading import SIZE_LIMIT, load
from settled.models.property_files.toml_readers import string
from settled.models.source import Span
from settled.models.specification import CircuitSource, Shape, Specification
from settled.models.text_file import read_text

KEYS = ("title", "circuit", "environment", "property")


def read(path: str, *, kinds: Mapping[str, Shape], text: str | None = None) -> Specification:
    """The specification in a property file, or in `text`, which then goes by the name `path`.

    `kinds` says which options each check takes. Raises `InputError` with every problem of the file.
    """
    document = load(path, read_text(path, limit=SIZE_LIMIT) if text is None else text)
    root = document.root
    root.only(KEYS, "a property file")
    title = root.take("title", string) or ""
    circuit = surrounded(root, circuit_table.read_table(root))
    scope = Scope.of(circuit.netlist) if circuit else None
    environment: Environment | None = Environment()
    if root.has("environment"):
        environment = read_environment(root.child("environment"), scope)
    context = Context(circuit, environment, kinds)
    properties = root.take("property", lambda spot: read_properties(spot, context)) or ()
    check_alone(root, properties)
    document.finish()
    assert circuit is not None and environment is not None, "what cannot be read leaves a problem"
    return Specification(path, title, circuit, environment, properties, _spans(root))


def read_circuit(path: str) -> CircuitSource:
    """The circuit of a netlist file under the default delay model, or that of a property file. Raises `InputError`."""
    return circuit_table.read_file(path)


def _spans(root: Spot) -> dict[str, Span]:
    environment = root.child("environment") if root.has("environment") else None
    keys = [key for key in ("start", "assume") if environment and environment.has(key)]
    return {key: environment.child(key).span for key in keys} if environment else {}
