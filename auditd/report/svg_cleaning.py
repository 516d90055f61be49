"""A drawing made fit for a page whose policy allows no inline style: roles as classes, plain attributes."""

from __future__ import annotations

import re
from xml.etree import ElementTree as ET

from auditd.report.labels import visible
from auditd.report.palette import ROLES

SVG = "{http://www.w3.org/2000/svg}"
HREF = "{http://www.w3.org/1999/xlink}href"
N_DECIMALS = 1
"""Decimals kept of a coordinate; a tenth of a point is finer than any screen or printer shows."""
_NUMBER = re.compile(r"-?\d+\.\d+")
_REFERENCE = re.compile(r"url\(#([^)]*)\)")
_PRESENTATION = (
    "fill-opacity", "stroke-opacity", "opacity", "stroke-width", "stroke-dasharray", "stroke-dashoffset",
    "stroke-linecap", "stroke-linejoin", "font-size", "font-weight", "text-anchor", "clip-path",
)  # fmt: skip
_GEOMETRY = ("d", "x", "y", "width", "height", "transform", "cx", "cy", "r", "x1", "x2", "y1", "y2")


def clean_svg(text: str, *, name: str, title: str, finding: str) -> str:
    """Return a drawing for the page, named `name`, whose text alternative is title and finding."""
    root = ET.fromstring(text)  # noqa: S314 - made by our own drawing, no entity and no outside text as markup
    _drop(root)
    used = _referenced(root)
    for element in root.iter():
        _clean_element(element, name, used)
    _hoist(root)
    for element in root.iter():
        element.tag = element.tag.removeprefix(SVG)
    _describe(root, name, title, finding)
    return ET.tostring(root, encoding="unicode", short_empty_elements=True)


def _drop(root: ET.Element) -> None:
    """Take out metadata and style sheets."""
    for parent in list(root.iter()):
        for child in list(parent):
            if child.tag in {f"{SVG}metadata", f"{SVG}style"}:
                parent.remove(child)


def _referenced(root: ET.Element) -> set[str]:
    used = set()
    for element in root.iter():
        if HREF in element.attrib:
            used.add(element.attrib[HREF].removeprefix("#"))
        for value in element.attrib.values():
            used.update(_REFERENCE.findall(value))
    return used


def _clean_element(element: ET.Element, name: str, used: set[str]) -> None:
    own = element.attrib.pop("id", None)
    if own in used:
        element.set("id", f"{name}-{own}")
    link = element.attrib.pop(HREF, None)
    if link is not None:
        element.set("href", f"#{name}-{link.removeprefix('#')}")
    classes = []
    for declaration in element.attrib.pop("style", "").split("; "):
        key, _, value = declaration.partition(": ")
        if key in {"fill", "stroke"} and value != "none":
            classes.append(f"{key[0]}-{ROLES[value]}")
        elif key in {"fill", "stroke"}:
            element.set(key, "none")
        elif key in _PRESENTATION:
            element.set(key, value)
    if classes:
        element.set("class", " ".join(classes))
    for key, value in list(element.attrib.items()):
        if _REFERENCE.search(value):
            element.set(key, _REFERENCE.sub(rf"url(#{name}-\1)", value))
        elif key in _GEOMETRY:
            element.set(key, _NUMBER.sub(_rounded, value).replace("\n", ""))
    if element.text is not None and not element.text.strip():
        element.text = None
    element.tail = None


def _rounded(match: re.Match[str]) -> str:
    text = f"{float(match[0]):.{N_DECIMALS}f}".removesuffix(".0")
    return "0" if text == "-0" else text


def _hoist(root: ET.Element) -> None:
    """Move what all marks of a group have in common to the group; thousands of points need it once."""
    for group in root.iter(f"{SVG}g"):
        marks = [child for child in group if child.tag == f"{SVG}use"]
        if len(marks) < 2 or len(marks) != len(group):
            continue
        for key in ("class", *_PRESENTATION):
            values = {mark.get(key) for mark in marks}
            value = values.pop()
            if not values and value is not None and group.get(key) is None:
                group.set(key, value)
                for mark in marks:
                    del mark.attrib[key]


def _describe(root: ET.Element, name: str, title: str, finding: str) -> None:
    box = root.get("viewBox", "")
    root.attrib.clear()
    root.attrib.update(
        {
            "viewBox": box,
            "role": "img",
            "aria-labelledby": f"{name}-title {name}-finding",
            "focusable": "false",
        }
    )
    head = ET.Element("title", {"id": f"{name}-title"})
    head.text = visible(title)
    words = ET.Element("desc", {"id": f"{name}-finding"})
    words.text = visible(finding)
    root.insert(0, head)
    root.insert(1, words)
