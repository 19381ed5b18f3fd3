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

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray, Scalar

SERIES_LOSS = 0.95
"""Links that lose more than this go through an SVD; below it the series for the unitary part
converges in two to four steps."""

SERIES = (1.0, 1 / 2, 3 / 8, 5 / 16, 35 / 128)
"""(1 - g)^-1/2 to fourth order, lowest power first; of a g between 0 and 1 it leaves |1 - M†M| of
g^5 or less."""

NEAR_LOSS = 0.36
NEAR = (1.00000759, 0.49895231, 0.39746628, 0.15104095, 0.70251447)
"""The fourth-order polynomial through (1 - g)^-1/2 at the five Chebyshev points of [0, 0.36], where
it leaves |1 - M†M| below 2e-5; one step of first order then leaves less than 1e-9."""

BRANCH = np.exp(2j * np.pi * (np.sqrt(5) - 1) / 2)
"""Where the circle of eigenvalues is cut open: far from the fractions at which symmetry puts
centres."""

NEAR_BRANCH = 1e6
"""Cotangents up to this leave ten good digits of all phases."""


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
    start
        (n_lines,) index of the first point of each line.
    line
        (n_points,) index of the line that each point lies on.
    """

    counts: IntArray
    along: FloatArray
    states: ComplexArray
    start: IntArray = field(init=False)
    line: IntArray = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "start", np.cumsum(self.counts) - self.counts)
        object.__setattr__(self, "line", np.repeat(np.arange(len(self.counts)), self.counts))

    @property
    def following(self) -> IntArray:
        """(n_points,) index of the next point on the same closed line."""
        following = np.arange(1, len(self.along) + 1)
        following[self.start + self.counts - 1] = self.start
        return following

    @property
    def place(self) -> IntArray:
        """(n_points,) position of each point on its line, from 0."""
        return np.asarray(np.arange(len(self.along)) - self.start[self.line])

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


def loop_links(
    points: LinePoints, closing: ComplexArray | None = None, some: BoolArray | None = None
) -> Links:
    """Links from each point to the next on its line, the last one closing the line.

    Parameters
    ----------
    points
        The lines.
    closing
        (n_orb,) factors exp(-2 pi i G.tau) that take the first states of a line to k_0 + G; None
        is 1, the periodic gauge.
    some
        (n_points,) the points to begin from; all of them by default.
    """
    part = slice(None) if some is None else np.flatnonzero(some)
    right = points.states[points.following[part]]
    if closing is not None:
        last = points.place[part] == points.counts[points.line[part]] - 1
        right[last] *= closing[:, None]
    return measure_links(points.states[part], right)


def renewed_links(
    before: LinePoints, links: Links, after: LinePoints, closing: ComplexArray | None = None
) -> Links:
    """Links of lines that have got more points; those between old neighbours are kept.

    Parameters
    ----------
    before, links
        The lines without the new points, and their links.
    after
        The same lines with them.
    closing
        See `loop_links`.
    """
    old = np.isin(after.line + after.along, before.line + before.along)
    same = old & old[after.following]
    known = links.kept(same[old])
    if same.all():
        return known
    new = loop_links(after, closing, ~same)
    return Links(
        _interleaved(same, known.overlaps, new.overlaps),
        _interleaved(same, known.defects, new.defects),
        _interleaved(same, known.losses, new.losses),
    )


def _interleaved(where: BoolArray, yes: NDArray[Scalar], no: NDArray[Scalar]) -> NDArray[Scalar]:
    """The rows of one array where it is set, those of the other elsewhere."""
    rows: NDArray[Scalar] = np.empty((len(where), *yes.shape[1:]), dtype=yes.dtype)
    rows[where], rows[~where] = yes, no
    return rows


def hybrid_wannier_centres(links: Links, counts: IntArray) -> FloatArray:
    """Hybrid Wannier charge centres (n_lines, n_occ) in [0, 1), ascending on each line.

    Parameters
    ----------
    links
        Links of closed lines, one line after the other.
    counts
        (n_lines,) links of each.
    """
    phases = eigenphases(ordered_products(unitary_part(links), counts))
    centres = (-phases / (2 * np.pi)) % 1.0
    centres[centres == 1.0] = 0.0  # -1e-17 % 1.0
    return np.sort(centres, axis=1)


def eigenphases(unitary: ComplexArray) -> FloatArray:
    """Phases (n, m), unordered, of the eigenvalues of unitary matrices (n, m, m).

    A Cayley transform makes a Hermitian matrix of each, with cotangents of half the phases for
    eigenvalues: a third of the time of the eigenvalues of a general matrix. Its Hermitian part is
    taken, in which small errors of the moduli cancel: one triangle alone would not do.
    """
    one, turned = np.eye(unitary.shape[1]), unitary / BRANCH
    try:
        cayley = np.linalg.solve(turned - one, 0.5j * (turned + one))
    except np.linalg.LinAlgError:  # an eigenvalue on the cut to the last digit
        return np.asarray(np.angle(np.linalg.eigvals(unitary)))
    cotangents = np.linalg.eigvalsh(cayley + cayley.conj().swapaxes(1, 2))
    phases = np.angle(BRANCH) + 2 * np.arctan2(1.0, cotangents)
    near = np.abs(cotangents).max(axis=1) > NEAR_BRANCH
    if near.any():
        phases[near] = np.angle(np.linalg.eigvals(unitary[near]))
    return np.asarray(phases)


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
    steps is the logarithm of the longest run; shorter ones are filled up with 1.

    Parameters
    ----------
    matrices
        (n, m, m), the runs one after the other.
    counts
        (n_runs,) length of each run, at least 1.
    """
    run = np.repeat(np.arange(len(counts)), counts)
    place = np.arange(len(matrices)) - (np.cumsum(counts) - counts)[run]
    products = np.empty((len(counts), counts.max(), *matrices.shape[1:]), dtype=matrices.dtype)
    products[:] = np.eye(matrices.shape[1])
    products[run, place] = matrices
    while (n := products.shape[1]) > 1:
        pairs = products[:, : n - 1 : 2] @ products[:, 1::2]
        products = np.concatenate([pairs, products[:, n - 1 :]], axis=1) if n % 2 else pairs
    return np.asarray(products[:, 0])


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
    """M (1 - G)^-1/2 by polynomials in what is left of G = 1 - M†M, until nothing is."""
    m, g, bound = links.overlaps.copy(), links.defects.copy(), links.losses.copy()
    while (far := bound > NEAR_LOSS).any():
        m[far] = m[far] @ _polynomial(g[far], SERIES)
        g[far] = defects_of(m[far])
        bound[far] **= 5
    m = m @ _polynomial(g, NEAR)
    half = defects_of(m)
    half /= 2
    _add_to_diagonal(half, 1.0)
    return np.asarray(m @ half)


def _polynomial(
    g: ComplexArray, coefficients: tuple[float, float, float, float, float]
) -> ComplexArray:
    """p(G) with two products: c0 + c1 G + (c2 + c3 G + c4 G^2) G^2."""
    c_0, c_1, c_2, c_3, c_4 = coefficients
    square = g @ g
    upper = c_4 * square
    upper += c_3 * g
    _add_to_diagonal(upper, c_2)
    found = upper @ square
    found += c_1 * g
    _add_to_diagonal(found, c_0)
    return np.asarray(found)
