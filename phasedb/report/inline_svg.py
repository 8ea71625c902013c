"""A drawn figure as an SVG element for a page: no dates, its own ids, handles for the page's script."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Final
from xml.etree import ElementTree

from phasedb.report.drawing import figure_bytes

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_SVG: Final = "http://www.w3.org/2000/svg"
_XLINK: Final = "http://www.w3.org/1999/xlink"
_HANDLE: Final = re.compile(r"(line|phase)-(\w+)-\w+")
_DECIMALS: Final = re.compile(r"(\d+\.\d\d)\d+")
_REACH: Final = "14"  # width of the invisible strip that a pointer may hit, in points


def inline_svg(figure: Figure, prefix: str, title: str) -> str:
    """Return the figure as an ``<svg>`` element.

    Parameters
    ----------
    figure : Figure
        Its artists' ids (``line-3-stick``, ``phase-A-axis``) become ``data-line="3"`` and ``data-phase="A"``.
    prefix : str
        Put before every id, so that several figures can share a page.
    title : str
        What a screen reader says.
    """
    for patch in (figure.patch, *(axes.patch for axes in figure.axes)):
        patch.set_visible(False)  # the page's own paper shows through
    ElementTree.register_namespace("", _SVG)
    ElementTree.register_namespace("xlink", _XLINK)
    root = ElementTree.fromstring(figure_bytes(figure, "svg"))  # noqa: S314 (our own drawing, not input)
    for tag in ("metadata", "style"):
        for parent in root.iter():
            for child in parent.findall(f"{{{_SVG}}}{tag}"):
                parent.remove(child)
    for element in root.iter():
        _rename(element, prefix)
    for key in ("width", "height"):
        root.attrib.pop(key, None)
    root.set("role", "img")
    root.set("aria-label", title)
    return ElementTree.tostring(root, encoding="unicode")


def _rename(element: ElementTree.Element, prefix: str) -> None:
    own = element.get("id")
    if own is not None:
        handle = _HANDLE.fullmatch(own)
        if handle is None:
            element.set("id", f"{prefix}-{own}")
        else:
            del element.attrib["id"]
            element.set(f"data-{handle[1]}", handle[2])
            element.set("class", "handle")
            if own.endswith("-stick"):
                _widen(element)
    if "d" in element.attrib:  # a hundredth of a point is enough, and halves the page
        element.set("d", " ".join(_DECIMALS.sub(r"\1", element.attrib["d"]).split()))
    for key, value in element.attrib.items():
        if key == f"{{{_XLINK}}}href" and value.startswith("#"):
            element.set(key, f"#{prefix}-{value[1:]}")
        elif "url(#" in value:
            element.set(key, value.replace("url(#", f"url(#{prefix}-"))


def _widen(group: ElementTree.Element) -> None:
    """Lay an invisible wide copy over a thin line, so that it can be hit with a finger."""
    path = group.find(f"{{{_SVG}}}path")
    if path is not None:
        reach = ElementTree.SubElement(group, f"{{{_SVG}}}path", {"d": path.get("d", ""), "class": "reach"})
        reach.set("style", f"fill: none; stroke: #000; stroke-opacity: 0; stroke-width: {_REACH}")
