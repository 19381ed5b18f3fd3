"""From a matplotlib figure to clean, deterministic SVG that can stand alone or inside a page.

Matplotlib is loaded by the functions here and nowhere else, so that nothing else pays for it.
"""

from __future__ import annotations

import io
import re
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, Literal
from xml.etree import ElementTree

from topovet.notation import printable
from topovet.report.figures.palette import INK, MUTED, RULE, WHITE

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

FONTS = "'Helvetica Neue', Helvetica, Arial, 'Liberation Sans', 'DejaVu Sans', sans-serif"
"""Fonts of text in figures and tables; laid out with the wider font that matplotlib brings."""

SVG_NAMESPACE = "http://www.w3.org/2000/svg"

_STYLE: Any = {
    "svg.fonttype": "none",
    "path.simplify": True,
    "path.simplify_threshold": 0.15,
    "text.parse_math": False,
    "font.family": "DejaVu Sans",
    "font.size": 9.5,
    "axes.edgecolor": MUTED,
    "axes.linewidth": 0.8,
    "axes.labelcolor": INK,
    "axes.labelsize": 9.5,
    "text.color": INK,
    "xtick.color": MUTED,
    "ytick.color": MUTED,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "ytick.direction": "out",
    "xtick.direction": "out",
    "axes.facecolor": WHITE,
    "figure.facecolor": WHITE,
    "grid.color": RULE,
    "axes.unicode_minus": True,
}


@contextmanager
def drawing(name: str) -> Iterator[None]:
    """Matplotlib's own defaults plus our style, whatever the user's settings file says."""
    import matplotlib

    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(_STYLE)
        matplotlib.rcParams["svg.hashsalt"] = name
        yield


def new_figure(
    width_in: float, height_in: float, *, layout: Literal["constrained"] | None = "constrained"
) -> Figure:
    """An empty figure without any global state; call inside `drawing`."""
    from matplotlib.figure import Figure

    return Figure(figsize=(width_in, height_in), layout=layout)


def bare(axes: Axes, *, keep: tuple[str, ...] = ("left", "bottom")) -> None:
    """Leave only the named sides of the frame."""
    for side, spine in axes.spines.items():
        spine.set_visible(side in keep)


def to_svg(figure: Figure, name: str, *, title: str, description: str) -> str:
    """The figure as SVG text; call inside `drawing`.

    Parameters
    ----------
    figure
        Finished figure.
    name
        Prefix of all ids, so that several figures can share a page.
    title, description
        Short name and full wording for readers who do not see the figure.
    """
    buffer = io.StringIO()
    nothing = dict.fromkeys(("Date", "Creator", "Format", "Type"))
    with warnings.catch_warnings():
        # text stays text here, so a glyph that the layout font lacks is no loss
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        figure.savefig(buffer, format="svg", metadata=nothing)
    root = ElementTree.fromstring(buffer.getvalue())
    _simplify(root, name)
    return serialised(root, name, title=title, description=description)


def serialised(root: ElementTree.Element, name: str, *, title: str, description: str) -> str:
    """An SVG tree without namespaces as text, with its accessible name and description."""
    root.set("xmlns", SVG_NAMESPACE)
    root.set("role", "img")
    root.set("aria-labelledby", f"{name}-title {name}-desc")
    for position, (tag, text) in enumerate((("title", title), ("desc", description))):
        element = ElementTree.Element(tag, {"id": f"{name}-{tag}"})
        element.text = printable(text)
        root.insert(position, element)
    return ElementTree.tostring(root, encoding="unicode") + "\n"


def _simplify(root: ElementTree.Element, name: str) -> None:
    """Drop namespaces, metadata, page-wide style and idle ids; shorten the numbers."""
    for parent in root.iter():
        for child in list(parent):
            if child.tag.endswith(("}metadata", "}style")):
                parent.remove(child)
    used = set(re.findall(r'(?:url\(#|href="#)([^)"]+)', _raw(root)))
    for element in root.iter():
        element.tag = element.tag.rpartition("}")[2]
        element.attrib = dict(_tidy_attributes(element.attrib, used, name))
    root.set("stroke-linejoin", "round")
    root.set("font-family", FONTS)
    root.attrib.pop("version", None)


def _raw(root: ElementTree.Element) -> str:
    return ElementTree.tostring(root, encoding="unicode")


def _tidy_attributes(
    attributes: dict[str, str], used: set[str], name: str
) -> Iterator[tuple[str, str]]:
    for key, value in attributes.items():
        key = key.rpartition("}")[2]
        if key == "id":
            if value in used:
                yield key, f"{name}-{value}"
        elif key == "href":
            yield key, value.replace("#", f"#{name}-")
        elif key == "style":
            yield key, _tidy_style(value).replace("url(#", f"url(#{name}-")
        elif "scale(" in value or key == "viewBox":
            yield key, value
        else:
            shorter = re.sub(r"-?\d+\.\d{3,}", lambda m: f"{float(m[0]):.2f}", value)
            yield key, shorter.replace("url(#", f"url(#{name}-")


def _tidy_style(style: str) -> str:
    """Replace the font list of matplotlib's `font` shorthand by size and weight alone."""

    def font(match: re.Match[str]) -> str:
        weight = f"font-weight: {match[1]}; " if match[1] else ""
        return f"{weight}font-size: {match[2]}"

    return re.sub(r"font: (?:(\w+) )?([\d.]+px) [^;]*", font, style)
