"""The list of allowed invariants against crystals made of topological layers, counted by eye.

Indicators and mirror Chern numbers are those of the package's own counting on these Hamiltonians;
which layers an operation crosses, and how many lie on a mirror, is read off the construction (Song,
Zhang, Fang, Fang, Nat. Commun. 9, 3530 (2018), doi:10.1038/s41467-018-06010-w).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pytest

from chern_models import double_wilson_dirac, snte
from lattice_models import LatticeModel
from layer_constructions import Layer, layered
from mirror_groups import GroupedModel, grouped
from topovet.arrays import FloatArray, IntArray
from topovet.invariants.band_reps.allowed import find_allowed
from topovet.invariants.band_reps.allowed_operations import list_operations
from topovet.invariants.band_reps.allowed_results import (
    AllowedInvariants,
    AllowedValues,
    IndicatorValues,
    PlaneResidue,
)
from topovet.invariants.mirror_indicators import compute_mirror_indicators
from topovet.invariants.parity import compute_parity
from topovet.invariants.rotation_indicators import compute_s4_indicator
from topovet.symmetry.equivalent_planes import plane_key
from topovet.symmetry.inversion import build_inversion

Point = tuple[float, float, float]
HOME: Point = (0.0, 0.0, 0.0)
BODY_CENTRED = [[1, 0, 0], [0, 1, 0], [0.5, 0.5, 0.5]]


@dataclass(frozen=True, slots=True, eq=False)
class Measured:
    """A model's own group with its indicators."""

    case: GroupedModel
    rotations: IntArray
    translations: FloatArray
    values: IndicatorValues

    def allowed(self, counted: Mapping[str, int] | None = None) -> AllowedInvariants:
        cell = self.case.model.crystal.cell
        return find_allowed(cell, self.rotations, self.translations, self.values, counted)


def measured(model: LatticeModel, centre: Point = HOME) -> Measured:
    """Indicators by the package's own functions."""
    case = grouped(model)
    crystal, filling = model.crystal, model.filling
    s4 = compute_s4_indicator(case.bloch, case.operators, crystal, filling, kramers=True)
    inversion = build_inversion(model.basis, crystal, np.array(centre))
    parity = compute_parity(case.bloch, inversion, filling, (True,) * 3, kramers=True)
    assert parity.z2 is not None
    residues = []
    for found in compute_mirror_indicators(case.bloch, case.operators, crystal, filling):
        if found.mirror_chern is not None:
            row, offset = plane_key(found.plane)
            axis, through = found.axis_cart, found.through
            residues.append(
                PlaneResidue(row, offset > 0, axis, through, found.n, found.mirror_chern)
            )
    nu_0, nu_1, nu_2, nu_3 = parity.z2
    values = IndicatorValues(
        strong=nu_0,
        weak=(nu_1, nu_2, nu_3),
        z4=parity.z4,
        centre=centre,
        z8=s4.z8,
        z8_centre=s4.z8_centre,
        z8_axis=s4.axes[0].axis_cart if s4.axes else None,
        planes=tuple(residues),
    )
    rotations = np.array([o.rotation for o in case.operators])
    translations = np.array([o.translation for o in case.operators])
    return Measured(case, rotations, translations, values)


def crossed(layers: Sequence[Layer], rotation: IntArray, translation: FloatArray) -> int:
    """Layers between a point and its image, modulo 2; a primitive orthogonal cell."""
    x = np.array([0.123, 0.277, 0.391])
    y = rotation @ x + translation
    places = [("xyz".index(layer.normal), layer) for layer in layers if layer.m < 8]
    steps = [np.floor(y[a] - la.site[a]) - np.floor(x[a] - la.site[a]) for a, la in places]
    return int(np.abs(steps).sum()) % 2


def check_stack(layers: Sequence[Layer], found: Measured) -> AllowedInvariants:
    """What was counted, by the package and by eye, is in the list; returns the list."""
    listed = found.allowed()
    counted = found.case.mirror_witness().numbers
    narrowed = found.allowed(counted)
    assert (listed.status, narrowed.status) == ("ok", "ok")
    by_plane = dict(listed.planes)
    assert all(by_plane[name].holds(number) for name, number in counted.items())
    cell = found.case.model.crystal.cell
    entries = {i.operation: i.values for i in narrowed.invariants if not i.planes}
    for operation in list_operations(
        cell, found.rotations, found.translations, say_where=any(found.values.weak or ())
    ):
        moved = found.translations[operation.index] + np.array(operation.cell)
        seen = crossed(layers, found.rotations[operation.index], moved)
        assert entries[operation.name].holds(seen), operation
    return listed


Z8_STACKS = {
    "z=0": ([Layer(HOME, "z", 6.0)], 2, 0),
    "z=1/2": ([Layer((0, 0, 0.5))], 0, 0),
    "x=0 and y=0": ([Layer((0, 0.5, 0), "x"), Layer((0.5, 0, 0), "y")], 0, 1),
    "x=1/2 and y=1/2": ([Layer((0.5, 0, 0), "x"), Layer((0, 0.5, 0), "y")], 0, 0),
}


@pytest.mark.parametrize("name", Z8_STACKS)
def test_z8_counts_layers(name: str) -> None:
    """Z8 = 4 delta(C4) - 2 a modulo 8 on layers of every kind that P4/m has; a and delta by eye.

    a is -1 on z = 0: the mirror Chern number of this layer.
    """
    layers, from_mirror, turn = Z8_STACKS[name]
    found = measured(layered(layers))
    assert found.values.z8 == (4 * turn + from_mirror) % 8
    check_stack(layers, found)


@pytest.mark.parametrize(("normal", "z8"), [("z", 6), ("xy", 4)])
def test_z8_in_a_body_centred_lattice(normal: str, z8: int) -> None:
    layers = [Layer(HOME)] if normal == "z" else [Layer((0, 0.5, 0), "x"), Layer((0.5, 0, 0), "y")]
    found = measured(layered(layers, BODY_CENTRED))
    assert found.values.z8 == z8
    counted = found.case.mirror_witness().numbers
    assert sorted(map(abs, counted.values())) == (
        [0, 0, 0, 0, 2] if normal == "z" else [0, 0, 0, 2, 2]
    )
    assert found.allowed(counted).status == "ok"


def test_layers_that_a_screw_permutes() -> None:
    """Two normal to x and two normal to z, each pair made one by {C2z|1/2} and by an inversion."""
    layers = [
        Layer((0.25, 0, 0), "x"),
        Layer((0.75, 0, 0.5), "x"),
        Layer((0, 0, 0.25)),
        Layer((0, 0, 0.75)),
    ]
    listed = check_stack(layers, measured(layered(layers), (0.0, 0.0, 0.25)))
    assert {"screw invariant", "glide invariant"} <= {i.kind for i in listed.invariants}


def _set(
    listed: AllowedInvariants, combination: Sequence[AllowedValues]
) -> dict[str, tuple[object, int | None]]:
    return {
        (i.planes[0] if i.planes else f"{i.kind} {i.operation}"): (v.allowed, v.modulus)
        for i, v in zip(listed.invariants, combination, strict=True)
    }


def test_tin_telluride_has_two_ways_to_its_indicator() -> None:
    """Z8 = 4: 2 modulo 4 on {110}, or 4 modulo 8 on {100}.

    Khalaf et al., PRX 8, 031070 (2018) (from memory). It has -2 on {110} (Hsieh et al., Nat.
    Commun. 3, 982 (2012)), so that C4 crosses a layer.
    """
    found = measured(snte())
    listed = found.allowed()
    planes = dict(listed.planes)
    on_100, on_110, fourfold = "m(1 1 0) k=0", "m(1 -1 0) k=0", "rotation invariant 4 [-1 -1 1]"
    sets = [_set(listed, c) for c in listed.combinations]
    assert sorted((s[on_100], s[on_110], s[fourfold]) for s in sets) == [
        (((0,), 8), ((2,), 4), ((1,), None)),
        (((4,), 8), ((0,), 4), ((0,), None)),
    ]
    counted = found.case.mirror_witness().numbers
    left = found.allowed(counted)
    assert _set(left, [i.values for i in left.invariants])[fourfold] == ((1,), None)
    assert not planes[on_110].holds(-1)
    assert not planes[on_100].holds(2)
    # each of them may be 0, but not all together
    assert all(values.holds(0) for values in planes.values())
    assert found.allowed(dict.fromkeys(planes, 0)).status == "failed"


def test_two_strong_insulators() -> None:
    """kappa = 2 with a mirror Chern number of 2 (Khalaf et al. 2018) is in the list, 1 is not."""
    found = measured(double_wilson_dirac())
    counted = found.case.mirror_witness().numbers
    listed = found.allowed(counted)
    assert listed.status == "ok"
    wrong = {name: number + 1 for name, number in counted.items()}
    assert not any(dict(listed.planes)[name].holds(n) for name, n in wrong.items())


@pytest.mark.endurance
def test_many_stacks() -> None:
    """Random layers at quarters of the cell, some permuted by a screw or a fourfold axis."""
    rng = np.random.default_rng(5)
    checked = 0
    for _ in range(400):
        layers = _random_stack(rng)
        if len({layer.site for layer in layers}) < len(layers):
            continue
        model = layered(layers)
        case = grouped(model)
        rotations = np.array([o.rotation for o in case.operators])
        if len(np.unique(rotations.reshape(-1, 9), axis=0)) < len(rotations):
            continue  # the cell repeats a smaller one
        inversion = [o for o in case.operators if np.array_equal(o.rotation, -np.eye(3))]
        if inversion:
            x, y, z = (inversion[0].translation / 2).tolist()
            check_stack(layers, measured(model, (x, y, z)))
            checked += 1
    assert checked > 80


def _random_stack(rng: np.random.Generator) -> list[Layer]:
    def draw() -> Layer:
        x, y, z = rng.choice([0, 0.25, 0.5, 0.75], 3).tolist()
        return Layer((x, y, z), "xyz"[rng.integers(3)], (1.5, 6.0)[rng.integers(2)])

    layers = [draw() for _ in range(rng.integers(1, 4))]
    images = {
        1: [
            Layer((-x % 1, -y % 1, -z % 1), la.normal, la.m)
            for la in layers
            for x, y, z in [la.site]
        ],
        2: [
            Layer((-y % 1, x, z), {"x": "y", "y": "x", "z": "z"}[la.normal], la.m)
            for la in layers
            for x, y, z in [la.site]
        ],
        3: [
            Layer((-x % 1, -y % 1, (z + 0.5) % 1), la.normal, la.m)
            for la in layers
            for x, y, z in [la.site]
        ],
    }
    return layers + images.get(int(rng.integers(4)), [])
