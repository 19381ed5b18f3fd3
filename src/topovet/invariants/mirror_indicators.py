"""Mirror Chern numbers modulo n from rotation eigenvalues, on planes normal to an n-fold axis.

On a plane that a mirror leaves where it is, occupied states have mirror eigenvalue +i or -i, and
those of +i have a Chern number C+. With an n-fold rotation about the normal, eigenvalues at its
fixed momenta give it modulo n (N states of +i, all products over them):

    C4:  i^C          = (-1)^N  xi(Γ) xi(M) zeta(X)         xi, zeta, eta, theta: eigenvalues of
    C6:  exp(iπC/3)   = (-1)^N  eta(Γ) theta(K) zeta(M)     C4, C2, C6, C3 on spinors, for turns
    C3:  exp(2πiC/3)  = (-1)^N  theta(Γ) theta(K) theta(K')  that are counter-clockwise.

With time reversal C- = -C+, and C+ is the mirror Chern number C_m; these are the indicators Z3m,
Z4m, Z6m. The sign is that of the Berry connection i<u|du> on a plane oriented counter-clockwise
about the rotation axis; on a plane at the zone boundary it also depends on which of the mirror
planes of the crystal is taken, here the one through w/2.

The gap must be open on the whole plane; only the fixed momenta are looked at here.

References
----------
Fang, Gilbert, Bernevig, Phys. Rev. B 86, 115112 (2012), doi:10.1103/PhysRevB.86.115112 (Chern
number modulo n). Song, Zhang, Fang, Fang, Nat. Commun. 9, 3530 (2018),
doi:10.1038/s41467-018-06010-w; Khalaf, Po, Vishwanath, Watanabe, Phys. Rev. X 8, 031070 (2018),
doi:10.1103/PhysRevX.8.031070 (indicators).
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.errors import UndefinedError
from topovet.invariants.rotation_eigenvalues import has_both_sides
from topovet.invariants.rotation_indicators import MIN_GAP_EV, MIN_PURITY, followed_by_translation
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.model.plane import KPlane
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.irrep_names import is_positive, operation_turns, rotation_axis
from topovet.symmetry.operations import TRANSLATION_TOLERANCE
from topovet.symmetry.operators import WannierOperator, cartesian_rotation, operator_at
from topovet.symmetry.textbook_names import operation_kinds
from topovet.units import MEV_PER_EV

SAME_AXIS = 1e-3
"""Largest |sin| of the angle between parallel axes."""

COMMUTES = 1e-6
"""Largest element of D_m D_C - D_C D_m, and of D^n + 1, at a fixed momentum."""

FIXED_MOMENTA = {
    3: ((1, (0,)), (1, (1,)), (1, (2,))),
    4: ((1, (0,)), (1, (1,)), (2, (1,))),
    6: ((1, (0,)), (2, (1,)), (3, (1,))),
}
"""n -> for each factor the power of the rotation, and which of its fixed momenta."""


@dataclass(frozen=True, slots=True)
class MirrorIndicator:
    """Mirror Chern number modulo n of one plane.

    Attributes
    ----------
    plane
        The plane, oriented counter-clockwise about `axis_cart`.
    axis_cart
        Unit vector normal to it.
    n
        Order of the rotation.
    status
        "ok", "not-applicable" (a glide, or a screw that does not commute there) or "failed".
    reason
        Why it is not "ok"; empty otherwise.
    mirror_chern
        C_m modulo n, 0 … n - 1; None unless "ok".
    purity, gap_ev
        Smallest over the fixed momenta; None where not applicable.
    through
        A point on the mirror that is meant, fractional.
    """

    plane: KPlane
    axis_cart: tuple[float, float, float]
    n: int
    status: str
    reason: str
    mirror_chern: int | None
    purity: float | None
    gap_ev: float | None
    through: tuple[float, float, float] = (0.0, 0.0, 0.0)


def compute_mirror_indicators(
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    crystal: Crystal,
    filling: int,
) -> tuple[MirrorIndicator, ...]:
    """Mirror Chern numbers modulo n of all planes normal to an axis of order 3, 4 or 6.

    Parameters
    ----------
    bloch
        The Hamiltonian; it has spin and time reversal.
    operators
        Its group modulo lattice translations; antiunitary operations are passed over.
    crystal
        Gives the cell and the periodic directions.
    filling
        Occupied bands, spin counted.

    Returns
    -------
    tuple of MirrorIndicator
        Axis by axis, the plane k = 0 first. Empty where no such axis has a mirror normal to it, or
        the model has no occupied or no empty bands.

    Raises
    ------
    UndefinedError
        The cell is so skewed that a plane's own reciprocal lattice was not found.
    """
    if not has_both_sides(operators, filling):
        return ()
    unitary = [o for o in operators if not o.antiunitary]
    found = []
    with one_blas_thread():
        for rotation, mirror in _axes(unitary, crystal):
            n = operation_turns(operation_kinds(rotation.rotation[None])[0])
            for plane in mirror_planes(mirror, rotation, crystal):
                found.append(_measure_plane(bloch, mirror, rotation, n, plane, crystal, filling))
    return tuple(found)


def _axes(
    unitary: Sequence[WannierOperator], crystal: Crystal
) -> list[tuple[WannierOperator, WannierOperator]]:
    """Rotation of highest order (3, 4 or 6) about each axis with a mirror normal to it."""
    if not unitary:
        return []
    kinds = operation_kinds(np.array([o.rotation for o in unitary]))
    axes = [rotation_axis(cartesian_rotation(o.rotation, crystal.cell)) for o in unitary]
    mirrors = [i for i, kind in enumerate(kinds) if kind == "m"]
    best: dict[int, int] = {}
    for i, kind in enumerate(kinds):
        if kind not in ("3", "4", "6") or not is_positive(axes[i]):
            continue
        normal = [m for m in mirrors if np.linalg.norm(np.cross(axes[i], axes[m])) < SAME_AXIS]
        if normal and operation_turns(kind) > operation_turns(
            kinds[best.get(normal[0], normal[0])]
        ):
            best[normal[0]] = i
    return [(unitary[i], without_glide(unitary[m])) for m, i in best.items()]


def without_glide(mirror: WannierOperator) -> WannierOperator:
    """The mirror followed by the lattice translation that leaves no glide, if there is one."""
    for cell in itertools.product((0, 1, -1), repeat=3):
        glide = (np.eye(3) + mirror.rotation) @ (mirror.translation + np.array(cell))
        if np.abs(glide).max() < TRANSLATION_TOLERANCE:
            return followed_by_translation(mirror, np.array(cell, dtype=float))
    return mirror


def mirror_planes(
    mirror: WannierOperator, rotation: WannierOperator, crystal: Crystal
) -> tuple[KPlane, ...]:
    """Mirror-invariant planes of k, counter-clockwise about the rotation's axis.

    The plane through 0, and the one half a reciprocal lattice vector along the axis away from it
    where that is another plane (in face- and body-centred lattices it is the same).
    """
    axis = rotation_axis(cartesian_rotation(rotation.rotation, crystal.cell))
    reach = [np.arange(-3, 4) if p else np.arange(1) for p in crystal.periodic]
    g = np.stack(np.meshgrid(*reach, indexing="ij"), axis=-1).reshape(-1, 3)
    g = g[np.argsort(np.round(np.linalg.norm(g @ crystal.reciprocal, axis=1), 6), kind="stable")]
    turned = g @ mirror.k_rotation
    in_plane = g[np.all(turned == g, axis=1)][1:]
    others = np.linalg.norm(np.cross(in_plane, in_plane[0]), axis=1) > 0
    across, along = in_plane[0], in_plane[others][0]
    if np.gcd.reduce(np.cross(across, along)) != 1:  # a sublattice, since g reaches not far enough
        raise UndefinedError("the cell is too skewed to find the reciprocal lattice of a plane")
    cart = crystal.reciprocal
    if np.cross(across @ cart, along @ cart) @ axis < 0:
        across, along = along, across
    along_axis = g[np.all(turned == -g, axis=1)]
    origins: list[tuple[str, FloatArray]] = [("0", np.zeros(3))]
    normal = along_axis[np.linalg.norm(along_axis, axis=1) > 0]
    if len(normal):
        half = normal[0] / 2
        same = np.abs((g - half) @ mirror.k_rotation - (g - half)).max(axis=1) < 1e-9
        if not same.any():
            origins.append(("1/2", half))
    return tuple(
        KPlane(f"mirror k={name}", _triple(origin), _cell(across), _cell(along))
        for name, origin in origins
    )


def _triple(k: FloatArray) -> tuple[float, float, float]:
    x, y, z = (float(c) for c in k)
    return x, y, z


def _cell(g: IntArray) -> tuple[int, int, int]:
    x, y, z = (int(c) for c in g)
    return x, y, z


@dataclass(frozen=True, slots=True, eq=False)
class _Factor:
    """One factor of the product: angle over 2 pi of the eigenvalues of the +i and -i states."""

    turns: FloatArray
    counts: IntArray
    purity: float
    gap_ev: float


def _measure_plane(
    bloch: BlochSum,
    mirror: WannierOperator,
    rotation: WannierOperator,
    n: int,
    plane: KPlane,
    crystal: Crystal,
    filling: int,
) -> MirrorIndicator:
    axis = _triple(rotation_axis(cartesian_rotation(rotation.rotation, crystal.cell)))
    through = _triple(mirror.translation / 2)
    factors = []
    for power, which in FIXED_MOMENTA[n]:
        for k in _fixed_in_plane(rotation, plane, power)[list(which)]:
            factor = _factor(bloch, mirror, rotation, n, power, k, filling)
            if factor is None:
                reason = f"no mirror that commutes with C{n} here: a glide, or a screw at the edge"
                return MirrorIndicator(
                    plane, axis, n, "not-applicable", reason, None, None, None, through
                )
            factors.append(factor)
    reason = _why_not(factors, filling)
    chern = None if reason else _chern_modulo(factors, n)
    if not reason and chern is None:
        reason = "the eigenvalues belong to no band structure with a gap and time reversal"
    return MirrorIndicator(
        plane=plane,
        axis_cart=axis,
        n=n,
        status="failed" if reason else "ok",
        reason=reason,
        mirror_chern=chern,
        purity=min(f.purity for f in factors),
        gap_ev=min(f.gap_ev for f in factors),
        through=through,
    )


def _chern_modulo(factors: Sequence[_Factor], n: int) -> int | None:
    """C+ modulo n; None if the product is no n-th root of one or C- is not -C+."""
    turns = sum(f.turns for f in factors) + factors[0].counts / 2  # (-1)^N
    chern = np.round(n * turns).astype(int) % n
    whole = np.abs(n * turns - np.round(n * turns)).max() < 1e-6
    return int(chern[0]) if whole and chern.sum() % n == 0 else None


def _why_not(factors: Sequence[_Factor], filling: int) -> str:
    """Why the counts cannot be read, in one clause; empty if they can."""
    if min(f.gap_ev for f in factors) < MIN_GAP_EV:
        return f"a gap is below {MEV_PER_EV * MIN_GAP_EV:g} meV at filling {filling}"
    purity = min(f.purity for f in factors)
    if purity < MIN_PURITY:
        return f"occupied states have no definite eigenvalues (purity {purity:.2f})"
    if any(np.any(f.counts != factors[0].counts) or f.counts.sum() != filling for f in factors):
        return "the number of states of either mirror eigenvalue changes on the plane: no gap"
    return ""


def _fixed_in_plane(rotation: WannierOperator, plane: KPlane, power: int) -> FloatArray:
    """(n, 3) k of a plane that a power of the rotation fixes modulo the plane's reciprocal lattice.

    The plane's centre first; with x, y in multiples of 1/6, 1/4 … of the spanning vectors.
    """
    turn = np.linalg.matrix_power(rotation.k_rotation, power)
    span = np.array([plane.across, plane.along])
    matrix = np.round(span @ turn @ np.linalg.pinv(span)).astype(np.int64)
    order = round(abs(float(np.linalg.det(matrix - np.eye(2)))))
    mesh = np.stack(np.meshgrid(*[np.arange(order) / order] * 2, indexing="ij"), axis=-1)
    xy = mesh.reshape(-1, 2)
    moved = xy @ (matrix - np.eye(2))
    return plane.k_at(xy[np.abs(moved - np.round(moved)).max(axis=1) < 1e-6])


def _factor(
    bloch: BlochSum,
    mirror: WannierOperator,
    rotation: WannierOperator,
    n: int,
    power: int,
    k: FloatArray,
    filling: int,
) -> _Factor | None:
    """Eigenvalues of the rotation's power in both mirror sectors; None if they do not commute."""
    d_m = operator_at(mirror, k[None])[0]
    d_c = _power_at(rotation, k, power)
    roots = n // power
    identity = np.eye(len(d_m))
    defects = (d_m @ d_m + identity, d_m @ d_c - d_c @ d_m)
    powers = np.array([np.linalg.matrix_power(d_c, m) for m in range(roots + 1)])
    if max(np.abs(x).max() for x in (*defects, powers[-1] + identity)) > COMMUTES:
        return None
    turns = (2 * np.arange(roots) + 1) / (2 * roots)  # exp(2 pi i turns) are the roots of -1
    weights = np.exp(-2j * np.pi * turns[:, None] * np.arange(roots)) / roots
    onto_roots = np.tensordot(weights, powers[:-1], axes=1)
    onto_mirror = np.array([identity - 1j * d_m, identity + 1j * d_m]) / 2
    energies, states = np.linalg.eigh(bloch.at(k[None])[0])
    occupied = states[:, :filling]
    joint = onto_mirror[:, None] @ onto_roots[None]
    inside = np.linalg.eigvalsh(occupied.conj().T @ joint @ occupied)
    counts = (inside > 0.5).sum(axis=2)
    return _Factor(
        turns=np.asarray(counts @ turns),
        counts=counts.sum(axis=1),
        purity=min(1.0, float(np.abs(2 * inside - 1).min())),
        gap_ev=float(energies[filling] - energies[filling - 1]),
    )


def _power_at(rotation: WannierOperator, k: FloatArray, power: int) -> ComplexArray:
    """D of the rotation done `power` times from k on; k is fixed by the whole, not by each turn."""
    product = operator_at(rotation, k[None])[0]
    for _ in range(power - 1):
        k = k @ rotation.k_rotation
        product = operator_at(rotation, k[None])[0] @ product
    return np.asarray(product)
