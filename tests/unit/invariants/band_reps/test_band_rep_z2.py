"""Published formulas on the lattice of band structures: zero on atomic limits, odd where strong."""

from __future__ import annotations

import itertools

import pytest

from space_group_samples import sample_group
from topovet.invariants.band_reps.z2 import NOTHING, z2_from_levels
from topovet.symmetry.bandreps.indicator_group import (
    BandRepresentations,
    compute_band_representations,
)


def _found(number: int, *, spinful: bool = True) -> BandRepresentations:
    sample = sample_group(number)
    return compute_band_representations(
        sample.cell, sample.rotations, sample.translations, spinful=spinful
    )


@pytest.mark.parametrize("number", [2, 14, 82, 122, 147, 216, 219, 225])
def test_atomic_limits_have_no_index(number: int) -> None:
    """Sources of the formulas: Fu, Kane 2007; Khalaf et al. 2018."""
    found = _found(number)
    for row in found.rows:
        assert not any(z2_from_levels(found, row.multiplicities))


@pytest.mark.parametrize("number", [81, 82, 112, 120, 122, 215, 218, 219])
def test_the_indicator_of_groups_with_s4_alone_is_the_strong_index(number: int) -> None:
    """X_BS = Z2 there (Po, Vishwanath, Watanabe 2017) and kappa_4 mod 2 = nu_0."""
    found = _found(number)
    assert found.indicator_group == (2,)
    (generator,) = found.generators
    assert z2_from_levels(found, generator.astype(int)) == (1, None, None, None)


def test_the_generators_of_inversion_alone_reach_every_index() -> None:
    """Z2 x Z2 x Z2 x Z4 of P-1 holds (nu0; nu1 nu2 nu3) modulo 2: all 16 values occur."""
    found = _found(2)
    classes = set()
    for weights in itertools.product((0, 1), repeat=4):
        vector = sum(w * g for w, g in zip(weights, found.generators, strict=True))
        vector = vector + sum(row.multiplicities for row in found.rows)
        classes.add(z2_from_levels(found, vector.astype(int)))
    assert len(classes) == 16


def test_no_index_without_spin_or_without_s4_and_inversion() -> None:
    for found in (_found(2, spinful=False), _found(187), _found(1)):
        assert z2_from_levels(found, found.rows[0].multiplicities) == NOTHING
