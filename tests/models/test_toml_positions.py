"""Places of keys and values, compared with what `tomllib` reads; offsets in strings through quotes and escapes."""

from __future__ import annotations

import json
import tomllib
from collections.abc import Iterator
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from settled.models.property_files.toml_positions import LEVELS, Path, scan, string_offsets

EXAMPLE = """\
# a comment with "quotes" and [brackets]
title = 'x' # another = 1
a.b . "c d" = [ 1, # one
   { e = "f", g.h = [ [], {} ] }, 1979-05-27 07:32:00, ]
"quoted \\u0041" = \"\"\"
one \\
   two ""\"\"\"
empty = \"\"
literal = '''it's''\\''''
[ circuit ]
x = -1.5e3
[circuit . "sub.table"]
y = true
[[property]]
name = "first"
[[property]]
name = "second"
[property.inner]
z = 1
[[property.list]]
z = 2
"""


def values(data: Any, path: Path = ()) -> Iterator[tuple[Path, Any]]:
    if path:
        yield path, data
    members = data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else ()
    for key, member in members:
        yield from values(member, (*path, key))


def check(text: str) -> None:
    """Every value of the text has a place; what stands there is the value, or the header or key of a table."""
    places = scan(text).places
    for path, value in values(tomllib.loads(text)):
        key, (start, end) = places[path]
        written = text[slice(*key)]
        name = next(part for part in reversed(path) if isinstance(part, str))
        assert tomllib.loads(f"{written} = 1") == {name: 1}
        if start <= key[0] < end:
            assert isinstance(value, dict | list)
            continue
        assert tomllib.loads(f"x = {text[start:end]}")["x"] == value


def test_every_value_has_its_place() -> None:
    check(EXAMPLE)
    places = scan(EXAMPLE).places
    pick = {path: EXAMPLE[slice(*place.value)] for path, place in places.items()}
    assert pick["title",] == "'x'"
    assert pick["a", "b", "c d", 1, "g", "h"] == "[ [], {} ]"
    assert pick["a", "b", "c d", 2] == "1979-05-27 07:32:00"
    assert pick["circuit", "sub.table"] == '[circuit . "sub.table"]'
    assert pick["property", 1] == "[[property]]"
    assert places["property", 1].value[0] > places["property", 0].value[0]
    assert pick["property", 1, "name"] == '"second"'
    assert pick["property", 1, "list", 0, "z"] == "2"


@pytest.mark.parametrize(
    "text", ["a = 1\na = 2", "[a]\n[b]\n[a]", "a = {b = 1, b = 2}", "[a]\nb = 1\n[c]\n[a]", "[[x]]\ny = 1\ny = 2"]
)
def test_keys_given_twice_are_found(text: str) -> None:
    with pytest.raises(tomllib.TOMLDecodeError):
        tomllib.loads(text)
    ((first, second),) = scan(text).repeated
    assert text[slice(*first.key)] == text[slice(*second.key)] and first.key < second.key


def test_the_same_key_in_two_tables_is_not_given_twice() -> None:
    text = "[[x]]\ny = 1\n[[x]]\ny = 1\n[a]\ny = 1\n[a.b]\ny = {y = 1}\n[b]\na.x = 1\na.y = 1"
    assert tomllib.loads(text) and not scan(text).repeated


@pytest.mark.parametrize("opening", ["[", "{ a = ", "[ { a = "])
def test_too_deep_nesting_is_found(opening: str) -> None:
    levels = LEVELS // (opening.count("[") + opening.count("{"))
    closing = "".join({"[": "]", "{": "}"}.get(c, "") for c in reversed(opening))
    inner = "1" if "{" in opening else ""
    assert scan("x = " + opening * (levels - 1) + inner + closing * (levels - 1)).too_deep is None
    assert scan("x = " + opening * 10_000).too_deep is not None
    assert scan("a" + ".a" * 10_000 + " = 1").too_deep is not None


# ---- documents at random -----------------------------------------------------------------------------------------

NAMES = st.sampled_from(["a", "b-1", "c_", "7", "d e", "f.g", 'h"', "é", ""])
TEXTS = st.text(alphabet="ab\"'\\\n\t#=[]{},é\U0001f30a ", max_size=8)
SCALARS = st.one_of(TEXTS, st.integers(), st.booleans(), st.floats(allow_nan=False), st.dates().map(str))
DATA = st.recursive(
    SCALARS,
    lambda inner: st.one_of(st.lists(inner, max_size=3), st.dictionaries(NAMES, inner, max_size=3)),
    max_leaves=8,
)


def key(name: str) -> str:
    return name if name.replace("-", "").isalnum() and name.isascii() else json.dumps(name)


def string(text: str, style: int) -> str:
    if style % 4 == 1 and "'" not in text and "\n" not in text:
        return f"'{text}'"
    if style % 4 == 2 and "''" not in text and not text.endswith("'"):
        return f"'''\n{text}'''"
    escaped = json.dumps(text, ensure_ascii=style % 2 == 0)
    surrogates = escaped.encode("utf-8").decode("utf-8").replace("\\ud83c\\udf0a", "\\U0001F30A")
    return f'""{surrogates}""' if style % 4 == 3 else surrogates


def written(value: Any, style: int) -> str:
    gap = ["", " ", "\n  ", ' # ] } , "\n'][style % 4]
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return string(value, style)
    if isinstance(value, list):
        return "[" + "".join(f"{gap}{written(v, style + 1)}{gap}," for v in value) + gap + "]"
    if isinstance(value, dict):
        return "{" + ", ".join(f"{key(k)} = {written(v, style + 1)}" for k, v in value.items()) + "}"
    return repr(value)


@settings(derandomize=True, deadline=None, max_examples=300)
@given(st.dictionaries(NAMES, DATA, max_size=3), st.dictionaries(NAMES, DATA, max_size=2), st.integers(0, 3))
def test_places_agree_with_tomllib(top: dict[str, Any], inner: dict[str, Any], style: int) -> None:
    lines = [f"{key(k)} = {written(v, style)} # {k!r}" for k, v in top.items()]
    more = [f" {key(k)}={written(v, style)}" for k, v in inner.items()]
    check("\n".join([*lines, "[[table]]", *more, "[table.x]", *more, "[[table]]", *more]))


@settings(derandomize=True, deadline=None, max_examples=300)
@given(TEXTS, st.integers(0, 3))
def test_string_offsets_count_the_characters(text: str, style: int) -> None:
    token = string(text, style)
    offsets = string_offsets(token)
    assert len(offsets) == len(text) + 1
    for character, offset in zip(text, offsets, strict=False):
        assert token[offset] == character or token[offset] == "\\"


def test_string_offsets_at_the_end_of_lines() -> None:
    token = '"""\nab\\\n   c\\u00e9d"""'
    assert tomllib.loads(f"x = {token}")["x"] == "abcéd"
    assert string_offsets(token) == [4, 5, 11, 12, 18, 19]


@settings(derandomize=True, deadline=None, max_examples=300)
@given(st.text(alphabet="ab.=[]{}\"'\\#\n ,1", max_size=40))
def test_any_text_is_scanned(text: str) -> None:
    scan(text)
