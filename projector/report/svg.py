"""From a drawing as the library writes it to a picture fit for the page.

Style block, metadata and comments go (a style block inside one picture would apply to the whole page), ids that
nothing refers to go, the others get the chart's prefix, coordinates are rounded, and the picture gets a role, a
name and a text alternative.
"""

from __future__ import annotations

import re
import xml.etree.ElementTree as ET

from markupsafe import Markup

SVG = "{http://www.w3.org/2000/svg}"
HREF = "{http://www.w3.org/1999/xlink}href"
DROPPED = {f"{SVG}style", f"{SVG}metadata", f"{SVG}title", f"{SVG}desc"}
NUMBER = re.compile(r"-?\d+\.\d{3,}(?:e-?\d+)?")
REFERENCE = re.compile(r"url\(#([^)]+)\)")
ROUNDED = ("d", "x", "y", "width", "height", "transform", "points", "cx", "cy", "r", "style", "viewBox")


def finished(raw: str, *, prefix: str, title: str, text: str) -> Markup:
    """The picture as inline SVG; `prefix` is unique on the page, `title` names it, `text` serves the same purpose."""
    root = ET.fromstring(raw)
    _drop(root)
    used = _references(root)
    for element in root.iter():
        _clean(element, prefix, used)
        element.tag = element.tag.removeprefix(SVG)
    _name(root, prefix, title, text)
    return Markup(ET.tostring(root, encoding="unicode", short_empty_elements=True))  # our own text, escaped by ET


def _drop(element: ET.Element) -> None:
    for child in list(element):
        if child.tag in DROPPED:
            element.remove(child)
        else:
            _drop(child)
    for child in list(element):  # groups that hold nothing any more, and outlines that draw nothing
        empty = child.tag in (f"{SVG}g", f"{SVG}defs") and not len(child)
        if empty or (child.tag == f"{SVG}path" and child.get("style") == "fill: none"):
            element.remove(child)


def _references(root: ET.Element) -> set[str]:
    found: set[str] = set()
    for element in root.iter():
        for name, value in element.attrib.items():
            found.update(REFERENCE.findall(value))
            if name == HREF:
                found.add(value.removeprefix("#"))
    return found


def _clean(element: ET.Element, prefix: str, used: set[str]) -> None:
    kept: dict[str, str] = {}
    for name, value in element.attrib.items():
        if name == "id":
            if value in used:
                kept["id"] = f"{prefix}-{value}"
            continue
        if name == HREF:
            kept["href"] = f"#{prefix}-{value.removeprefix('#')}"
            continue
        if name == "transform" and value.startswith(("rotate(-0 ", "rotate(0 ")):
            continue
        if name in ROUNDED:
            value = NUMBER.sub(_short, value)
        kept[name] = REFERENCE.sub(lambda m: f"url(#{prefix}-{m[1]})", value)
    if "d" in kept:
        kept["d"] = " ".join(kept["d"].split())
    if "style" in kept:
        kept["style"] = _style(kept["style"])
    element.attrib.clear()
    element.attrib.update(kept)
    element.tail = None
    if element.text is not None and not element.text.strip():
        element.text = None


def _short(match: re.Match[str]) -> str:
    text = f"{float(match[0]):.2f}".rstrip("0").rstrip(".")
    return "0" if text in ("-0", "") else text


def _style(style: str) -> str:
    """Without the layout's font names: the page's own sans-serif is narrower, so nothing can be clipped."""
    parts = [part.strip() for part in style.split(";")]
    return "; ".join(part for part in parts if part and not part.startswith("font-family"))


def _name(root: ET.Element, prefix: str, title: str, text: str) -> None:
    box = root.attrib["viewBox"]
    root.attrib.clear()
    root.attrib.update(
        {"class": "chart", "viewBox": box, "role": "img", "aria-labelledby": f"{prefix}-name {prefix}-text"}
    )
    name = ET.Element("title", {"id": f"{prefix}-name"})
    name.text = title
    long_form = ET.Element("desc", {"id": f"{prefix}-text"})
    long_form.text = text
    root.insert(0, long_form)
    root.insert(0, name)
