"""Places for the boxes of a task graph: rows by depth, few crossings, always the same result."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

_SWEEPS = 8


@dataclass(frozen=True, slots=True)
class Layout:
    """A layered drawing.

    Attributes
    ----------
    rows
        Names from left to right, the row of tasks without needs first. An edge that crosses a
        row runs through a waypoint there, named (from, to, row).
    edges
        (from, to) pairs of names in neighbouring rows, waypoints included.
    """

    rows: tuple[tuple[object, ...], ...]
    edges: tuple[tuple[object, object], ...]


def layered(needs: Mapping[str, Sequence[str]]) -> Layout:
    """Layout of a graph given by what each task needs; needs outside the graph are ignored.

    Edges that follow from others are left out: a task that needs the model by way of the bands
    is joined to the bands alone.
    """
    direct = {name: [n for n in wanted if n in needs] for name, wanted in needs.items()}
    depth = _depths(direct)
    rows: list[list[object]] = [[] for _ in range(max(depth.values(), default=-1) + 1)]
    for name in direct:
        rows[depth[name]].append(name)
    edges: list[tuple[object, object]] = []
    for source, target in _essential(direct):
        edges += _threaded(source, target, depth, rows)
    _untangle(rows, edges)
    return Layout(tuple(tuple(row) for row in rows), tuple(edges))


def _depths(direct: Mapping[str, Sequence[str]]) -> dict[str, int]:
    depth: dict[str, int] = {}
    waiting = list(direct)
    while waiting:
        ready = [n for n in waiting if all(m in depth for m in direct[n])]
        if not ready:
            raise ValueError(f"the tasks {', '.join(sorted(waiting))} wait for each other")
        for name in ready:
            depth[name] = 1 + max((depth[m] for m in direct[name]), default=-1)
        waiting = [n for n in waiting if n not in depth]
    return depth


def _essential(direct: Mapping[str, Sequence[str]]) -> list[tuple[str, str]]:
    """The (need, task) pairs that no longer chain of needs implies."""
    above: dict[str, set[str]] = {}

    def ancestors(name: str) -> set[str]:
        if name not in above:
            above[name] = set(direct[name]).union(*(ancestors(n) for n in direct[name]))
        return above[name]

    return [
        (need, name)
        for name, wanted in direct.items()
        for need in dict.fromkeys(wanted)
        if not any(need in ancestors(other) for other in wanted if other != need)
    ]


def _threaded(
    source: str, target: str, depth: Mapping[str, int], rows: list[list[object]]
) -> list[tuple[object, object]]:
    """The edge as steps from row to row, with a waypoint in every row it crosses."""
    chain: list[object] = [source]
    for row in range(depth[source] + 1, depth[target]):
        waypoint = (source, target, row)
        rows[row].append(waypoint)
        chain.append(waypoint)
    chain.append(target)
    return list(itertools.pairwise(chain))


def _untangle(rows: list[list[object]], edges: Sequence[tuple[object, object]]) -> None:
    """Order each row by the mean place of its neighbours, downwards and upwards in turn."""
    above: dict[object, list[object]] = {}
    below: dict[object, list[object]] = {}
    for source, target in edges:
        above.setdefault(target, []).append(source)
        below.setdefault(source, []).append(target)
    for sweep in range(_SWEEPS):
        neighbours = above if sweep % 2 == 0 else below
        for row in rows if sweep % 2 == 0 else reversed(rows):
            place = {item: _share(i, row) for row in rows for i, item in enumerate(row)}
            mean = {item: _mean(place, neighbours.get(item, []), item) for item in row}
            row.sort(key=mean.__getitem__)


def _share(index: int, row: Sequence[object]) -> float:
    return (index + 0.5) / len(row)


def _mean(place: Mapping[object, float], around: Sequence[object], item: object) -> float:
    return sum(place[n] for n in around) / len(around) if around else place[item]
