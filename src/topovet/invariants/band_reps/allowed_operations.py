"""One operation of each class that can protect an invariant modulo 2: rotations, glides, others.

Left out are operations that add nothing: powers of a rotation of higher order about the same axis,
threefold axes (their cube crosses every layer three times or, modulo 2, once), products of an
inversion or a mirror with a threefold axis. Proper mirrors have Chern numbers instead.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.invariants.band_reps.allowed_results import GLIDE, INVERSION, ROTATION, S4, SCREW
from topovet.model.plane import Cell
from topovet.notation import k_text
from topovet.symmetry.irrep_names import is_positive, operation_turns, rotation_axis
from topovet.symmetry.operations import TRANSLATION_TOLERANCE, name_operation
from topovet.symmetry.operators import cartesian_rotation
from topovet.symmetry.textbook_names import operation_kinds

ASKED = ("6", "4", "2", "m", "-1", "-4")


@dataclass(frozen=True, slots=True)
class ProtectingOperation:
    """A representative of its class.

    Attributes
    ----------
    kind
        "rotation invariant" and so on.
    name
        For people: "2 [0 0 1] + (0, 0, 1/2)", with a point on it where that matters.
    index, cell
        Position in the group, and the lattice translation that follows.
    """

    kind: str
    name: str
    index: int
    cell: Cell


def list_operations(
    cell: FloatArray, rotations: IntArray, translations: FloatArray, *, say_where: bool
) -> tuple[ProtectingOperation, ...]:
    """The classes of a group, rotations first.

    Parameters
    ----------
    cell
        (3, 3) angstrom.
    rotations, translations
        A group modulo lattice translations.
    say_where
        Parallel axes, centres and planes may differ: name a point.
    """
    kinds = operation_kinds(rotations)
    powers = {p.tobytes() for i, kind in enumerate(kinds) for p in _powers(rotations[i], kind)}
    found: list[ProtectingOperation] = []
    seen: set[bytes] = set()
    for kind in ASKED:
        # of two senses of turning the positive one stands for both
        order = sorted(
            (i for i, k in enumerate(kinds) if k == kind),
            key=lambda i: not is_positive(rotation_axis(cartesian_rotation(rotations[i], cell))),
        )
        for i in order:
            w = rotations[i]
            if w.tobytes() in seen or w.tobytes() in powers:
                continue
            seen.update(_class_of(w, rotations))
            operation = _described(i, kind, cell, w, translations[i], say_where)
            if operation is not None:
                found.append(operation)
    return tuple(found)


def _powers(rotation: IntArray, kind: str) -> list[IntArray]:
    """Lower powers of a rotation of order 4 or 6, and of S4."""
    if kind not in ("4", "6", "-4"):
        return []
    n = 6 if kind == "6" else 4
    return [np.linalg.matrix_power(rotation, p) for p in range(2, n - 1)]


def _class_of(rotation: IntArray, rotations: IntArray) -> set[bytes]:
    """Rotations that the group makes of one and of its inverse."""
    both = (rotation, np.round(np.linalg.inv(rotation)).astype(rotation.dtype))
    inverses = np.round(np.linalg.inv(rotations)).astype(rotation.dtype)
    return {(g @ w @ h).tobytes() for w in both for g, h in zip(rotations, inverses, strict=True)}


def _described(
    index: int, kind: str, cell: FloatArray, w: IntArray, t: FloatArray, say_where: bool
) -> ProtectingOperation | None:
    """Name and lattice translation with the smallest screw or glide part; None for a mirror."""
    step, intrinsic = min(
        (
            (s, _intrinsic(w, t + np.array(s), kind))
            for s in itertools.product((0, 1, -1), repeat=3)
        ),
        key=lambda found: round(float(np.linalg.norm(found[1] @ cell)), 6),
    )
    moves = np.abs(intrinsic).max() > TRANSLATION_TOLERANCE
    if kind == "m" and not moves:
        return None
    what = {"m": GLIDE, "-1": INVERSION, "-4": S4}.get(kind, SCREW if moves else ROTATION)
    head, blank, rest = name_operation(w, np.zeros(3), cell).partition(" ")
    name = head.rstrip("+-") + blank + rest  # either sense of turning
    if moves:  # along the axis or in the plane, not reduced by lattice vectors
        name += f" + {k_text((np.round(intrinsic, 6) + 0.0).tolist(), plain=True)}"
    if say_where:
        fixed = np.linalg.lstsq(np.eye(3) - w, t + np.array(step) - intrinsic, rcond=None)[0]
        name += f" through {k_text((np.round(fixed, 6) + 0.0).tolist(), plain=True)}"
    return ProtectingOperation(what, name, index, (step[0], step[1], step[2]))


def _intrinsic(w: IntArray, t: FloatArray, kind: str) -> FloatArray:
    """The part of a translation along the axis or in the glide plane: the mean over all powers."""
    n = 2 if kind in ("m", "-1") else operation_turns(kind)
    powers = [np.linalg.matrix_power(w, p) for p in range(n)]
    return np.asarray(np.mean(powers, axis=0) @ t)
