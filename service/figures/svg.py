"""A drawing as SVG to stand inside a page.

reportlab's SVG is meant to be a file of its own. Inside a page it needs: no repeated ids, a title and a
description that a screen reader finds, and no `style` attribute, since a strict content security policy
ignores those.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from typing import Any
from xml.dom.minidom import Document, Element

from reportlab.graphics import renderSVG
from reportlab.graphics.shapes import Drawing

from service.figures import fonts

PAGE_FAMILY = f"'{fonts.FAMILY}', Verdana, sans-serif"
"""As on paper where the page offers the typeface; else one of almost the same widths."""

_KEPT = {
    "stroke",
    "stroke-width",
    "stroke-opacity",
    "stroke-dasharray",
    "fill",
    "fill-opacity",
    "font-size",
}


def to_svg(drawing: Drawing, *, title: str = "", description: str = "") -> str:
    """The drawing as one `<svg>` element. `title` and `description` are what a screen reader says of it."""
    fonts.register()
    canvas = renderSVG.SVGCanvas((drawing.width, drawing.height), useClip=True)
    renderSVG.draw(drawing, canvas)
    root: Element = canvas.doc.documentElement
    for element in _elements(root):
        _mend_style(element)
        _drop(element, "id")
    _mend_root(canvas.doc, root, title, description)
    return root.toxml()


def _mend_root(document: Document, root: Element, title: str, description: str) -> None:
    for name in ("version", "preserveAspectRatio", "xmlns:xlink", "fill-rule"):
        _drop(root, name)
    for group in root.getElementsByTagName("g"):
        _drop(group, "clip")
        if not group.getAttribute("transform"):
            _drop(group, "transform")
    root.setAttribute("role", "img")
    # the same drawing with the same words is the same element; any other one has another name
    mark = hashlib.sha256((root.toxml() + title + description).encode()).hexdigest()[:12]
    named = {"title": title, "desc": description}
    for tag, words in named.items():
        for element in root.getElementsByTagName(tag):
            element.replaceChild(document.createTextNode(words), element.childNodes[0])
            element.setAttribute("id", f"figure-{mark}-{tag}")
    root.setAttribute("aria-labelledby", f"figure-{mark}-title")
    root.setAttribute("aria-describedby", f"figure-{mark}-desc")


def _mend_style(element: Element) -> None:
    style = element.getAttribute("style")
    _drop(element, "style")
    if element.tagName == "polyline":
        # reportlab writes a line's joins as its caps, which fills the gaps of fine dashes
        element.setAttribute("stroke-linejoin", "round")
    for declaration in style.split(";"):
        name, _, value = (part.strip() for part in declaration.partition(":"))
        if name in _KEPT:
            element.setAttribute(name, value.replace("None", "none"))  # reportlab writes Python's None
        elif name == "font-family":
            element.setAttribute("font-family", PAGE_FAMILY)
            if value == fonts.BOLD:
                element.setAttribute("font-weight", "bold")


def _elements(node: Any) -> Iterator[Element]:
    for child in node.childNodes:
        if child.nodeType == child.ELEMENT_NODE:
            yield child
            yield from _elements(child)


def _drop(element: Element, name: str) -> None:
    if element.hasAttribute(name):
        element.removeAttribute(name)
