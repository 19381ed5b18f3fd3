"""A certificate checked again, by other and plainer code than that which made it.

Three things make a certificate a proof, and each is looked at:

- the boxes, settled or open, cover a part of the zone that holds an image of every k;
- in each settled box the bound holds: recomputed from a direct sum over all R, with |C| of the
  second-order matrices from their eigenvalues in place of the quicker bound;
- bands at k and at its images differ by no more than the residuals say: tried at some k only, since
  the certificate does not hold the operators (`symmetry_use` bounds them for all k).
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import linprog

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.model.hamiltonian import TightBindingModel
from topovet.spectrum.eigen import one_blas_thread
from topovet.spectrum.proof.results import Certificate

BOXES_AT_A_TIME = 128
DEEPEST, FINEST = 50, 30
"""Halvings along an axis beyond which there are no boxes, and after which an empty part at a plane
is a hole: far below the margin."""

N_SAMPLED = 12
PLANE_MARGIN = 5e-7
"""How far beyond a plane, in units of the bounding box, a part of it must lie to be left out: half
of what the search asks for, so that rounding makes no holes."""

ROUNDING_EV = 1e-9


@dataclass(frozen=True, slots=True)
class Recheck:
    """Outcome.

    Attributes
    ----------
    problems
        One sentence for each failure; none if the certificate holds.
    lowest_ev
        Least bound recomputed over the settled boxes, eV.
    cost_ev
        Residual of the symmetries to be taken off it.
    n_boxes, n_open
        Boxes settled and left open.
    """

    problems: tuple[str, ...]
    lowest_ev: float
    cost_ev: float
    n_boxes: int
    n_open: int

    @property
    def holds(self) -> bool:
        return not self.problems


def recheck(model: TightBindingModel, certificate: Certificate) -> Recheck:
    """Check a certificate against the Hamiltonian it was made for.

    Parameters
    ----------
    model
        H(R), read anew.
    certificate
        From `proof.prove`; nothing in it is trusted.
    """
    n_levels = 2 if certificate.quantity == "direct" else 1
    with one_blas_thread():
        lowest = _lowest_bound(model, certificate)
    problems = [*_check_group(certificate), *_check_cover(certificate)]
    problems += _check_residuals(model, certificate)
    if lowest < certificate.claim_ev - ROUNDING_EV:
        problems.append(
            f"a box of the certificate is only bounded by {lowest:.6g} eV, not by the "
            f"{certificate.claim_ev:.6g} eV that it claims"
        )
    return Recheck(
        tuple(problems),
        lowest,
        n_levels * float(certificate.residuals_ev.max()),
        len(certificate.levels),
        len(certificate.open_levels),
    )


def _check_group(certificate: Certificate) -> list[str]:
    images, problems = certificate.images, []
    listed = {image.tobytes() for image in images}
    if any((a @ b).tobytes() not in listed for a in images for b in images):
        problems.append("the images of k are not a group")
    moved = images @ certificate.metric @ images.transpose(0, 2, 1)
    if np.abs(moved - certificate.metric).max() > 1e-9 * np.abs(certificate.metric).max():
        problems.append("the metric is not invariant under the images of k")
    orbit = certificate.seed @ images
    off = certificate.sites[:, None, :] - orbit
    if np.abs(off - np.round(off)).max(axis=2).min(axis=1).max(initial=0.0) > 1e-9:
        problems.append("a site of the cell is no image of its seed")
    return problems


def _check_cover(certificate: Certificate) -> list[str]:
    """Whether the boxes cover the cell of the seed."""
    apart = certificate.sites - certificate.seed
    heights = (
        np.einsum("pi,ij,pj->p", certificate.sites, certificate.metric, certificate.sites)
        - certificate.seed @ certificate.metric @ certificate.seed
    ) / 2
    planes = apart @ certificate.metric
    normals, offsets = planes @ certificate.axes.T, heights - planes @ certificate.origin
    scale = np.linalg.norm(normals, axis=1)
    normals, offsets = normals / scale[:, None], offsets / scale
    d = normals.shape[1]
    for direction in np.concatenate([np.eye(d), -np.eye(d)]):
        found = linprog(direction, A_ub=normals, b_ub=offsets, bounds=(None, None))
        if found.status != 0 or found.fun < (0.0 if direction.sum() > 0 else -1.0):
            return ["the cell of the seed is not within the box that is covered"]
    levels = np.concatenate([certificate.levels, certificate.open_levels])
    indices = np.concatenate([certificate.indices, certificate.open_indices])
    hole = _hole(levels, indices, normals, offsets)
    return [] if hole is None else [f"the boxes leave a hole at u = {np.round(hole, 6).tolist()}"]


def _hole(
    levels: IntArray, indices: IntArray, normals: FloatArray, offsets: FloatArray
) -> FloatArray | None:
    """Centre of a part of [0, 1]^d that is neither in a box nor beyond a plane; None if none is.

    A part is halved along an axis that no box in it crosses, until it is a box, or empty of boxes
    and beyond a plane.
    """
    d = normals.shape[1]
    waiting = [(np.zeros(d, np.int64), np.zeros(d, np.int64), np.arange(len(levels)))]
    while waiting:
        level, index, inside = waiting.pop()
        depth = levels[inside] - level
        if np.any(np.all(depth <= 0, axis=1)):
            continue
        half = 0.5 ** (level + 1.0)
        centre = (2 * index + 1) * half
        if len(inside) == 0:
            if np.any(normals @ centre - np.abs(normals) @ half > offsets + PLANE_MARGIN):
                continue
            axis = int(level.argmin())
        else:
            free = np.all(depth > 0, axis=0)
            axis = int(np.flatnonzero(free)[0]) if free.any() else -1
        if axis < 0 or level[axis] > (FINEST if len(inside) == 0 else DEEPEST):
            return np.asarray(centre)
        upper = ((indices[inside, axis] >> np.maximum(depth[:, axis] - 1, 0)) & 1) == 1
        for side in (0, 1):
            next_level, next_index = level.copy(), index.copy()
            next_level[axis] += 1
            next_index[axis] = 2 * index[axis] + side
            waiting.append((next_level, next_index, inside[upper == bool(side)]))
    return None


def _check_residuals(model: TightBindingModel, certificate: Certificate) -> list[str]:
    k_frac = np.random.default_rng(1).random((N_SAMPLED, 3))
    k_frac[:, ~certificate.axes.any(axis=0)] = 0.0
    energies = np.linalg.eigvalsh(_direct_sum(model, k_frac, np.ones(1)))
    for image, residual in zip(certificate.images, certificate.residuals_ev, strict=True):
        there = np.linalg.eigvalsh(_direct_sum(model, k_frac @ image, np.ones(1)))
        if np.abs(there - energies).max() > residual + ROUNDING_EV:
            return [f"bands at k and at its image differ by more than {residual:.3g} eV"]
    return []


def _direct_sum(model: TightBindingModel, k_frac: FloatArray, factor: NDArray[Any]) -> ComplexArray:
    """sum_R factor H(R) exp(2 pi i k.R), (n, n_orb, n_orb); factor (1,) or (n_r, n_orb, n_orb)."""
    phases = np.exp(2j * np.pi * (k_frac @ model.r_cells.T))
    terms = (model.h_r * factor).reshape(model.n_r, -1)
    return np.asarray((phases @ terms).reshape(-1, model.n_orb, model.n_orb))


def _lowest_bound(model: TightBindingModel, certificate: Certificate) -> float:
    tau = certificate.positions
    d = model.r_cells[:, None, None, :] + tau[None, None, :, :] - tau[None, :, None, :]
    turns = 2 * np.pi * np.einsum("ai,rmni->armn", certificate.axes, d)
    order = np.lexsort(certificate.levels.T)
    lowest = np.inf
    for start in range(0, len(order), BOXES_AT_A_TIME):
        part = order[start : start + BOXES_AT_A_TIME]
        half = 0.5 ** (certificate.levels[part] + 1.0)
        centres = (2 * certificate.indices[part] + 1) * half
        bounds = _bounds(model, certificate, turns, centres, np.asarray(half))
        lowest = min(lowest, float(bounds.min()))
    return lowest


def _bounds(
    model: TightBindingModel,
    certificate: Certificate,
    turns: FloatArray,
    centres: FloatArray,
    half: FloatArray,
) -> FloatArray:
    k_frac = certificate.origin + centres @ certificate.axes
    axes = range(len(turns))
    h = _direct_sum(model, k_frac, np.ones(1))
    first = [_direct_sum(model, k_frac, 1j * turns[a]) for a in axes]
    second = {
        (a, b): _direct_sum(model, k_frac, -turns[a] * turns[b])
        for a, b in itertools.combinations_with_replacement(axes, 2)
    }
    rest = np.array([_rest(model, turns, widths) for widths in np.unique(half, axis=0)])
    which = np.unique(half, axis=0, return_inverse=True)[1].reshape(-1)
    states = np.linalg.eigh(h)[1]
    n = certificate.filling
    total: list[FloatArray] = []
    for wanted, kets, sign in (
        (certificate.quantity != "conduction", states[:, :, :n], 1.0),
        (certificate.quantity != "valence", states[:, :, n:], -1.0),
    ):
        if wanted:
            total.append(_tops(h, first, second, kets, half, sign) + rest[which][:, None])
    return np.asarray(-np.sum(total, axis=0).max(axis=1))


def _rest(model: TightBindingModel, turns: FloatArray, half: FloatArray) -> float:
    phase = np.einsum("armn,a->rmn", np.abs(turns), half)
    size = np.einsum("rmn,rmn->mn", np.abs(model.h_r), np.minimum(phase**3 / 6, phase**2))
    return float(np.sqrt(np.linalg.eigvalsh(size @ size.T)[-1]))


def _tops(
    h: ComplexArray,
    first: list[ComplexArray],
    second: dict[tuple[int, int], ComplexArray],
    kets: ComplexArray,
    half: FloatArray,
    sign: float,
) -> FloatArray:
    """(n, 2^d) largest eigenvalue of a block at the corners, second order included."""

    def within(x: ComplexArray) -> ComplexArray:
        return np.asarray(sign * (kets.conj().swapaxes(1, 2) @ x @ kets))

    middle = within(h)
    for (a, b), c in second.items():
        values, vectors = np.linalg.eigh(within(c))
        size = np.maximum(values, 0.0) / 2 if a == b else np.abs(values)
        weight = (half[:, a] * half[:, b])[:, None] * size
        middle = middle + (vectors * weight[:, None, :]) @ vectors.conj().swapaxes(1, 2)
    slopes = [within(x) for x in first]
    tops = []
    for corner in itertools.product((-1.0, 1.0), repeat=len(slopes)):
        moved = middle.copy()
        for a, side in enumerate(corner):
            moved += side * half[:, a, None, None] * slopes[a]
        tops.append(np.linalg.eigvalsh(moved)[:, -1])
    return np.stack(tops, axis=1)
