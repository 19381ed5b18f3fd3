"""From a group and the values of its indicators to the invariants that these values allow.

Used are, and nothing else:

- nu0 and the weak indices from the indicators; weak indices are the same along directions that the
  group makes equal.
- A mirror Chern number is the Z2 index of its plane modulo 2 (Teo, Fu, Kane 2008), and known
  modulo n from rotation eigenvalues where an n-fold axis is normal to the plane (Fang, Gilbert,
  Bernevig 2012).
- For nu0 = 0 a phase is put together from layers (Song et al. 2018). Each operation g has delta(g),
  the layers it crosses modulo 2 (`layer_parity`); delta(t_i) = nu_i for lattice translations and
  delta = kappa/2 for inversion about the centre of kappa: a layer through the centre has kappa = 2,
  pairs of layers 0. Mirror Chern numbers count the layers on a mirror (`mirror_layers`).
- For nu0 = 0, with C4 and the mirror normal to it through the centre of Z8 and a layers on it,

      Z8 = 4 delta(C4) - 2 a   (modulo 8).

  It holds on a basis of all layers of P4/m and I4/m, counted one by one in
  `tests/published/test_published_allowed.py`; that there are two ways to Z8 = 4 in rock salt,
  2 modulo 4 on {110} or 4 modulo 8 on {100}, is in Khalaf et al. 2018 (from memory).

For nu0 = 1 the same differences exist between two strong phases, but no single one has a zero to
count from: invariants of other operations than mirrors are left open there. That all phases with
nu0 = 0 are made of layers is proved for those with indicators in Song et al. 2018 and for all
operations here by the argument on surface mass terms of Khalaf et al. 2018 (both from memory).

References
----------
Teo, Fu, Kane, Phys. Rev. B 78, 045426 (2008), doi:10.1103/PhysRevB.78.045426.
Fang, Gilbert, Bernevig, Phys. Rev. B 86, 115112 (2012), doi:10.1103/PhysRevB.86.115112.
Khalaf, Po, Vishwanath, Watanabe, Phys. Rev. X 8, 031070 (2018), doi:10.1103/PhysRevX.8.031070.
Song, Zhang, Fang, Fang, Nat. Commun. 9, 3530 (2018), doi:10.1038/s41467-018-06010-w.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.invariants.band_reps.allowed_case import IndicatedGroup, group_of
from topovet.invariants.band_reps.allowed_list import list_invariants
from topovet.invariants.band_reps.allowed_results import (
    AllowedInvariants,
    IndicatorValues,
    PlaneResidue,
)
from topovet.invariants.band_reps.mirror_layers import (
    RESIDUES,
    GroupMirror,
    layer_counts,
    number_grid,
)
from topovet.model.plane import Cell
from topovet.symmetry.irrep_names import rotation_axis
from topovet.symmetry.operations import TRANSLATION_TOLERANCE
from topovet.symmetry.operators import cartesian_rotation
from topovet.symmetry.textbook_names import operation_kinds


def find_allowed(
    cell: FloatArray,
    rotations: IntArray,
    translations: FloatArray,
    values: IndicatorValues,
    counted: Mapping[str, int] | None = None,
) -> AllowedInvariants:
    """The invariants that a group has, with what indicators leave of each.

    Parameters
    ----------
    cell
        (3, 3) angstrom, lattice vectors as rows.
    rotations, translations
        (n, 3, 3) and (n, 3): the unitary operations of a Hamiltonian with spin and time reversal,
        a group modulo lattice translations, each rotation once.
    values
        Its indicators.
    counted
        Mirror Chern numbers by plane that are taken as known too, in the signs of `MirrorPlane`.

    Returns
    -------
    AllowedInvariants
        "failed" where nothing is left.

    Raises
    ------
    ValueError
        The operations are no group.
    """
    group = group_of(
        np.asarray(cell, dtype=float).tobytes(),
        np.asarray(rotations, dtype=np.int64).tobytes(),
        np.asarray(translations, dtype=float).tobytes(),
    )
    case = IndicatedGroup(group, values, group.everything)
    if case.layered:
        case = replace(case, choices=group.everything.where(_fits(case)))
        if not len(case.choices.choices):
            return AllowedInvariants("failed", "no arrangement of layers has these indicators")
    masks = [_mask(case, mirror, counted or {}) for mirror in group.mirrors]
    viable = np.ones(len(case.choices.choices), dtype=bool)
    for mask in masks:
        viable &= mask.any(axis=tuple(range(1, mask.ndim)))
    if not viable.any():
        return AllowedInvariants("failed", "no arrangement of layers has all of these values")
    left = replace(case, choices=case.choices.where(viable))
    return list_invariants(left, [mask[viable] for mask in masks])


def _fits(case: IndicatedGroup) -> BoolArray:
    """Which delta have the weak indices and kappa."""
    fits = np.ones(len(case.group.everything.choices), dtype=bool)
    if case.values.weak is not None:
        fits &= np.all(case.group.everything.weak == case.values.weak, axis=1)
    centre = case.values.centre
    if case.values.z4 is None or centre is None:
        return fits
    inversion = -np.eye(3, dtype=np.int64)
    found = _about(case, inversion, np.array(centre))
    if found is not None:
        fits &= case.group.everything.of(*found) == case.values.z4 // 2
    return fits


def _about(case: IndicatedGroup, rotation: IntArray, point: FloatArray) -> tuple[int, Cell] | None:
    """The operation with this rotation that fixes a point, and its lattice translation."""
    for i in np.flatnonzero(np.all(case.group.rotations == rotation, axis=(1, 2))):
        rest = point - rotation @ point - case.group.translations[i]
        if np.abs(rest - np.round(rest)).max() < TRANSLATION_TOLERANCE:
            x, y, z = np.round(rest).astype(int).tolist()
            return int(i), (x, y, z)
    return None


def _mask(case: IndicatedGroup, mirror: GroupMirror, counted: Mapping[str, int]) -> BoolArray:
    """(n_choice, 24) or (n_choice, 24, 24): mirror Chern numbers that fit each delta."""
    numbers = number_grid(len(mirror.planes))
    one_by_one = np.ones(numbers[0].shape, dtype=bool)
    for j, (plane, number) in enumerate(zip(mirror.planes, numbers, strict=True)):
        if mirror.vanishes[j]:
            one_by_one &= number == 0
        if plane.name in counted:
            one_by_one &= number == counted[plane.name] % RESIDUES
        for residue in case.values.planes:
            if residue.row == mirror.row and residue.half == (j == 1):
                sign = _sign(residue, mirror)
                one_by_one &= (number - sign * residue.value) % residue.n == 0
    n_choice = len(case.choices.choices)
    mask: BoolArray = np.repeat(one_by_one[None], n_choice, axis=0)
    _of_planes(case, mirror, mask)
    if case.layered:
        _of_layers(case, mirror, mask)
    return mask


def _sign(residue: PlaneResidue, mirror: GroupMirror) -> int:
    """Between a number in the sense of `axis_cart` and `through` and one in the mirror's own."""
    sign = round(float(np.dot(residue.axis_cart, mirror.normal)))
    return sign * (_sense_at_edge(mirror, np.array(residue.through)) if residue.half else 1)


def _sense_at_edge(mirror: GroupMirror, point: FloatArray) -> int:
    """-1 where a point is on the mirror half a period away, whose sign at k = G/2 is opposite."""
    return -1 if _steps_away(mirror, point) % 2 else 1


def _steps_away(mirror: GroupMirror, point: FloatArray) -> int:
    """How many halves of `row` lie between the mirror and a parallel one through a point.

    0 where there is one plane of k: all parallel mirrors are one up to a lattice translation.
    """
    if len(mirror.planes) < 2:
        return 0
    half = np.array(mirror.planes[1].origin)  # half.row = 1/2, and 0 within the mirror
    return round(float(4 * (point - mirror.through) @ half))


def _of_planes(case: IndicatedGroup, mirror: GroupMirror, mask: BoolArray) -> None:
    """C modulo 2 is the Z2 index of the plane: nu.row at 1/2, nu0 + nu.row at 0."""
    strong = case.values.strong
    for j, number in enumerate(number_grid(len(mirror.planes))):
        if case.layered and case.values.weak is None:
            index = case.choices.weak @ np.array(mirror.row)
        else:
            found = set(((case.weak @ np.array(mirror.row)) % 2).tolist())
            if len(found) > 1:
                continue
            index = np.full(len(mask), found.pop())
        if j == 0 and strong is None:
            continue
        index = (index + (strong or 0) * (j == 0)) % 2
        mask &= number % 2 == index.reshape(-1, *[1] * number.ndim)


def _of_layers(case: IndicatedGroup, mirror: GroupMirror, mask: BoolArray) -> None:
    """Layers on the mirror: whole, delta modulo 2, and part of Z8."""
    n_planes = len(mirror.planes)
    layers, whole = layer_counts(n_planes)
    over = (-1, *[1] * n_planes)
    delta = case.choices.of(mirror.operation, mirror.cell)
    mask &= whole & (layers % 2 == delta.reshape(over))
    axis, centre = case.values.z8_axis, case.values.z8_centre
    if case.values.z8 is None or axis is None or centre is None:
        return
    if abs(abs(float(np.dot(axis, mirror.normal))) - 1) > 1e-6:
        return
    turn = _fourfold(case, np.array(axis), np.array(centre))
    if turn is None:
        return
    if _steps_away(mirror, np.array(centre)) % 2:  # the mirror through the centre is the other one
        c_0, c_half = number_grid(2)
        layers = (c_0 - c_half) // 2 % (RESIDUES // 2)
    value = 4 * case.choices.of(*turn).reshape(over) - 2 * layers
    mask &= (value - case.values.z8) % 8 == 0


def _fourfold(
    case: IndicatedGroup, axis: FloatArray, centre: FloatArray
) -> tuple[int, Cell] | None:
    """C4 about an axis through a point."""
    for i, kind in enumerate(operation_kinds(case.group.rotations)):
        about = rotation_axis(cartesian_rotation(case.group.rotations[i], case.group.cell))
        if kind == "4" and float(about @ axis) > 1 - 1e-6:
            return _about(case, case.group.rotations[i], centre)
    return None
