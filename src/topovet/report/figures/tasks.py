"""The task graph of a run: what needed what, how each task ended, how long it took."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from xml.etree.ElementTree import Element, SubElement

from topovet.notation import one_line, seconds
from topovet.report.figures import palette
from topovet.report.figures.canvas import FONTS, serialised
from topovet.report.figures.layering import Layout, layered
from topovet.report.material import TaskEntry

_BOX_W, _BOX_H = 168, 42
_STEP_X, _STEP_Y = 188, 78
_MARGIN = 12
_WAYPOINT_SHARE = 0.2
_LONGEST_NAME = 24

_STATES: dict[str, tuple[str, str, str, str]] = {
    "done": ("✓", palette.GOOD, "none", palette.WHITE),
    "cached": ("⟲", palette.INFO, "none", palette.FILLED_TINT),
    "skipped": ("–", palette.MUTED, "5 3", palette.WHITE),
    "not-applicable": ("∅", palette.MUTED, "2 3", palette.WHITE),
    "failed": ("✗", palette.ERROR, "none", palette.WHITE),
}
"""Mark, colour, dashes of the border and fill of each state."""


def tasks_figure(tasks: Sequence[TaskEntry], *, name: str = "tasks") -> str:
    """The task graph as SVG text, from top to bottom.

    Raises
    ------
    ValueError
        The tasks wait for each other.
    """
    entries = {task.name: task for task in tasks}
    layout = layered({task.name: task.needs for task in tasks})
    centres, width = _centres(layout)
    height = 2 * _MARGIN + _BOX_H + _STEP_Y * max(len(layout.rows) - 1, 0)
    root = Element("svg", {"viewBox": f"0 0 {width} {height}", "width": f"{width}"})
    root.set("font-family", FONTS)
    for source, target in layout.edges:
        _draw_edge(root, centres[source], centres[target], into_box=isinstance(target, str))
    for row in layout.rows:
        for item in row:
            if isinstance(item, str):
                _draw_box(root, entries[item], *centres[item])
    counts = {s: sum(t.state == s for t in tasks) for s in _STATES}
    words = ", ".join(f"{n} {state}" for state, n in counts.items() if n)
    return serialised(
        root,
        name,
        title="Task graph",
        description=f"{len(tasks)} tasks: {words}. An arrow leads from a result to its user.",
    )


def _centres(layout: Layout) -> tuple[Mapping[object, tuple[float, float]], int]:
    """Centre of every box and waypoint, and the width of the drawing, px."""
    spans = [
        [_STEP_X if isinstance(i, str) else _STEP_X * _WAYPOINT_SHARE for i in row]
        for row in layout.rows
    ]
    widest = max((sum(span) for span in spans), default=_STEP_X)
    centres: dict[object, tuple[float, float]] = {}
    for number, (row, span) in enumerate(zip(layout.rows, spans, strict=True)):
        x = _MARGIN + (widest - sum(span)) / 2
        for item, share in zip(row, span, strict=True):
            centres[item] = (round(x + share / 2, 1), _MARGIN + _BOX_H / 2 + number * _STEP_Y)
            x += share
    return centres, round(widest + 2 * _MARGIN)


def _draw_edge(
    root: Element, source: tuple[float, float], target: tuple[float, float], *, into_box: bool
) -> None:
    """A curve between two rows; at a waypoint it goes on straight through the row."""
    x0, y0, x1, y1 = source[0], source[1] + _BOX_H / 2, target[0], target[1] - _BOX_H / 2
    bend = 0.5 * (_STEP_Y - _BOX_H)
    path = f"M{x0} {y0}C{x0} {y0 + bend} {x1} {y1 - bend} {x1} {y1}"
    if not into_box:
        path += f"V{y1 + _BOX_H}"
    SubElement(
        root, "path", {"d": path, "fill": "none", "stroke": palette.MUTED, "stroke-width": "1.1"}
    )
    if into_box:
        tip = f"M{x1 - 3.5} {y1 - 6}L{x1} {y1}L{x1 + 3.5} {y1 - 6}Z"
        SubElement(root, "path", {"d": tip, "fill": palette.MUTED})


def _draw_box(root: Element, task: TaskEntry, x: float, y: float) -> None:
    mark, colour, dashes, fill = _STATES[task.state]
    box = SubElement(root, "g")
    SubElement(box, "title").text = one_line(f"{task.name}: {task.about}")
    rect = {
        "x": f"{x - _BOX_W / 2}",
        "y": f"{y - _BOX_H / 2}",
        "width": f"{_BOX_W}",
        "height": f"{_BOX_H}",
        "rx": "3",
        "fill": fill,
        "stroke": colour,
        "stroke-width": "2.2" if task.state == "failed" else "1.2",
        "stroke-dasharray": dashes,
    }
    SubElement(box, "rect", rect)
    shown = one_line(task.name)
    if len(shown) > _LONGEST_NAME:
        shown = shown[: _LONGEST_NAME - 1] + "…"
    bold = {"font-size": "12.5", "font-weight": "600", "fill": palette.INK}
    _text(box, shown, x - _BOX_W / 2 + 10, y - 3, bold)
    time = seconds(task.seconds) if task.state in ("done", "cached", "failed") else ""
    said = f"{mark} {task.state}" + (f", {time}" if task.seconds is not None and time else "")
    _text(box, said, x - _BOX_W / 2 + 10, y + 13, {"font-size": "11", "fill": colour})


def _text(box: Element, text: str, x: float, y: float, style: Mapping[str, str]) -> None:
    element = SubElement(box, "text", {"x": f"{x}", "y": f"{y}", **style})
    element.text = text
