"""Power-up in words: what three-valued simulation leaves unknown, and why."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

SHOWN = 12


def remarks(facts: Mapping[str, Any]) -> list[str]:
    """Sentences about a result of `initialises`: the end, three-valued simulation beside it, a start not reached."""
    said = []
    if "end" in facts:
        said.append("the end: " + " ".join(f"{n}={v}" for n, v in facts["end"].items() if ">" not in n))
    if "ternary" in facts:
        said.append(_ternary(facts["ternary"]["nodes"]))
    if "note" in facts:
        said.append(f"note: {facts['note']}")
    return said


def _ternary(nodes: Mapping[str, Mapping[str, str | None]]) -> str:
    unknown = {n: said for n, said in nodes.items() if said["finding"] != "known" and ">" not in n}
    if not unknown:
        return "three-valued simulation from all nodes unknown comes to the same"
    words = [f"{n} ({_why(said)})" for n, said in list(unknown.items())[:SHOWN]]
    more = f" and {len(unknown) - SHOWN} more" if len(unknown) > SHOWN else ""
    return f"three-valued simulation from all nodes unknown leaves unknown: {', '.join(words)}{more}"


def _why(said: Mapping[str, str | None]) -> str:
    if said["finding"] != "pessimism":
        return said["finding"] or ""
    cause = said["cause"]
    where = f"branches of {cause} meet again" if cause else "several unknown signals meet again"
    return f"pessimism, it is {said['exact']}: {where}"
