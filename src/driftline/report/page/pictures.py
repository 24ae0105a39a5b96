"""The figures as inline SVG: made small, given names of their own, and described."""

from __future__ import annotations

import base64
import re
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING
from xml.etree import ElementTree

from driftline.report.page.elements import text

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.figures.base import Drawing

SVG, LINK = "http://www.w3.org/2000/svg", "http://www.w3.org/1999/xlink"
#: A figure of more characters, such as one of many thousand points, goes in as a bitmap.
LARGEST_SVG = 500_000
SCREEN = 110  # CSS pixels for an inch of paper: letters of 8 points come out at 12 pixels
LEAST = 72  # pixels an inch below which letters get too small to read; narrower windows scroll the figure
_URL = re.compile(r"url\(#([^)]+)\)")
_DECIMALS = re.compile(r"-?\d+\.\d{3,}")


def figures(analysis: Analysis, folder: Path) -> str:
    """Every figure of the registry that was written into `folder`, with its caption."""
    from driftline.figures.gallery import FIGURES

    found = [_figure(each, analysis, folder) for each in FIGURES if (folder / f"{each.name}.svg").is_file()]
    return "\n".join(['<div class="figures">', *found, "</div>"]) if found else ""


def _figure(figure: Drawing, analysis: Analysis, folder: Path) -> str:
    caption = text(figure.caption(analysis))
    source = (folder / f"{figure.name}.svg").read_bytes()
    drawing = inline(source, f"{figure.name}-")
    width = _inches(source) or figure.width
    bitmap = folder / f"{figure.name}.png"
    if len(drawing) > LARGEST_SVG and bitmap.is_file():
        content = base64.b64encode(bitmap.read_bytes()).decode("ascii")
        drawing = f'<img alt="{caption}" src="data:image/png;base64,{content}">'
    else:
        drawing = drawing.replace("<svg ", f'<svg role="img" aria-label="{caption}" ', 1)
    drawing = re.sub(r"^<(svg|img) ", rf'<\1 style="width:100%;min-width:{LEAST * width:.0f}px" ', drawing)
    scrolls = f'class="picture" role="region" aria-label="Figure: {text(figure.name)}" tabindex="0"'
    size = f"width:{SCREEN * width:.0f}px"
    return f'<figure style="{size}">\n<div {scrolls}>{drawing}</div>\n<figcaption>{caption}</figcaption>\n</figure>'


def _inches(drawing: bytes) -> float | None:
    """Width of an SVG file that gives it in points, as matplotlib does; None for any other."""
    found = re.match(r"([0-9.]+)pt$", ElementTree.fromstring(drawing).get("width", ""))
    return float(found[1]) / 72 if found else None


def inline(drawing: bytes, prefix: str) -> str:
    """An SVG file as an element for HTML, its ids led by `prefix` so that no two figures share one.

    Left out are the prologue, comments and metadata, ids that nothing refers to, and the style element, which would
    hold for the whole page; its one rule becomes attributes of the root. Paths keep two decimals, a hundredth of a
    point.
    """
    ElementTree.register_namespace("", SVG)
    root = ElementTree.fromstring(drawing)
    for parent in list(root.iter()):
        for child in list(parent):
            if child.tag in (f"{{{SVG}}}metadata", f"{{{SVG}}}style"):
                parent.remove(child)
    for name in ("width", "height", "version"):
        root.attrib.pop(name, None)
    root.attrib.update({"stroke-linejoin": "round", "stroke-linecap": "butt"})
    used = _references(root)
    for element in root.iter():
        _rename(element, used, lambda name: prefix + name)
        if "d" in element.attrib:
            element.set("d", _short(element.attrib["d"]))
    return ElementTree.tostring(root, encoding="unicode")


def _references(root: ElementTree.Element) -> set[str]:
    found = set()
    for element in root.iter():
        found.add(element.get(f"{{{LINK}}}href", "").removeprefix("#"))
        for value in element.attrib.values():
            found.update(_URL.findall(value))
    return found


def _rename(element: ElementTree.Element, used: set[str], renamed: Callable[[str], str]) -> None:
    link = element.attrib.pop(f"{{{LINK}}}href", None)
    if link is not None:  # plain href, which browsers know since SVG 2
        element.set("href", f"#{renamed(link[1:])}" if link.startswith("#") else link)
    name = element.attrib.pop("id", None)
    if name in used:
        element.set("id", renamed(str(name)))
    for key, value in element.attrib.items():
        if "url(#" in value:
            element.set(key, _URL.sub(lambda match: f"url(#{renamed(match[1])})", value))


def _short(path: str) -> str:
    """A path with two decimals and without line breaks."""
    return " ".join(_DECIMALS.sub(lambda match: f"{float(match[0]):.2f}", path).split())
