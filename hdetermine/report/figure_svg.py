"""Figures as small, self-contained SVG that fits into a page and into a PDF.

matplotlib's SVG is rewritten: style attributes become presentation attributes (a page can then
forbid inline styles), the colours of the style sheet also become classes (a dark page restates
them), identifiers that nothing refers to go and the others get the figure's name in front (many
figures share a page), numbers are cut to a hundredth of a point. Nothing in the result depends
on the clock or on the machine.
"""

from __future__ import annotations

import io
import re
import xml.etree.ElementTree as ET
from dataclasses import dataclass

from matplotlib.figure import Figure

from hdetermine.report.figure_style import LIGHT
from hdetermine.report.rounding import unbroken

SVG = "{http://www.w3.org/2000/svg}"
HREF = "{http://www.w3.org/1999/xlink}href"
FONT = "DejaVu Sans, Verdana, sans-serif"
NAME_OF_COLOUR = {colour: name for name, colour in LIGHT.items()}
PLAIN_NUMBER = re.compile(r"-?\d+\.\d+(?:e-?\d+)?")
REFERENCE = re.compile(r"url\(#([^)]+)\)")
INHERITED = (
    "fill",
    "stroke",
    "stroke-width",
    "class",
    "clip-path",
    "fill-opacity",
    "stroke-opacity",
)
DEFAULTS = {"stroke-linejoin": "round", "stroke-dashoffset": "0", "text-anchor": "start"}


@dataclass(frozen=True, slots=True)
class Picture:
    """A figure ready for both reports.

    Attributes
    ----------
    key : str
        Name of the figure, fit for an identifier.
    svg : str
        The ``<svg>`` element; it has no style attribute and refers to nothing outside itself.
    alt : str
        What the figure shows, in words.
    caption : str
        What the marks mean.
    width, height : float
        Natural size, points.
    """

    key: str
    svg: str
    alt: str
    caption: str
    width: float
    height: float


def picture(figure: Figure, key: str, alt: str, caption: str) -> Picture:
    """Turn a drawn figure into a `Picture`."""
    raw = io.StringIO()
    figure.savefig(raw, format="svg", metadata={"Date": None, "Creator": None})
    svg, width, height = compact(raw.getvalue(), key)
    return Picture(key, svg, alt, unbroken(caption), width, height)


def compact(text: str, key: str) -> tuple[str, float, float]:
    """Rewrite matplotlib's SVG; return it with its width and height in points."""
    root = ET.fromstring(text)
    referred = _referred(root)
    _tidy(root, key, referred)
    _, _, width, height = (float(number) for number in root.attrib["viewBox"].split())
    root.attrib.clear()
    root.attrib.update(
        {
            "viewBox": f"0 0 {width:g} {height:g}",
            "width": f"{width:g}",
            "height": f"{height:g}",
            "font-family": FONT,
            "stroke-linejoin": "round",
        }
    )
    ET.register_namespace("", SVG.strip("{}"))
    return ET.tostring(root, encoding="unicode"), width, height


def _referred(root: ET.Element) -> set[str]:
    found: set[str] = set()
    for element in root.iter():
        for name, value in element.attrib.items():
            if name == HREF:
                found.add(value.lstrip("#"))
            else:
                found.update(REFERENCE.findall(value))
    return found


def _tidy(parent: ET.Element, key: str, referred: set[str]) -> None:
    kept: list[ET.Element] = []
    for child in parent:
        if child.tag in (f"{SVG}metadata", f"{SVG}style"):
            continue
        _attributes(child, key, referred)
        _tidy(child, key, referred)
        if child.tag in (f"{SVG}g", f"{SVG}defs") and len(child) == 0:
            continue
        if child.tag == f"{SVG}g" and not child.attrib:
            kept.extend(child)
        else:
            kept.append(child)
    for element in kept:
        element.tail = None
        if element.tag not in (f"{SVG}text", f"{SVG}tspan"):
            element.text = None
    parent[:] = kept
    _share(parent)


def _attributes(element: ET.Element, key: str, referred: set[str]) -> None:
    attributes = dict(element.attrib)
    for item in attributes.pop("style", "").split(";"):
        name, found, value = item.partition(":")
        if found:
            attributes[name.strip()] = value.strip()
    # The root carries the one font family of all figures.
    attributes.pop("font-family", None)
    if attributes.get("id") not in referred:
        attributes.pop("id", None)
    element.attrib.clear()
    classes: list[str] = []
    for name, value in attributes.items():
        if DEFAULTS.get(name) == value:
            continue
        if name == "id":
            element.set(name, f"{key}-{value}")
        elif name == HREF:
            element.set("href", f"#{key}-{value[1:]}")
        elif value.startswith("url(#"):
            element.set(name, f"url(#{key}-{value[5:]}")
        elif name in ("fill", "stroke") and value in NAME_OF_COLOUR:
            element.set(name, value)
            classes.append(f"{name[0]}-{NAME_OF_COLOUR[value]}")
        elif name == "font-size":
            element.set(name, value.removesuffix("px"))
        elif name == "transform" and value.startswith("rotate(-0 "):
            continue
        elif name != "stroke-miterlimit":
            element.set(name, _short(" ".join(value.split())))
    if classes:
        element.set("class", " ".join(sorted(classes)))


def _share(parent: ET.Element) -> None:
    """Lift what all marks of one series have in common into their group."""
    if parent.tag != f"{SVG}g" or len(parent) < 3:
        return
    tags = {child.tag for child in parent}
    if tags != {f"{SVG}use"}:
        return
    for name in INHERITED:
        values = {child.get(name) for child in parent}
        value = values.pop()
        if values or value is None or name in parent.attrib:
            continue
        parent.set(name, value)
        for child in parent:
            del child.attrib[name]


def _short(value: str) -> str:
    return PLAIN_NUMBER.sub(_hundredths, value)


def _hundredths(match: re.Match[str]) -> str:
    text = f"{float(match.group()):.2f}".rstrip("0").rstrip(".")
    return "0" if text == "-0" else text
