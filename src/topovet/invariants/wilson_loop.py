"""Wilson loops: hybrid Wannier charge centres of the occupied states along closed lines of k.

On a line k_0, k_1, …, k_n = k_0 + G the overlaps M_i = <u(k_i)|u(k_i+1)> of the occupied
cell-periodic states are replaced by their unitary parts U_i, and the eigenvalues of the product
U_0 U_1 … U_n-1 are exp(-2 pi i x): x are the hybrid Wannier charge centres along the line, in
units of the lattice period and modulo 1 (Soluyanov and Vanderbilt, Phys. Rev. B 83, 235401 (2011),
doi:10.1103/PhysRevB.83.235401; Yu, Qi, Bernevig, Fang, Dai, Phys. Rev. B 84, 075119 (2011),
doi:10.1103/PhysRevB.84.075119). A rotation of the states at any k leaves the eigenvalues alone, so
no gauge is ever fixed.

In the periodic gauge, H(k + G) = H(k), the line closes with u(k_0) itself and every orbital counts
as sitting at the origin of its home cell. In the atomic gauge the states are
exp(-2 pi i k.tau) u(k) and the line closes with exp(-2 pi i G.tau) times its first states: then x
are the true centres. Counts of how centres flow are the same for both.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray

SERIES_LOSS = 0.95
"""Links that lose more than this go through an SVD; below it the series for the unitary part
converges in two to four steps."""

SERIES = (5 / 16, 3 / 8, 1 / 2, 1.0)
"""(1 - g)^-1/2 to third order, highest power first."""

SERIES_ENDS = 0.01
"""|1 - M†M| after which one more step leaves less than 1e-8 of it: it turns G into 0.55 G^4."""


@dataclass(frozen=True, slots=True, eq=False)
class LinePoints:
    """Occupied states on a batch of closed lines, each with points of its own.

    Attributes
    ----------
    counts
        (n_lines,) points on each line.
    along
        (n_points,) coordinate in [0, 1), ascending within each line, lines one after the other.
    states
        (n_points, n_orb, n_occ) orthonormal occupied states.
    """

    counts: IntArray
    along: FloatArray
    states: ComplexArray

    @property
    def line(self) -> IntArray:
        """(n_points,) index of the line that each point lies on."""
        return np.repeat(np.arange(len(self.counts)), self.counts)

    @property
    def start(self) -> IntArray:
        """(n_lines,) index of the first point of each line."""
        return np.asarray(np.cumsum(self.counts) - self.counts)

    @property
    def following(self) -> IntArray:
        """(n_points,) index of the next point on the same closed line."""
        following = np.arange(1, len(self.along) + 1)
        following[self.start + self.counts - 1] = self.start
        return following

    @property
    def place(self) -> IntArray:
        """(n_points,) position of each point on its line, from 0."""
        return np.asarray(np.arange(len(self.along)) - np.repeat(self.start, self.counts))

    def kept(self, keep: BoolArray) -> LinePoints:
        """The points where keep is set; lines that lose all of theirs disappear."""
        if keep.all():
            return self
        counts = np.bincount(self.line[keep], minlength=len(self.counts))
        return LinePoints(counts[counts > 0], self.along[keep], self.states[keep])


@dataclass(frozen=True, slots=True, eq=False)
class Links:
    """Overlaps between neighbouring k, and how far from unitary they are.

    Attributes
    ----------
    overlaps
        (n, n_occ, n_occ) M.
    defects
        (n, n_occ, n_occ) 1 - M†M.
    losses
        (n,) Frobenius norms of the defects: they bound 1 - s^2 of every singular value s of M.
    """

    overlaps: ComplexArray
    defects: ComplexArray
    losses: FloatArray

    def kept(self, keep: BoolArray) -> Links:
        """The links where keep is set."""
        if keep.all():
            return self
        return Links(self.overlaps[keep], self.defects[keep], self.losses[keep])


def link_overlaps(left: ComplexArray, right: ComplexArray) -> ComplexArray:
    """M = <left|right>, (n, n_occ, n_occ), between states (n, n_orb, n_occ) of pairs of k."""
    return np.asarray(left.conj().swapaxes(1, 2) @ right)


def measure_links(left: ComplexArray, right: ComplexArray) -> Links:
    """Links <left|right> between states (n, n_orb, n_occ) of pairs of k."""
    overlaps = link_overlaps(left, right)
    defects = defects_of(overlaps)
    return Links(overlaps, defects, np.linalg.norm(defects, axis=(1, 2)))


def loop_links(points: LinePoints, closing: ComplexArray | None = None) -> Links:
    """Links from each point to the next on its line, the last one closing the line.

    Parameters
    ----------
    points
        The lines.
    closing
        (n_orb,) factors exp(-2 pi i G.tau) that take the first states of a line to k_0 + G; None
        is 1, the periodic gauge.
    """
    right = points.states[points.following]
    if closing is not None:
        right[points.start + points.counts - 1] *= closing[:, None]
    return measure_links(points.states, right)


def hybrid_wannier_centres(links: Links, counts: IntArray) -> FloatArray:
    """Hybrid Wannier charge centres (n_lines, n_occ) in [0, 1), ascending on each line.

    Parameters
    ----------
    links
        Links of closed lines, one line after the other.
    counts
        (n_lines,) links of each.
    """
    loops = ordered_products(unitary_part(links), counts)
    centres = (-np.angle(np.linalg.eigvals(loops)) / (2 * np.pi)) % 1.0
    centres[centres == 1.0] = 0.0  # -1e-17 % 1.0
    return np.sort(centres, axis=1)


def unitary_part(links: Links) -> ComplexArray:
    """The unitary U of the polar decomposition M = U (M†M)^1/2 of each link.

    With M = W S V† this is W V†. Links that lose little need no SVD: M (M†M)^-1/2 is taken by the
    binomial series in G = 1 - M†M, repeated until nothing is left of G, at a fraction of the cost.
    """
    far = links.losses > SERIES_LOSS
    if not far.any():
        return _unitary_by_series(links)
    unitary = np.empty_like(links.overlaps)
    w, _, v = np.linalg.svd(links.overlaps[far])
    unitary[far] = w @ v
    if not far.all():
        unitary[~far] = _unitary_by_series(links.kept(~far))
    return unitary


def ordered_products(matrices: ComplexArray, counts: IntArray) -> ComplexArray:
    """Product of each run of consecutive matrices, in order: (n_runs, m, m).

    Neighbours are multiplied pairwise, so that all runs are worked on together and the number of
    steps is the logarithm of the longest run.

    Parameters
    ----------
    matrices
        (n, m, m), the runs one after the other.
    counts
        (n_runs,) length of each run, at least 1.
    """
    counts = np.asarray(counts)
    while counts.max() > 1:
        place = np.arange(len(matrices)) - np.repeat(np.cumsum(counts) - counts, counts)
        left = np.flatnonzero(place % 2 == 0)
        paired = place[left] + 1 < np.repeat(counts, counts)[left]
        halved = matrices[left]
        halved[paired] = halved[paired] @ matrices[left[paired] + 1]
        matrices, counts = halved, (counts + 1) // 2
    return matrices


def worst_singular_values(links: Links, counts: IntArray) -> FloatArray:
    """Smallest singular value of the link that loses most on each line, (n_lines,).

    1 on a dense line. No singular value on the line is below sqrt(1 - loss) of that link.
    """
    starts = np.cumsum(counts) - counts
    by_loss = np.lexsort((-links.losses, np.repeat(np.arange(len(counts)), counts)))
    worst = links.overlaps[by_loss[starts]]
    return np.asarray(np.linalg.svd(worst, compute_uv=False)[:, -1])


def defects_of(overlaps: ComplexArray) -> ComplexArray:
    """1 - M†M of each overlap (n, n_occ, n_occ)."""
    defects = overlaps.conj().swapaxes(1, 2) @ overlaps
    np.negative(defects, out=defects)
    _add_to_diagonal(defects, 1.0)
    return np.asarray(defects)


def _add_to_diagonal(matrices: ComplexArray, value: float) -> None:
    matrices.reshape(len(matrices), -1)[:, :: matrices.shape[1] + 1] += value


def _unitary_by_series(links: Links) -> ComplexArray:
    """M (1 - G)^-1/2, repeated with what is left of G = 1 - M†M until that is nothing."""
    m, g, loss = links.overlaps, links.defects, float(links.losses.max(initial=0.0))
    while True:
        series = SERIES[0] * g
        for coefficient in SERIES[1:-1]:
            _add_to_diagonal(series, coefficient)
            series = series @ g
        _add_to_diagonal(series, SERIES[-1])
        m = m @ series
        if loss < SERIES_ENDS:
            return m
        g = defects_of(m)
        loss = float(np.abs(g).sum(axis=2).max())
