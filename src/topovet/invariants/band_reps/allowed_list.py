"""The list of invariants of a group, from what is left of layers and mirror Chern numbers."""

from __future__ import annotations

import numpy as np

from topovet.arrays import BoolArray, IntArray
from topovet.invariants.band_reps.allowed_case import IndicatedGroup
from topovet.invariants.band_reps.allowed_operations import ProtectingOperation
from topovet.invariants.band_reps.allowed_results import (
    FIXED,
    INVERSION,
    LAYERS,
    MIRROR,
    MODULO,
    OPEN,
    STRONG,
    WEAK,
    AllowedInvariant,
    AllowedInvariants,
    AllowedValues,
)
from topovet.invariants.band_reps.mirror_layers import (
    RESIDUES,
    GroupMirror,
    layer_counts,
    reduce_residues,
)
from topovet.model.plane import Cell

MOST_COMBINATIONS = 8
"""More sets of values than this say nothing that the single invariants do not."""

BY_GROUP = "the group alone"
BY_PLANE = "the Z2 index of the plane (modulo 2)"
BY_LAYERS = "crossings of layers add up"


def list_invariants(case: IndicatedGroup, masks: list[BoolArray]) -> AllowedInvariants:
    """The list from what is left of delta and of mirror Chern numbers."""
    operations = case.group.operations[bool(case.weak.any())]
    entries = [_strong(case), _weak(case)]
    columns = [_same(case, entries[0].values), _weak_columns(case)]
    for kind, mirror, places, images in _mirror_rows(case):
        mask = masks[case.group.mirrors.index(mirror)]
        values = _numbers(np.asarray(mask.any(axis=0)), mirror, places)
        source = _mirror_source(case, mirror, places, kind)
        name = mirror.planes[0].name.rpartition(" ")[0]
        entries.append(AllowedInvariant(kind, name, images, values, source))
        columns.append(tuple(_numbers(m, mirror, places) for m in mask))
    for operation in operations:
        entries.append(_of_operation(case, operation))
        columns.append(_operation_columns(case, operation))
    combinations = tuple(dict.fromkeys(zip(*columns, strict=True))) if case.layered else ()
    told_apart = 1 < len(combinations) <= MOST_COMBINATIONS
    planes = tuple(
        (plane.name, _numbers(np.asarray(mask.any(axis=0)), mirror, (j,)))
        for mirror, mask in zip(case.group.mirrors, masks, strict=True)
        for j, plane in enumerate(mirror.planes)
    )
    return AllowedInvariants("ok", "", tuple(entries), combinations if told_apart else (), planes)


def _same(case: IndicatedGroup, values: AllowedValues) -> tuple[AllowedValues, ...]:
    return (values,) * len(case.choices.choices)


def _strong(case: IndicatedGroup) -> AllowedInvariant:
    values = case.values
    if values.strong is None:
        return AllowedInvariant(
            STRONG, "", (), AllowedValues(OPEN, (0, 1)), "no inversion and no S4 that could be read"
        )
    return AllowedInvariant(
        STRONG, "", (), AllowedValues(FIXED, (values.strong,)), values.strong_from
    )


def _weak(case: IndicatedGroup) -> AllowedInvariant:
    left = tuple(_cell(nu) for nu in case.weak)
    status = FIXED if len(left) == 1 else OPEN
    alone = case.values.weak is None
    source = "parities of the planes k_i = 1/2" if not alone else BY_GROUP
    return AllowedInvariant(WEAK, "", (), AllowedValues(status, left), source)


def _weak_columns(case: IndicatedGroup) -> tuple[AllowedValues, ...]:
    return tuple(AllowedValues(FIXED, (_cell(nu),)) for nu in case.choices.weak)


MirrorRow = tuple[str, GroupMirror, tuple[int, ...], tuple[str, ...]]


def _mirror_rows(case: IndicatedGroup) -> list[MirrorRow]:
    """Planes of one mirror of each class, and for nu0 = 0 the layers on it; with all images."""
    rows: list[MirrorRow] = []
    seen: set[int] = set()
    for i, mirror in enumerate(case.group.mirrors):
        if i in seen:
            continue
        images = {tuple((w @ np.array(mirror.row)).tolist()) for w in case.group.rotations}
        alike = [
            j
            for j, other in enumerate(case.group.mirrors)
            if tuple(other.row) in images or tuple(-c for c in other.row) in images
        ]
        seen.update(alike)
        for place in range(len(mirror.planes)):
            names = tuple(case.group.mirrors[j].planes[place].name for j in alike)
            rows.append((MIRROR, mirror, (place,), names))
        if len(mirror.planes) > 1 and case.layered:
            rows.append((LAYERS, mirror, (0, 1), ()))
    return rows


def _numbers(mask: BoolArray, mirror: GroupMirror, places: tuple[int, ...]) -> AllowedValues:
    """Residues left on one plane, or of half the sum over both."""
    if len(places) > 1:
        layers, _ = layer_counts(2)
        left, modulus = reduce_residues(np.unique(layers[mask]).tolist(), RESIDUES // 2)
        if all(mirror.vanishes):
            return AllowedValues(FIXED, (0,))
    else:
        if mirror.vanishes[places[0]]:
            return AllowedValues(FIXED, (0,))
        others = tuple(a for a in range(mask.ndim) if a != places[0])
        left, modulus = reduce_residues(np.flatnonzero(mask.any(axis=others)).tolist())
    return AllowedValues(OPEN, ()) if modulus == 1 else AllowedValues(MODULO, left, modulus)


def _mirror_source(
    case: IndicatedGroup, mirror: GroupMirror, places: tuple[int, ...], kind: str
) -> str:
    """What limits a mirror Chern number."""
    if all(mirror.vanishes[j] for j in places):
        return "an operation of the group takes it to its opposite"
    parts = []
    if kind == MIRROR and (case.values.strong is not None or places == (1,)):
        parts.append(BY_PLANE)
    for residue in case.values.planes:
        if residue.row == mirror.row and residue.half in [j == 1 for j in places]:
            parts.append(f"C{residue.n} eigenvalues (modulo {residue.n})")
    if case.layered:
        parts.append(BY_LAYERS)
        axis = case.values.z8_axis
        along = axis is not None and abs(float(np.dot(axis, mirror.normal))) > 1 - 1e-6
        if case.values.z8 is not None and along:
            parts.append("Z8")
    return ", ".join(dict.fromkeys(parts)) or "nothing limits it"


def _of_operation(case: IndicatedGroup, operation: ProtectingOperation) -> AllowedInvariant:
    at_all = set(case.group.everything.of(operation.index, operation.cell).tolist())
    left = tuple(sorted(set(case.choices.of(operation.index, operation.cell).tolist())))
    if len(at_all) == 1:
        values, source = AllowedValues(FIXED, (at_all.pop(),)), BY_GROUP
    elif not case.layered:
        values = AllowedValues(OPEN, (0, 1))
        source = "not counted unless the strong index is 0"
    elif operation.kind == INVERSION and case.values.z4 is not None:
        values, source = AllowedValues(FIXED, left), "kappa/2 modulo 2"
    else:
        values = AllowedValues(FIXED if len(left) == 1 else OPEN, left)
        source = BY_LAYERS
    return AllowedInvariant(operation.kind, operation.name, (), values, source)


def _operation_columns(
    case: IndicatedGroup, operation: ProtectingOperation
) -> tuple[AllowedValues, ...]:
    deltas = case.choices.of(operation.index, operation.cell).tolist()
    return tuple(AllowedValues(FIXED, (d,)) for d in deltas)


def _cell(nu: IntArray) -> Cell:
    x, y, z = (int(c) for c in nu)
    return x, y, z
