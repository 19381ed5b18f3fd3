"""How bands connect along the band path: by the irreps of each of its lines, not by looks.

H is sorted into one block for each irrep of the line's group (`line_blocks`). Within a block levels
do not cross, so that the n-th at one end runs into the n-th at the other, however near two come in
between; levels of different blocks may cross, and where they do next to the filling is found by
signs of their difference on the points of the path, then by regula falsi. Two that cross twice
between neighbouring points are missed.

The operations may hold on the bands alone (disentangled Wannier functions break some of them), and
the blocks are then those of an averaged H. What that changes is measured: the energies of the
blocks beside those of H, and the spread of the bands of H at each crossing. Levels of one kind that
come nearer to each other than twice that error are not said to be told apart.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.invariants.band_reps.levels import corep_labels, names_at
from topovet.invariants.band_reps.path_results import (
    EndLevel,
    LevelConnection,
    LevelCrossing,
    PathConnections,
    PathSegment,
)
from topovet.invariants.irrep_results import LevelIrreps, PointIrreps
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import one_blas_thread
from topovet.spectrum.results import BandPath
from topovet.symmetry.bandreps.double_group import DoubleGroup
from topovet.symmetry.bandreps.line_blocks import LineBlocks, find_line, split_line
from topovet.symmetry.little_group import same_point
from topovet.symmetry.operators import WannierOperator
from topovet.symmetry.spacegroup import name_point_group
from topovet.units import MEV_PER_EV

LEVELS_ASIDE = 2
"""Levels below and above the filling whose connections are listed."""

TOGETHER_EV = 1e-4
"""Levels of two kinds nearer than this are not said to lie one above the other."""

END_SHARE = 0.1
"""Part of a segment at either end where levels that are one at the end point may be near."""

ROOT_STEPS = 30
ROOT_EV = 1e-8
"""Steps of regula falsi, and a difference of levels at which it may stop; ten steps are usual."""


def connect_path(
    group: DoubleGroup,
    operators: Sequence[WannierOperator],
    bloch: BlochSum,
    bands: BandPath,
    irreps: Sequence[PointIrreps],
    filling: int,
) -> PathConnections:
    """Connections and crossings of the levels next to the filling, on each segment of the path.

    Parameters
    ----------
    group
        The operations with time reversal, those that hold on the bands.
    operators
        Its unitary operations on the Wannier functions, in its order.
    bloch
        The Hamiltonian.
    bands
        Its energies along the path.
    irreps
        Levels at the special points, for the names at the ends.
    filling
        Occupied bands, spin counted.

    Raises
    ------
    LineError, CorepresentationError
        The operators make no representation of the group of a line.
    """
    lines = _Lines(group, operators, bloch, bands, irreps, filling)
    ends = zip(bands.label_index[::2], bands.label_index[1::2], strict=True)
    with one_blas_thread():
        return PathConnections(group.n, tuple(lines.segment(a, b) for a, b in ends))


@dataclass(frozen=True, slots=True, eq=False)
class _Lines:
    """Arguments of `connect_path`."""

    group: DoubleGroup
    operators: Sequence[WannierOperator]
    bloch: BlochSum
    bands: BandPath
    irreps: Sequence[PointIrreps]
    filling: int

    def segment(self, first: int, last: int) -> PathSegment:
        """The piece of the path between two of its points."""
        bands = self.bands
        line = find_line(self.group, bands.k_frac[first], bands.k_frac[last])
        blocks = split_line(self.group, line, self.operators)
        curves = _curves(blocks, self.bloch, last - first + 1, self.filling)
        labels = corep_labels(line.table, names_at(line.table, ""))
        ends = [
            _end_levels(curves, i, bands.k_frac[k], self.irreps)
            for i, k in ((0, first), (-1, last))
        ]
        sampled = _error(curves, bands.energies_ev[first : last + 1], ends)
        crossings = _crossings(curves, labels, max(TOGETHER_EV, 2 * sampled))
        # a crossing that H opens lies between the points of the path, off by half of the opening
        error = max([sampled, *(c.splitting_mev / MEV_PER_EV / 2 for c in crossings)])
        name = dict(zip(bands.label_index, bands.labels, strict=True))
        (x, y, z), (u, v, w) = line.k_start.tolist(), line.k_end.tolist()
        return PathSegment(
            start=_greek(name[first]),
            end=_greek(name[last]),
            k_start=(x, y, z),
            k_end=(u, v, w),
            symmetry=name_point_group(line.table.group.rotations),
            kinds=tuple(labels[i] for i in sorted(set(curves.kinds.tolist()))),
            error_mev=MEV_PER_EV * error,
            connections=_connections(curves, labels, ends, error),
            crossings=crossings,
        )


@dataclass(frozen=True, slots=True, eq=False)
class _Curves:
    """Levels along one segment as curves.

    Attributes
    ----------
    blocks, bloch
        The line and the Hamiltonian.
    s
        (n_k,) shares of the way.
    energies
        (n_k, n_curve) eV.
    kinds
        (n_curve,) corepresentation of each; those of one kind follow each other, rising.
    dimensions
        (n_curve,) bands in each.
    filling
        Occupied bands.
    """

    blocks: LineBlocks
    bloch: BlochSum
    s: FloatArray
    energies: FloatArray
    kinds: IntArray
    dimensions: IntArray
    filling: int

    def at(self, s: FloatArray) -> FloatArray:
        """(n, n_curve) eV at other points."""
        return np.concatenate(self.blocks.energies(self.bloch, s), axis=1)

    def first_bands(self, energies: FloatArray) -> IntArray:
        """(n, n_curve) number of bands below each curve."""
        order = np.argsort(energies, axis=1, kind="stable")
        sizes = self.dimensions[order]
        below = np.cumsum(sizes, axis=1) - sizes
        found = np.empty_like(below)
        np.put_along_axis(found, order, below, axis=1)
        return found

    def all_bands(self) -> FloatArray:
        """(n_k, n_orb) eV, every curve as often as it has bands."""
        return np.sort(np.repeat(self.energies, self.dimensions, axis=1), axis=1)


def _curves(blocks: LineBlocks, bloch: BlochSum, n_k: int, filling: int) -> _Curves:
    s = np.linspace(0.0, 1.0, n_k)
    counts = blocks.n_levels
    dimensions = [c.dimension for c in blocks.line.table.coreps]
    return _Curves(
        blocks=blocks,
        bloch=bloch,
        s=s,
        energies=np.concatenate(blocks.energies(bloch, s), axis=1),
        kinds=np.repeat(np.arange(len(counts)), counts),
        dimensions=np.repeat(dimensions, counts),
        filling=filling,
    )


def _greek(name: str) -> str:
    return "Γ" if name == "G" else name


def _end_levels(
    curves: _Curves, end: int, k: FloatArray, irreps: Sequence[PointIrreps]
) -> list[EndLevel]:
    """The level of an end point that each curve belongs to there."""
    point = next((p for p in irreps if any(same_point(k, arm) for arm in p.star)), None)
    energies = curves.energies[end]
    firsts = curves.first_bands(energies[None])[0]
    found = []
    for energy, band, n in zip(
        energies.tolist(), firsts.tolist(), curves.dimensions.tolist(), strict=True
    ):
        level = None if point is None else _level_with(point.levels, band)
        found.append(
            EndLevel("", band, n, energy)
            if level is None
            else EndLevel(level.label, level.first_band, level.n_bands, level.energy_ev)
        )
    return found


def _level_with(levels: Sequence[LevelIrreps], band: int) -> LevelIrreps | None:
    return next((x for x in levels if x.first_band <= band < x.first_band + x.n_bands), None)


def _near_filling(levels: Sequence[EndLevel], filling: int) -> BoolArray:
    """(n_curve,) whose level is among those next to the filling, or lies across it."""
    starts = sorted({x.first_band for x in levels})
    below = [b for b in starts if b < filling][-LEVELS_ASIDE:]
    above = [b for b in starts if b >= filling][:LEVELS_ASIDE]
    return np.array([x.first_band in (*below, *above) for x in levels])


def _error(curves: _Curves, energies_ev: FloatArray, ends: Sequence[Sequence[EndLevel]]) -> float:
    """Largest difference between blocks and H among the bands next to the filling, eV."""
    shown = [
        x
        for levels in ends
        for x in itertools.compress(levels, _near_filling(levels, curves.filling))
    ]
    bands = slice(min(x.first_band for x in shown), max(x.first_band + x.n_bands for x in shown))
    return float(np.abs(curves.all_bands() - energies_ev)[:, bands].max())


def _connections(
    curves: _Curves, labels: Sequence[str], ends: Sequence[Sequence[EndLevel]], error: float
) -> tuple[LevelConnection, ...]:
    """The curves next to the filling at either end, from the lowest at the start on."""
    near = np.any([_near_filling(levels, curves.filling) for levels in ends], axis=0)
    found = []
    for i in np.flatnonzero(near).tolist():
        approach = _approach(curves, ends, i)
        found.append(
            LevelConnection(
                kind=labels[curves.kinds[i]],
                n_bands=int(curves.dimensions[i]),
                start=ends[0][i],
                end=ends[1][i],
                approach_mev=None if approach is None else MEV_PER_EV * approach,
                settled=approach is None or approach > 2 * error,
            )
        )
    return tuple(sorted(found, key=lambda c: (c.start.first_band, c.end.first_band, c.kind)))


def _approach(curves: _Curves, ends: Sequence[Sequence[EndLevel]], i: int) -> float | None:
    """Least distance to the next curve of the same kind, in eV.

    Near an end point where the two are one level they are of course close.
    """
    distances = []
    for j in (i - 1, i + 1):
        if not 0 <= j < len(curves.kinds) or curves.kinds[j] != curves.kinds[i]:
            continue
        joined = [levels[i] == levels[j] for levels in ends]
        inside = (~np.array(joined[0]) | (curves.s > END_SHARE)) & (
            ~np.array(joined[1]) | (curves.s < 1 - END_SHARE)
        )
        apart = np.abs(curves.energies[:, i] - curves.energies[:, j])
        distances.append(float(apart[inside].min()))
    return min(distances, default=None)


def _crossings(
    curves: _Curves, labels: Sequence[str], together_ev: float
) -> tuple[LevelCrossing, ...]:
    """Where two curves of different kinds meet next to the filling."""
    pairs = _pairs(curves)
    if not len(pairs):
        return ()
    difference = curves.energies[:, pairs[:, 0]] - curves.energies[:, pairs[:, 1]]
    which, left, right = _sign_changes(difference, together_ev)
    if not len(which):
        return ()
    a, b = pairs[which].T
    s = _roots(curves, a, b, curves.s[left], curves.s[right])
    lower = np.where(difference[left, which] < 0, a, b)
    k, energies = curves.blocks.line.at(s), curves.at(s)
    exact = np.linalg.eigvalsh(curves.bloch.at(k))
    found = []
    for n in np.argsort(s, kind="stable").tolist():
        meeting = [a[n], b[n]]
        energy = float(energies[n, meeting].mean())
        others = np.delete(np.arange(len(curves.kinds)), meeting)
        first = int(curves.dimensions[others][energies[n, others] < energy].sum())
        size = int(curves.dimensions[meeting].sum())
        place = _place(first, size, curves.filling)
        if place is None:
            continue
        upper = b[n] if lower[n] == a[n] else a[n]
        x, y, z = k[n].tolist()
        found.append(
            LevelCrossing(
                k_frac=(x, y, z),
                energy_ev=energy,
                first_band=first,
                n_bands=size,
                kinds=(labels[curves.kinds[lower[n]]], labels[curves.kinds[upper]]),
                place=place,
                splitting_mev=MEV_PER_EV * float(exact[n, first + size - 1] - exact[n, first]),
            )
        )
    return tuple(found)


def _place(first: int, size: int, filling: int) -> str | None:
    """Where the bands of a crossing lie; None where they are not next to the filling."""
    if first < filling < first + size:
        return "across"
    return {first + size: "filled", first: "empty"}.get(filling)


def _pairs(curves: _Curves) -> IntArray:
    """(n_pair, 2) curves of different kinds that come next to the filling somewhere."""
    firsts = curves.first_bands(curves.energies)
    order = np.argsort(firsts, axis=1)
    ends = np.take_along_axis(firsts + curves.dimensions, order, axis=1)
    filled = (ends <= curves.filling).sum(axis=1)
    aside = np.arange(-LEVELS_ASIDE, LEVELS_ASIDE + 1)
    ranks = np.clip(filled[:, None] + aside, 0, order.shape[1] - 1)
    near = np.unique(np.take_along_axis(order, ranks, axis=1))
    kinds = curves.kinds
    found = [(i, j) for i, j in itertools.combinations(near.tolist(), 2) if kinds[i] != kinds[j]]
    return np.array(found, dtype=np.int64).reshape(-1, 2)


def _sign_changes(
    difference: FloatArray, together_ev: float
) -> tuple[IntArray, IntArray, IntArray]:
    """Columns whose sign changes, and the rows before and after.

    Values nearer to zero than `together_ev` have no sign: two levels that are one at an end point,
    or all along, do not cross there.
    """
    signs = np.where(np.abs(difference) > together_ev, np.sign(difference), 0.0)
    rows = np.arange(len(signs))[:, None]
    last = np.maximum.accumulate(np.where(signs != 0, rows, -1), axis=0)
    before = np.where(
        last[:-1] >= 0, np.take_along_axis(signs, np.maximum(last[:-1], 0), axis=0), 0
    )
    right, which = np.nonzero(before * signs[1:] < 0)
    return which, last[right, which], right + 1


def _roots(
    curves: _Curves, a: IntArray, b: IntArray, left: FloatArray, right: FloatArray
) -> FloatArray:
    """(n,) s where curves a and b are equal, by regula falsi (Illinois) between left and right."""
    n = np.arange(len(a))

    def difference(s: FloatArray) -> FloatArray:
        energies = curves.at(s)
        return np.asarray(energies[n, a] - energies[n, b])

    f_left, f_right = difference(left), difference(right)
    s = left
    for _ in range(ROOT_STEPS):
        rise = f_right - f_left
        # one that was met exactly has 0 on both sides, and stays
        s = np.divide(left * f_right - right * f_left, rise, out=right.copy(), where=rise != 0)
        f = difference(s)
        if np.abs(f).max() < ROOT_EV:
            break
        same = f * f_right > 0
        # the side that stays counts half: it moves the next point across the root
        f_left, f_right = np.where(same, f_left / 2, f_right), f
        left, right = np.where(same, left, right), s
    return s
