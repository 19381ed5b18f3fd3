"""Band representations against matrices of operations on real orbitals, built another way."""

from __future__ import annotations

import numpy as np
import pytest

from space_group_samples import GroupSample, atomic_basis, orbit, sample_group
from topovet.arrays import FloatArray, IntArray
from topovet.symmetry.bandreps.indicator_group import (
    BandRepresentations,
    compute_band_representations,
)
from topovet.symmetry.operators import operator_at, spin_rotation

GROUPS = [3, 33, 61, 82, 122, 136, 144, 147, 194, 214, 220, 227]


def _of_orbitals(
    found: BandRepresentations, sample: GroupSample, sites: FloatArray, l_max: int
) -> IntArray:
    """Multiplicities of all orbitals on some sites, by traces of their operators."""
    operators = sample.operators(atomic_basis(sites, l_max))
    counts = []
    for table in found.tables:
        k = table.group.k_frac[None]
        traces = np.array([np.trace(operator_at(operators[g], k)[0]) for g in table.group.members])
        counts.append(table.count(traces))
    return np.concatenate(counts)


@pytest.mark.parametrize("number", GROUPS)
def test_orbitals_on_maximal_positions_and_elsewhere(number: int) -> None:
    """s orbitals with both spins on a site carry tr u(g) of its site-symmetry group; s and p
    orbitals on a general position are a sum of atomic limits."""
    sample = sample_group(number)
    found = compute_band_representations(
        sample.cell, sample.rotations, sample.translations, spinful=True
    )
    for i, place in enumerate(found.orbits):
        spin = [np.trace(spin_rotation(w)) for w in place.table.group.cartesian]
        wanted = place.table.count(np.array(spin))
        rows = [row for row in found.rows if row.orbit == i]
        induced = sum(wanted[row.corep] * row.multiplicities for row in rows)
        sites = orbit(sample, place.sites_frac[0])
        assert len(sites) == place.multiplicity
        assert np.array_equal(induced, _of_orbitals(found, sample, sites, 0))
    sites = orbit(sample, [0.137, 0.229, 0.411])
    vector = _of_orbitals(found, sample, sites, 1 if len(sites) < 16 else 0)
    assert found.indicator(vector) == (0,) * len(found.indicator_group)
    assert not found.violated(vector)


@pytest.mark.parametrize("number", [2, 81, 147, 174, 216])
def test_generators_have_unit_indicators_and_obey_compatibility(number: int) -> None:
    sample = sample_group(number)
    found = compute_band_representations(
        sample.cell, sample.rotations, sample.translations, spinful=True
    )
    units = np.eye(len(found.indicator_group), dtype=int).tolist()
    assert [list(found.indicator(g) or ()) for g in found.generators] == units
    assert not any(found.violated(g.astype(float)) for g in found.generators)


def test_bands_with_one_level_exchanged_cannot_be_gapped() -> None:
    """C2 eigenvalues at Gamma changed and those along the axis not: the line is crossed."""
    sample = sample_group(195)
    found = compute_band_representations(
        sample.cell, sample.rotations, sample.translations, spinful=False
    )
    vector = next(row.multiplicities for row in found.rows if row.n_bands == 1).copy()
    gamma = next(i for i, s in enumerate(found.strata) if not s.point.any())
    columns = slice(found.starts[gamma], found.starts[gamma + 1])
    three = next(j for j, c in enumerate(found.tables[gamma].coreps) if c.dimension == 3)
    vector *= 3
    vector[columns] = 0
    vector[found.starts[gamma] + three] = 1
    assert found.indicator(vector) is None
    assert found.violated(vector)
