"""The one way by which SVG gets into a page unescaped: read, checked against a list, passed on.

Figures are made by this package, but they carry strings of a case. A figure with an element, an
attribute or a reference that no figure of ours needs is refused rather than cleaned.
"""

from __future__ import annotations

import re
from xml.etree import ElementTree

from markupsafe import Markup

_ELEMENTS = frozenset(
    (
        *("svg", "g", "defs", "clipPath", "use", "title", "desc", "path", "rect", "circle"),
        *("line", "polyline", "polygon", "text", "tspan"),
    )
)
_ATTRIBUTES = frozenset(
    (
        *("id", "d", "x", "y", "width", "height", "rx", "ry", "cx", "cy", "r", "points"),
        *("x1", "y1", "x2", "y2", "viewBox", "role", "aria-labelledby", "style", "transform"),
        *("clip-path", "href", "fill", "opacity", "stroke", "stroke-width", "stroke-dasharray"),
        *("stroke-linejoin", "stroke-linecap", "font-family", "font-size", "font-weight"),
        *("font-style", "text-anchor"),
    )
)
_NAMESPACE = "{http://www.w3.org/2000/svg}"


class UnsafeSvgError(ValueError):
    """A figure holds something that has no business in a page: a fault of the program."""


def inline_svg(name: str, svg: str) -> Markup:
    """The figure as markup for a page.

    Raises
    ------
    UnsafeSvgError
        It is not well-formed, or holds an element, attribute or reference that is not on the list.
    """
    if "<!" in svg or "<?" in svg:
        raise UnsafeSvgError(f"figure {name!r} holds a declaration or a processing instruction")
    try:
        root = ElementTree.fromstring(svg)
    except ElementTree.ParseError as error:
        raise UnsafeSvgError(f"figure {name!r} is not well-formed: {error}") from error
    for element in root.iter():
        _check(name, element)
    return Markup(svg)


def _check(name: str, element: ElementTree.Element) -> None:
    tag = element.tag.removeprefix(_NAMESPACE)
    if tag not in _ELEMENTS:
        raise UnsafeSvgError(f"figure {name!r} holds the element {tag!r}")
    for key, value in element.attrib.items():
        if key not in _ATTRIBUTES:
            raise UnsafeSvgError(f"figure {name!r} holds the attribute {key!r}")
        outside = key == "href" and not re.fullmatch(r"#[\w-]+", value)
        if outside or re.search(r"url\((?!#[\w-]+\))|[@\\]|/\*", value):
            raise UnsafeSvgError(f"figure {name!r} refers to {value!r}")
