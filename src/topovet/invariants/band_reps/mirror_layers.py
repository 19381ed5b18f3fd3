"""Mirrors of a group, and the mirror Chern numbers that their planes of k can have.

Only layers that lie on a mirror carry mirror Chern numbers. With a layers on the mirror m and b on
the one half a lattice period n further on, the planes k.n = 0 and 1/2 have

    C(0) = a + b,   C(1/2) = a - b      (signs as for m),

and a is delta(m) modulo 2, b is delta({1|n} m). In a lattice where both mirrors are one, up to a
lattice translation, there is one plane of k, and its zone is two of the layer's: C = 2 a. Layers
askew to the mirror come in pairs, whose +i states are those of a whole layer, without a Chern
number. An operation that takes a plane to itself and its mirror Chern number to the opposite makes
it 0.

A set of numbers is kept as residues modulo 24, which all congruences here divide.
"""

from __future__ import annotations

import functools
import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from topovet.invariants.mirror_chern import mirror_planes
from topovet.invariants.mirror_witness import mirror_normal
from topovet.model.plane import Cell, KPlane
from topovet.symmetry.equivalent_planes import plane_key
from topovet.symmetry.operations import TRANSLATION_TOLERANCE
from topovet.symmetry.operators import cartesian_rotation, spin_rotation

RESIDUES = 24
"""Modulus of all sets: the least common multiple of 8 (Z8) and 6 (sixfold axes)."""

PLACES = ("k=0", "k=G/2")


@dataclass(frozen=True, slots=True, eq=False)
class GroupMirror:
    """One mirror of a group; glides are none.

    Attributes
    ----------
    operation, cell
        Position in the group, and the lattice translation (3,) that leaves no glide.
    through
        (3,) a point on it, fractional.
    normal
        (3,) unit normal; the mirror acts on spin as -i normal.sigma.
    row
        (3,) shortest lattice vector along the normal.
    planes
        The plane k.row = 0, and k.row = 1/2 where that is another one; names as in
        `MirrorPlane.name`.
    vanishes
        For each plane, whether an operation of the group makes its number 0.
    """

    operation: int
    cell: Cell
    through: FloatArray
    normal: FloatArray
    row: Cell
    planes: tuple[KPlane, ...]
    vanishes: tuple[bool, ...]


def find_group_mirrors(
    cell: FloatArray, rotations: IntArray, translations: FloatArray
) -> tuple[GroupMirror, ...]:
    """The mirrors without glide among the operations of a group.

    Parameters
    ----------
    cell
        (3, 3) angstrom, lattice vectors as rows.
    rotations, translations
        (n, 3, 3) and (n, 3), a group modulo lattice translations.
    """
    found: list[GroupMirror] = []
    turns = np.array([cartesian_rotation(w, cell) for w in rotations])
    group = [
        _Turned(w, t, turn, spin_rotation(turn))
        for w, t, turn in zip(rotations, translations, turns, strict=True)
    ]
    for i, (w, t) in enumerate(zip(rotations, translations, strict=True)):
        reflects = np.trace(w) == 1 and np.array_equal(w @ w, np.eye(3, dtype=np.int64))
        step = _without_glide(w, t) if reflects else None
        if step is None:
            continue
        proper = t + np.array(step)
        normal = mirror_normal(turns[i])
        head = mirror_planes(w)
        name = "m" + head[0].name.removesuffix(" at 0")
        planes = tuple(
            KPlane(f"{name} {place}", p.origin, p.across, p.along)
            for p, place in zip(head, PLACES, strict=False)
        )
        row = plane_key(planes[0])[0]
        vanishes = tuple(
            any(
                _turns_over(_Turned(w, proper, turns[i], group[i].spin), normal, row, half, g)
                for g in group
            )
            for half in (False, True)[: len(planes)]
        )
        through = (proper - w @ proper) / 4
        found.append(GroupMirror(i, step, through, normal, row, planes, vanishes))
    return tuple(found)


def _without_glide(rotation: IntArray, translation: FloatArray) -> Cell | None:
    """The lattice translation that takes the glide part away; None where none does."""
    for x, y, z in itertools.product((0, 1, -1), repeat=3):
        glide = (np.eye(3) + rotation) @ (translation + np.array([x, y, z]))
        if np.abs(glide).max() < TRANSLATION_TOLERANCE:
            return x, y, z
    return None


@dataclass(frozen=True, slots=True, eq=False)
class _Turned:
    """An operation {W|w} with its Cartesian matrix (3, 3) and its SU(2) matrix (2, 2)."""

    rotation: IntArray
    translation: FloatArray
    cartesian: FloatArray
    spin: ComplexArray


def _turns_over(mirror: _Turned, normal: FloatArray, row: Cell, half: bool, g: _Turned) -> bool:
    """Whether g takes the plane k.row = 0 or 1/2 to itself and its mirror Chern number to minus it.

    u_g u_m u_g^-1 = s u_m for spin and g m g^-1 = {1|L} m with L along the normal: the mirror
    eigenvalue gets the factor s exp(-2 pi i k.L). The Berry curvature turns over with the plane's
    orientation about its normal.
    """
    image = g.rotation @ np.array(row)
    if not (np.array_equal(image, row) or np.array_equal(-image, row)):
        return False
    moved = g.translation + g.rotation @ mirror.translation - mirror.rotation @ g.translation
    steps = round(float((moved - mirror.translation) @ np.array(row)) / float(np.dot(row, row)))
    turned = g.spin @ mirror.spin @ g.spin.conj().T
    of_spin = round(float(np.trace(turned @ mirror.spin.conj().T).real) / 2)
    of_place = -1 if half and steps % 2 else 1
    axis = float(np.linalg.det(g.cartesian) * (g.cartesian @ normal) @ normal)
    return of_spin * of_place * round(axis) == -1


@functools.cache
def number_grid(n_planes: int) -> tuple[IntArray, ...]:
    """Residues of C on each plane, one axis for each, (24,) or two of (24, 24)."""
    values = np.arange(RESIDUES)
    return tuple(np.meshgrid(*[values] * n_planes, indexing="ij"))


def layer_counts(n_planes: int) -> tuple[IntArray, BoolArray]:
    """Layers a on the mirror for each choice of residues, modulo 12, and where a is whole."""
    total = np.sum(number_grid(n_planes), axis=0)
    return np.asarray(total // 2 % 12), np.asarray(total % 2 == 0)


def reduce_residues(
    residues: Sequence[int], modulus: int = RESIDUES
) -> tuple[tuple[int, ...], int]:
    """The same set with the smallest modulus, e.g. 2, 6, 10 … modulo 24 as (2,), 4."""
    mask = np.zeros(modulus, dtype=bool)
    mask[list(residues)] = True
    for m in range(1, modulus + 1):
        if modulus % m == 0 and np.array_equal(mask, np.roll(mask, m)):
            return tuple(np.flatnonzero(mask[:m]).tolist()), m
    raise AssertionError("a set is itself modulo its own modulus")
