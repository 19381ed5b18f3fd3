"""The S4 indicator, which needs no inversion, and with inversion the Z8 indicator.

At the four momenta K that S4 (a turn by 90 degrees followed by inversion) leaves where they are,
with n_a(K) the occupied states of eigenvalue exp(i a pi/4), a = 1, 3, 5, 7,

    kappa_4 = 1/(2 sqrt 2) sum_K sum_a exp(i a pi/4) n_a(K),

which for Kramers pairs is (1/2) sum_K (pairs with e^{+-i pi/4} - pairs with e^{+-3i pi/4}). In an
insulator with time reversal kappa_4 mod 2 is the strong index nu_0. Where S4 and inversion share a
centre (4/m), kappa_1 - 2 kappa_4 mod 8, with kappa_1 = (1/4) sum_TRIM (n+ - n-) about that centre,
is a Z8 indicator: odd strong, 4 a mirror or rotation invariant that kappa_1 mod 4 does not see. The
sign before kappa_4 is a convention: it changes Z8 by 4 kappa_4, so it matters for odd values alone.

Not computed, since nothing new or not certain enough: Z12 of 6/m, which is kappa_1 mod 4 together
with mirror Chern numbers mod 3 (`mirror_indicators`); indicators of magnetic groups.

References
----------
Khalaf, Po, Vishwanath, Watanabe, Phys. Rev. X 8, 031070 (2018), doi:10.1103/PhysRevX.8.031070.
Song, Zhang, Fang, Fang, Nat. Commun. 9, 3530 (2018), doi:10.1038/s41467-018-06010-w. The
combination for Z8 is from memory and checked on atomic insulators and on rock salt with inverted L.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.rotation_eigenvalues import (
    EigenvalueCount,
    count_eigenvalues,
    fixed_momenta,
    has_both_sides,
)
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.irrep_names import is_positive, rotation_axis
from topovet.symmetry.operations import TRANSLATION_TOLERANCE
from topovet.symmetry.operators import WannierOperator, cartesian_rotation, operator_at
from topovet.symmetry.textbook_names import operation_kinds
from topovet.symmetry.trim import trim_points
from topovet.units import MEV_PER_EV

MIN_GAP_EV = 1e-3
"""Least gap at a momentum with which the occupied space is well defined."""

MIN_PURITY = 0.8
"""Least purity with which eigenvalues are counted, as for parities."""

S4_ANGLES_PI = (0.25, 0.75, 1.25, 1.75)
"""Angles of the eigenvalues of S4 on spinors, in units of pi."""

Point3 = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class S4Axis:
    """The indicator of one S4 axis.

    Attributes
    ----------
    axis_cart
        Unit vector.
    centre
        The point that this S4 leaves where it is, fractional.
    kappa
        kappa_4; None where the counts do not give a whole number.
    points
        Counts at the four momenta.
    """

    axis_cart: Point3
    centre: Point3
    kappa: int | None
    points: tuple[EigenvalueCount, ...]


@dataclass(frozen=True, slots=True)
class S4Indicator:
    """What S4 says about an insulator with time reversal.

    Attributes
    ----------
    status
        "ok", "not-applicable" or "failed".
    reason
        Why it is not "ok"; empty otherwise.
    z2
        kappa_4 mod 2 = nu_0.
    kappa
        kappa_4 of the first axis; the parity alone does not depend on the choice of centre.
    z8
        kappa_1 - 2 kappa_4 mod 8 where S4 shares its centre with inversion; else None.
    z8_reason
        Why there is no z8; empty otherwise.
    z8_centre
        That common centre, fractional, on the first of the axes; None without z8.
    purity, gap_ev
        Smallest over all momenta of all axes; None without any.
    axes
        Every S4 axis of the group.
    """

    status: str
    reason: str
    z2: int | None
    kappa: int | None
    z8: int | None
    z8_reason: str
    purity: float | None
    gap_ev: float | None
    axes: tuple[S4Axis, ...]
    z8_centre: Point3 | None = None


def compute_s4_indicator(
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    crystal: Crystal,
    filling: int,
    *,
    kramers: bool,
) -> S4Indicator:
    """kappa_4 of every S4 axis, nu_0 from it, and Z8 where inversion shares a centre with S4.

    Parameters
    ----------
    bloch
        The Hamiltonian.
    operators
        Its group modulo lattice translations; antiunitary operations are passed over.
    crystal
        Gives the cell and the periodic directions.
    filling
        Occupied bands, spin counted.
    kramers
        Time reversal with spin.

    Returns
    -------
    S4Indicator
        "failed" with the reason where a momentum has no gap, the counts are impure or contradict
        Kramers pairs, or two axes disagree; the counts are returned all the same.
    """
    unitary = [o for o in operators if not o.antiunitary]
    found = _s4_operators(unitary, crystal)
    if not all(crystal.periodic):
        return _nothing("the S4 indicator belongs to three dimensions")
    if not has_both_sides(operators, filling):
        return _nothing("the model has no occupied or no empty bands")
    if not kramers:
        return _nothing("the S4 indicator needs spin and time reversal")
    if not found:
        return _nothing("the group has no S4 operation")
    z8, z8_reason, z8_centre = None, "the S4 indicator failed", None
    with one_blas_thread():
        axes = tuple(_measure_axis(bloch, o, crystal, filling) for o in found)
        reason = _why_not(axes, filling)
        if not reason:
            z8, z8_reason, z8_centre = _z8(bloch, unitary, found[0], filling)
    points = [point for axis in axes for point in axis.points]
    kappa = axes[0].kappa
    return S4Indicator(
        status="failed" if reason else "ok",
        reason=reason,
        z2=None if reason or kappa is None else kappa % 2,
        kappa=None if reason else kappa,
        z8=z8,
        z8_reason=z8_reason,
        purity=min(point.purity for point in points),
        gap_ev=min(point.gap_ev for point in points),
        axes=axes,
        z8_centre=z8_centre,
    )


def _nothing(reason: str) -> S4Indicator:
    return S4Indicator("not-applicable", reason, None, None, None, reason, None, None, ())


def _s4_operators(unitary: Sequence[WannierOperator], crystal: Crystal) -> list[WannierOperator]:
    """One S4 for each axis, the proper part turning counter-clockwise about the positive axis."""
    if not unitary:
        return []
    kinds = operation_kinds(np.array([o.rotation for o in unitary]))
    found: dict[bytes, WannierOperator] = {}
    for kind, operator in zip(kinds, unitary, strict=True):
        axis = rotation_axis(cartesian_rotation(operator.rotation, crystal.cell))
        if kind == "-4" and is_positive(axis):
            found.setdefault(operator.rotation.tobytes(), operator)
    return list(found.values())


def _measure_axis(
    bloch: BlochSum, operator: WannierOperator, crystal: Crystal, filling: int
) -> S4Axis:
    x, y, z = rotation_axis(cartesian_rotation(operator.rotation, crystal.cell)).tolist()
    k = fixed_momenta(operator)
    points = tuple(
        count_eigenvalues(h, d, k_point, filling)
        for h, d, k_point in zip(bloch.at(k), operator_at(operator, k), k, strict=True)
    )
    c_1, c_2, c_3 = (float(c) for c in fixed_point(operator) % 1.0)
    return S4Axis((x, y, z), (c_1, c_2, c_3), _whole(_kappa_4(points)), points)


def fixed_point(operator: WannierOperator) -> FloatArray:
    """(3,) the point that a rotoinversion leaves where it is, fractional."""
    return np.asarray(np.linalg.solve(np.eye(3) - operator.rotation, operator.translation))


def _kappa_4(points: Sequence[EigenvalueCount]) -> complex:
    """sum over momenta and eigenvalues of eigenvalue times count, over 2 sqrt 2."""
    total = sum(
        complex(np.exp(1j * np.pi * angle)) * point.count_at(angle)
        for point in points
        for angle in S4_ANGLES_PI
    )
    return complex(total / (2 * np.sqrt(2)))


def _whole(value: complex) -> int | None:
    """The whole number that exact counts give, None where they give none."""
    nearest = round(value.real)
    return nearest if abs(value - nearest) < 1e-9 else None


def _why_not(axes: Sequence[S4Axis], filling: int) -> str:
    """Why the counts cannot be read, in one clause; empty if they can."""
    points = [point for axis in axes for point in axis.points]
    narrow = min(points, key=lambda p: p.gap_ev)
    if narrow.gap_ev < MIN_GAP_EV:
        return (
            f"the gap at {_k(narrow)} is {MEV_PER_EV * narrow.gap_ev:.3g} meV, at least "
            f"{MEV_PER_EV * MIN_GAP_EV:g} meV needed at filling {filling}"
        )
    impure = min(points, key=lambda p: p.purity)
    if impure.purity < MIN_PURITY or any(sum(p.counts) != filling for p in points):
        return (
            f"occupied states at {_k(impure)} have no definite S4 eigenvalues "
            f"(purity {impure.purity:.2f}, at least {MIN_PURITY} needed)"
        )
    if any(axis.kappa is None for axis in axes):
        return (
            "the counts of S4 eigenvalues give no whole number: not an insulator of Kramers pairs"
        )
    if len({axis.kappa % 2 for axis in axes if axis.kappa is not None}) > 1:
        return "the S4 axes disagree: no gapped band structure has these counts"
    return ""


def _z8(
    bloch: BlochSum, unitary: Sequence[WannierOperator], s4: WannierOperator, filling: int
) -> tuple[int | None, str, Point3 | None]:
    """kappa_1 - 2 kappa_4 mod 8 about a common centre, or why not; and the centre."""
    shared = _with_common_centre(unitary, s4)
    if shared is None:
        return None, "no inversion centre lies on the centre of an S4", None
    s4_there, inversion_there = shared
    k, trim = fixed_momenta(s4_there), trim_points((True, True, True))
    kappa_4 = _whole(_kappa_4(_counts(bloch, s4_there, k, filling)))
    at_trim = _counts(bloch, inversion_there, trim, filling)
    narrow = min(at_trim, key=lambda p: p.gap_ev)
    if narrow.gap_ev < MIN_GAP_EV:
        return None, f"the gap at {_k(narrow)} is below {MEV_PER_EV * MIN_GAP_EV:g} meV", None
    if min(p.purity for p in at_trim) < MIN_PURITY:
        return None, "occupied states at a TRIM have no definite parity", None
    balance = sum(p.count_at(0.0) - p.count_at(1.0) for p in at_trim)
    if kappa_4 is None or balance % 4:
        return None, "parities and S4 eigenvalues give no whole numbers", None
    x, y, z = (float(c) for c in fixed_point(s4_there))
    return (balance // 4 - 2 * kappa_4) % 8, "", (x, y, z)


def _counts(
    bloch: BlochSum, operator: WannierOperator, k: FloatArray, filling: int
) -> list[EigenvalueCount]:
    return [
        count_eigenvalues(h, d, k_point, filling)
        for h, d, k_point in zip(bloch.at(k), operator_at(operator, k), k, strict=True)
    ]


def _with_common_centre(
    unitary: Sequence[WannierOperator], s4: WannierOperator
) -> tuple[WannierOperator, WannierOperator] | None:
    """S4 and inversion, each followed by a lattice translation, so that they fix one point."""
    kinds = operation_kinds(np.array([o.rotation for o in unitary]))
    inversions = [o for kind, o in zip(kinds, unitary, strict=True) if kind == "-1"]
    for cell in itertools.product((0, 1, -1), repeat=3):
        moved = followed_by_translation(s4, np.array(cell))
        for inversion in inversions:
            rest = 2 * fixed_point(moved) - inversion.translation
            if np.abs(rest - np.round(rest)).max() < TRANSLATION_TOLERANCE:
                return moved, followed_by_translation(inversion, np.round(rest))
    return None


def followed_by_translation(operator: WannierOperator, cell: FloatArray) -> WannierOperator:
    """The operation followed by a lattice translation: {W|w + t}, one more cell for each image."""
    steps = np.asarray(np.round(cell), dtype=np.int64)
    return replace(
        operator, translation=operator.translation + steps, shifts=operator.shifts + steps
    )


def _k(point: EigenvalueCount) -> str:
    return "k = (" + ", ".join(f"{c:g}" for c in point.k) + ")"
