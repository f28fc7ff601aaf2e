"""Readers of single TOML values.

A reader takes a `Spot` and returns what the value means, or `None` after noting a problem in the document, so that
one pass finds all problems of a file.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TypeVar

from settled.models.problems import nearest
from settled.models.property_files.toml_document import Spot, listed, where

T = TypeVar("T")


def text(spot: Spot) -> str | None:
    """A string that is not empty."""
    word = string(spot)
    if word is not None and not word.strip():
        spot.problem("bad-value", f"expected text for `{spot.name}`, found an empty string", "nothing in it")
        return None
    return word


def string(spot: Spot) -> str | None:
    """A string, empty or not."""
    if isinstance(spot.value, str):
        return spot.value
    spot.wrong_type("a string")
    return None


def boolean(spot: Spot) -> bool | None:
    """`true` or `false`."""
    if isinstance(spot.value, bool):
        return spot.value
    spot.wrong_type("`true` or `false`")
    return None


def whole_number(spot: Spot) -> int | None:
    """An integer from 0 to the largest of 64 bits."""
    if type(spot.value) is not int:
        spot.wrong_type("a whole number")
        return None
    if 0 <= spot.value < 2**63:
        return spot.value
    spot.problem("bad-value", f"`{spot.name}` must be a whole number from 0 to 2^63 - 1", "out of range")
    return None


def bit(spot: Spot) -> int | None:
    """0 or 1."""
    if type(spot.value) is int and spot.value in (0, 1):
        return spot.value
    if type(spot.value) is int:
        spot.problem("bad-value", f"the value of `{spot.name}` must be 0 or 1", "neither 0 nor 1")
        return None
    spot.wrong_type("0 or 1", help=f"write {int(spot.value)}" if isinstance(spot.value, bool) else "")
    return None


def one_of(*words: str) -> Callable[[Spot], str | None]:
    """One of a few words."""

    def reader(spot: Spot) -> str | None:
        if not isinstance(spot.value, str):
            spot.wrong_type(" or ".join(f'"{word}"' for word in words))
            return None
        if spot.value in words:
            return spot.value
        help = nearest(spot.value, words) or f"the values are {listed(words)}"
        spot.problem("bad-value", f"`{spot.name}` cannot be `{spot.value}`", "not one of its values", help=help)
        return None

    return reader


def table(spot: Spot) -> Spot | None:
    """A table; read on in the spot that comes back."""
    if isinstance(spot.value, dict):
        return spot
    spot.wrong_type("a table")
    return None


def array_of(member: Callable[[Spot], T | None], what: str) -> Callable[[Spot], tuple[T, ...] | None]:
    """An array of members that are `what`; those that cannot be read are left out."""

    def reader(spot: Spot) -> tuple[T, ...] | None:
        if not isinstance(spot.value, list):
            spot.wrong_type(f"an array of {what}")
            return None
        read = [member(inner) for inner in spot.members()]
        return tuple(value for value in read if value is not None)

    return reader


def strings(spot: Spot) -> list[Spot] | None:
    """The members of an array of strings, without those that are no text or stand there again."""
    if not isinstance(spot.value, list):
        spot.wrong_type("an array of strings")
        return None
    first: dict[str, Spot] = {}
    for member in spot.members():
        word = text(member)
        if word is not None and first.setdefault(word, member) is not member:
            message = f"`{word}` stands twice in `{spot.name}`"
            member.problem(
                "duplicate-name", message, "again", note=f"the first one stands at {where(first[word].span)}"
            )
    return list(first.values())


def table_of(member: Callable[[Spot], T | None]) -> Callable[[Spot], Mapping[str, T] | None]:
    """A table with any keys; members that cannot be read are left out."""

    def reader(spot: Spot) -> Mapping[str, T] | None:
        if table(spot) is None:
            return None
        read = {str(inner.path[-1]): member(inner) for inner in spot.members()}
        return {key: value for key, value in read.items() if value is not None}

    return reader
