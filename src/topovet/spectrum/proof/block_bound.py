"""Lower bounds of a gap, or of a band edge, that hold in a whole box of k.

Let P and Q be the N lowest and the other eigenvectors of H at the centre of the box, fixed over the
box, and H~ the Hamiltonian in the gauge of `proof.expansion`. By the min-max theorem (Horn,
Johnson, Matrix Analysis, 2nd ed. 2013, theorem 4.2.6 and its consequence 4.3.28, Cauchy's
interlacing), for any orthonormal P with N columns and Q orthogonal to it,

    E_N(k) <= lambda_max(P† H~ P),        E_(N+1)(k) >= lambda_min(Q† H~ Q).

What couples the two blocks can only push them apart and need not be bounded at all. Within a block,

    P† H~ P = E_P + sum_a d_a A_a + 1/2 sum_ab d_a d_b C_ab + X,    |d_a| <= h_a,  ||X|| <= rho.

Second order: for a Hermitian C and any s > 0, (|C| - s)^2 >= 0 gives |C| <= (C^2/s + s)/2 =: M(C),
so that +-C <= M(C), C <= (C + M(C))/2 and

    1/2 sum_ab d_a d_b C_ab <= 1/2 sum_a h_a^2 (C_aa + M(C_aa))/2 + sum_(a<b) h_a h_b M(C_ab) =: D

for d_a^2 C_aa <= d_a^2 (C_aa + M)/2 <= h_a^2 (C_aa + M)/2, the last matrix being non-negative. With
s the size of C at the edge of the block, M is no larger than |C| there; deeper bands, which s does
not fit, have energy to spare. (Products only: |C| itself would take an eigenproblem for each.)

First order: lambda_max(E_P + D + sum_a d_a A_a) is convex in d, so it is largest at a corner of the
box; -lambda_max(P block) + lambda_min(Q block) is concave and smallest at a corner, taken as a
whole. Hence, with rho for each block,

    gap(k) >= min over corners [lambda_min(E_Q - D_Q + sum d A_Q) - lambda_max(E_P + D_P + ...)]
              - 2 rho - rounding.

Q is treated as P is, with all signs turned. The plain bound (every level moves by at most
||H(k) - H(k0)||) was measured on first-principles cases: it never settles a box that splitting
leaves, so no time is spent on it.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.spectrum.descent import Objective
from topovet.spectrum.proof.expansion import SecondOrder

EDGE_STATES = 2
"""States next to the gap that s is fitted to, and that say along which axis a box is loosest."""

LEAST_SIZE = 0.3
"""Least s as a part of the root mean square size of C."""


@dataclass(frozen=True, slots=True, eq=False)
class BoxBounds:
    """What is known of a stack of n boxes.

    Attributes
    ----------
    values
        (n,) objective at the centres, eV: attained.
    lower
        (n,) what the objective is nowhere below in each box, eV.
    losses
        (n, 3, d) estimate of what first order, second order and remainder cost along each axis, eV:
        their sum is values - lower; it steers the splitting and enters no bound.
    """

    values: FloatArray
    lower: FloatArray
    losses: FloatArray


def bound_boxes(
    expansion: SecondOrder,
    objective: Objective,
    centres: FloatArray,
    half_widths: FloatArray,
    remainders_ev: FloatArray,
) -> BoxBounds:
    """Bounds of an objective over boxes.

    Parameters
    ----------
    expansion
        The Hamiltonian in coordinates u.
    objective
        Direct gap (1, -1), conduction edge (1, 0) or valence edge turned over (0, -1).
    centres, half_widths
        (n, d) each, in u.
    remainders_ev
        (n,) from `Expansion.remainder_ev`.
    """
    h, first, second = expansion.derivatives(centres)
    energies, states = np.linalg.eigh(h)
    n_occ = objective.filling
    blocks = []
    if objective.lower != 0:
        blocks.append(_project(energies, states, first, second, slice(None, n_occ), 1))
    if objective.upper != 0:
        # the lowest conduction state last, as the highest valence state is
        blocks.append(_project(energies, states, first, second, slice(None, n_occ - 1, -1), -1))
    tops = [_block_top(block, half_widths) for block in blocks]
    values = objective.of(energies)
    return _assemble(values, tops, remainders_ev, expansion.rounding_ev, half_widths)


@dataclass(frozen=True, slots=True, eq=False)
class _Block:
    """A diagonal block: levels (n, nb) ascending, slopes (n, d, nb, nb), curves (n, p, nb, nb)."""

    levels: FloatArray
    slopes: ComplexArray
    curves: ComplexArray


@dataclass(frozen=True, slots=True, eq=False)
class _Top:
    """Bound of the largest eigenvalue: at the corners (n, 2^d), without first order (n,), and
    sizes at the edge by axis, of first and of second order (n, d)."""

    corners: FloatArray
    flat: FloatArray
    slope_sizes: FloatArray
    curve_sizes: FloatArray


def _project(
    energies: FloatArray,
    states: ComplexArray,
    first: ComplexArray,
    second: ComplexArray,
    columns: slice,
    sign: int,
) -> _Block:
    kets = np.ascontiguousarray(states[:, :, columns])[:, None]
    bras = kets.conj().swapaxes(2, 3)
    return _Block(
        sign * energies[:, columns], sign * (bras @ (first @ kets)), sign * (bras @ (second @ kets))
    )


def _block_top(block: _Block, half_widths: FloatArray) -> _Top:
    n, d = half_widths.shape
    size = block.levels.shape[1]
    edge = slice(max(0, size - EDGE_STATES), size)
    a, b = np.triu_indices(d)
    areas = half_widths[:, a] * half_widths[:, b]
    areas[:, a == b] /= 2
    spread = _upper_size(block.curves, edge)
    same = a == b
    spread[:, same] = (spread[:, same] + block.curves[:, same]) / 2
    spread *= areas[:, :, None, None]
    flat = spread.sum(axis=1)
    diagonal = np.arange(size)
    flat[:, diagonal, diagonal] += block.levels
    signs = np.array(list(itertools.product((-1.0, 1.0), repeat=d)))
    steps = (half_widths[:, None, :] * signs).astype(complex)
    moved = (steps @ block.slopes.reshape(n, d, -1)).reshape(n, len(signs), size, size)
    corners = np.linalg.eigvalsh(flat[:, None] + moved)[..., -1]
    by_pair = np.linalg.norm(spread[:, :, edge, edge], axis=(2, 3))
    by_axis = np.zeros((n, d))
    for pair, axes in enumerate(zip(a, b, strict=True)):
        by_axis[:, axes[0]] += by_pair[:, pair] / 2
        by_axis[:, axes[1]] += by_pair[:, pair] / 2
    slope_sizes = half_widths * np.linalg.norm(block.slopes[:, :, edge, edge], axis=(2, 3))
    return _Top(corners, np.linalg.eigvalsh(flat)[:, -1], slope_sizes, by_axis)


def _upper_size(c: ComplexArray, edge: slice) -> ComplexArray:
    """M(C) = (C^2/s + s)/2 >= |C| for a stack of Hermitian matrices."""
    squared = c @ c
    diagonal = np.diagonal(squared, axis1=-2, axis2=-1).real
    s = np.maximum(diagonal[..., edge].mean(axis=-1), LEAST_SIZE**2 * diagonal.mean(axis=-1))
    s = np.sqrt(s) + 1e-12
    upper = squared / (2 * s[..., None, None])
    rows = np.arange(c.shape[-1])
    upper[..., rows, rows] += s[..., None] / 2
    return np.asarray(upper)


def _assemble(
    values: FloatArray,
    tops: list[_Top],
    remainders_ev: FloatArray,
    rounding_ev: float,
    half_widths: FloatArray,
) -> BoxBounds:
    at_corners = -np.sum([top.corners for top in tops], axis=0)
    without_slope = -np.sum([top.flat for top in tops], axis=0)
    remainder = len(tops) * (remainders_ev + rounding_ev)
    lower = at_corners.min(axis=1) - remainder
    losses = np.stack(
        [
            _shared(without_slope - at_corners.min(axis=1), [top.slope_sizes for top in tops]),
            _shared(values - without_slope, [top.curve_sizes for top in tops]),
            _shared(remainder, [half_widths]),
        ],
        axis=1,
    )
    return BoxBounds(values, lower, losses)


def _shared(loss: FloatArray, sizes: list[FloatArray]) -> FloatArray:
    """A loss (n,) handed out to the axes in the proportion of sizes (n, d)."""
    weight = np.sum(sizes, axis=0) + 1e-300
    return np.asarray(np.maximum(loss, 0.0)[:, None] * weight / weight.sum(axis=1)[:, None])
