"""What holds a closing: eigenvalues of a symmetry that change hands, or a level that must be.

Bands of different eigenvalues cannot mix. If the filled bands on two sides of a closing hold
different numbers of states of an eigenvalue, and the symmetry leaves every k between them where it
is, a closing lies between them whatever the Hamiltonian's other terms are (Wang et al., PRB 85,
195320 (2012), for Dirac points on a rotation axis; Fang, Chen, Kee, Fu, PRB 92, 081201 (2015), for
lines on mirror planes). At a point whose little group has no smaller representation the level is
enforced instead (Young et al., PRL 108, 140405 (2012)).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.errors import NotInvariantError, TopovetError
from topovet.invariants.band_irreps import MIN_PURITY, measure_content
from topovet.invariants.rotation_eigenvalues import EigenvalueCount, count_eigenvalues
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.closings.local import Touching
from topovet.symmetry.irrep_names import name_irreps, rotation_axis, rotation_symbol
from topovet.symmetry.irreps import compute_irreps, isotypic_projectors
from topovet.symmetry.little_group import find_little_group, list_operations
from topovet.symmetry.operators import WannierOperator, cartesian_rotation, operator_at

FIXED = 1e-5
"""Fractional distance within which an image of a node is the node itself."""


def axis_protection(
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    crystal: Crystal,
    k_frac: FloatArray,
    filling: int,
    distance: float,
) -> str:
    """The rotation of highest order whose eigenvalues change hands along its axis through a node.

    Parameters
    ----------
    operators
        The Hamiltonian's own group.
    k_frac
        (3,) the node.
    distance
        How far from the node the two sides are looked at, 1/angstrom.

    Returns
    -------
    str
        One clause, empty if there is none.
    """
    found: list[tuple[int, str]] = []
    for operator in operators:
        symbol = rotation_symbol(operator.rotation)
        if operator.antiunitary or not symbol.startswith("C"):
            continue
        axis = rotation_axis(cartesian_rotation(operator.rotation, crystal.cell))
        sides = _sides(operator, crystal, k_frac, distance * axis)
        if sides is not None and (said := _exchanged(bloch, operator, sides, filling)):
            order = int(symbol[1:])
            place = _direction(axis)
            clause = f"filled states change their {symbol} eigenvalues about {place}: {said}"
            found.append((order, clause))
    return max(found, key=lambda item: item[0])[1] if found else ""


def mirror_protection(
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    crystal: Crystal,
    k_frac: FloatArray,
    tangent: FloatArray,
    filling: int,
    distance: float,
) -> str:
    """The mirror whose plane holds a line and whose eigenvalues change hands across it.

    Parameters
    ----------
    k_frac, tangent
        (3,) a point of the line, and its direction there (Cartesian).
    distance
        How far from the line the two sides are looked at, 1/angstrom.
    """
    for operator in operators:
        if operator.antiunitary or rotation_symbol(operator.rotation) != "m":
            continue
        normal = rotation_axis(cartesian_rotation(operator.rotation, crystal.cell))
        if abs(normal @ tangent) > 0.1:
            continue
        away = np.cross(normal, tangent)
        sides = _sides(operator, crystal, k_frac, distance * away / np.linalg.norm(away))
        if sides is not None and (said := _exchanged(bloch, operator, sides, filling)):
            return (
                f"filled states change their eigenvalues of the mirror ⊥ {_direction(normal)}"
                f": {said}"
            )
    return ""


def enforced_level(
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    crystal: Crystal,
    touching: Touching,
    filling: int,
    *,
    spinful: bool,
) -> str:
    """The one level of the little group that all touching bands belong to; empty if there is none.

    Parameters
    ----------
    operators
        The Hamiltonian's own group, antiunitary operations included.
    """
    if touching.multiplicity < 2 or not operators:
        return ""
    try:
        group = find_little_group(
            list_operations(operators, crystal.cell, spinful=spinful), touching.k_frac
        )
        irreps = compute_irreps(group)
        names = name_irreps(group, irreps, "k", None)
    except TopovetError:
        return ""  # no group, or one without a name: nothing is claimed
    at_k = [operator_at(operators[i], touching.k_frac[None])[0] for i in group.members]
    states = np.linalg.eigh(bloch.at(touching.k_frac[None])[0])[1]
    bands = slice(filling - touching.n_below, filling + touching.n_above)
    content = measure_content(states[:, bands], isotypic_projectors(irreps, np.array(at_k)), names)
    present = [irrep for irrep, n in zip(irreps, content.counts, strict=True) if n]
    one = present and all(i.level_dimension == touching.multiplicity for i in present)
    if not content.resolved or not one:
        return ""
    return (
        f"one level of {touching.multiplicity} bands, the least that the little group of "
        f"{len(group.members)} operations{' with time reversal' if len(group.reversing) else ''} "
        "allows them"
    )


def quantising_operation(
    operators: Sequence[WannierOperator], periodic: tuple[bool, bool, bool]
) -> bool:
    """Whether an antiunitary operation of square +1 leaves every k: Berry phases are 0 or pi."""
    used = np.flatnonzero(periodic)
    k = np.where(periodic, [np.sqrt(2) - 1, np.sqrt(3) - 1, np.sqrt(5) - 2], 0.0)[None]
    for operator in operators:
        turn = operator.k_rotation[np.ix_(used, used)]
        if not operator.antiunitary or not np.array_equal(turn, np.eye(len(used))):
            continue
        a = operator_at(operator, k)[0]
        square: ComplexArray = a @ a.conj()
        if np.abs(square - np.eye(len(a))).max() < FIXED:
            return True
    return False


def _sides(
    operator: WannierOperator, crystal: Crystal, k_frac: FloatArray, away: FloatArray
) -> tuple[FloatArray, FloatArray] | None:
    """Two fixed k on either side of a fixed k, (3,) each; None if the operation moves them."""
    turn = operator.k_rotation
    moved = k_frac @ turn - k_frac
    if np.abs(moved - np.round(moved)).max() > FIXED:
        return None
    step = away @ np.linalg.inv(crystal.reciprocal)
    if np.abs(step @ turn - step).max() > FIXED:
        return None
    shift = np.round(moved)
    home, image = np.array(k_frac, dtype=float), np.array(k_frac, dtype=float)
    total, order = np.zeros(3), 0
    for _ in range(12):  # onto the axis or plane, by averaging over the powers of the operation
        total, order = total + image, order + 1
        image = image @ turn - shift
        if np.abs(image - home).max() < FIXED and order in (2, 3, 4, 6):
            break
    centre = total / order
    return centre - step, centre + step


def _exchanged(
    bloch: BlochSum,
    operator: WannierOperator,
    sides: tuple[FloatArray, FloatArray],
    filling: int,
) -> str:
    """How the counts of eigenvalues differ between two k; empty if they do not."""
    counts = []
    for k_frac in sides:
        k = k_frac[None]
        try:
            found = count_eigenvalues(bloch.at(k)[0], operator_at(operator, k)[0], k_frac, filling)
        except NotInvariantError:
            return ""
        if found.purity < MIN_PURITY:
            return ""
        counts.append(found)
    return _difference(*counts)


def _difference(before: EigenvalueCount, after: EigenvalueCount) -> str:
    """Angles whose counts change; those of a screw or glide turn slowly with k."""
    if len(before.angles_pi) != len(after.angles_pi):
        return ""
    parts = []
    spacing = 2.0 / len(before.angles_pi)
    for angle, n in zip(before.angles_pi, before.counts, strict=True):
        apart = np.abs((np.array(after.angles_pi) - angle + 1) % 2 - 1)
        i = int(apart.argmin())
        if apart[i] > spacing / 3:
            return ""
        if after.counts[i] != n:
            parts.append(f"exp(iπ·{angle:.3g}) {n} → {after.counts[i]}")
    return ", ".join(parts)


def _direction(axis: FloatArray) -> str:
    return "(" + ", ".join(f"{x:.3g}".replace("-", "−") for x in np.round(axis, 4) + 0.0) + ")"
