"""Drawings as inline SVG, built as elements, so that every text in them is escaped."""

from __future__ import annotations

from xml.etree.ElementTree import Element, SubElement, tostring

from settled.verify.renderers.page import visible


def canvas(width: float, height: float, label: str) -> Element:
    """An empty drawing in CSS pixels that shrinks with its column; `label` is read aloud in its place."""
    size = {"width": number(width), "height": number(height), "viewBox": f"0 0 {number(width)} {number(height)}"}
    return Element("svg", {**size, "role": "img", "aria-label": visible(label)})


def add(parent: Element, tag: str, style: str = "", text: str = "", **attributes: float | str) -> Element:
    """A shape or text of the class `style`; underscores in attribute names stand for hyphens."""
    named = {k.replace("_", "-"): v if isinstance(v, str) else number(v) for k, v in attributes.items()}
    child = SubElement(parent, tag, {"class": style, **named} if style else named)
    child.text = visible(text) or None
    return child


def number(value: float) -> str:
    """A coordinate, to a tenth of a pixel."""
    return f"{value:.1f}".removesuffix(".0")


def to_text(drawing: Element) -> str:
    """The drawing as markup."""
    return tostring(drawing, encoding="unicode")
