"""Critical values do not depend on how the same crystal is described (hypothesis)."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lattice_models import LatticeModel, bhz, wilson_dirac
from model_changes import with_cell, with_energy_shift, with_home_cells, with_order, with_origin
from tipping_searches import by_parity

MODELS = (wilson_dirac(m=-2.6), wilson_dirac(m=-1.6), bhz(m=0.6))
PAIRS = (4, 4, 3)


def told_again(model: LatticeModel, rng: np.random.Generator) -> LatticeModel:
    """Other origin, order of the orbitals, home cells, zero of energy."""
    periodic = np.array(model.crystal.periodic)
    pairs = rng.permutation(model.n_orb // 2)
    order = (2 * pairs[:, None] + np.arange(2)).reshape(-1)
    moves = np.repeat(rng.integers(-1, 2, (model.n_orb // 2, 3)), 2, axis=0) * periodic
    model = with_origin(model, rng.uniform(-0.5, 0.5, 3) * periodic)
    model = with_home_cells(with_order(model, order), moves)
    return with_energy_shift(model, float(rng.normal()))


@settings(max_examples=12, deadline=None)
@given(seed=st.integers(0, 10**6), which=st.integers(0, 2))
def test_description_does_not_matter(seed: int, which: int) -> None:
    model = MODELS[which]
    plain = {key[1]: p for key, p in by_parity(model).items() if key[0]}
    told = by_parity(told_again(model, np.random.default_rng(seed)))
    for (group, direction), point in told.items():
        if not group:
            continue
        # the order decides which of two groups is moved: one up is the other down
        first = group.endswith(" s")
        wanted = plain[direction if first else {"up": "down", "down": "up"}[direction]]
        assert point.outcome == wanted.outcome
        assert point.z2_after == wanted.z2_after
        if wanted.critical is not None:
            sign = 1 if first else -1
            assert point.critical == pytest.approx(sign * wanted.critical, abs=3e-6)
            assert set(point.k) == set(wanted.k)


def test_another_cell_renames_the_trim_and_keeps_the_values() -> None:
    model = wilson_dirac(m=-1.6)
    sheared = np.array([[1, 1, 0], [0, 1, 0], [0, 0, 1]])
    one, other = by_parity(model)["Bi s", "up"], by_parity(with_cell(model, sheared))["Bi s", "up"]
    assert other.critical == pytest.approx(one.critical, abs=3e-6)
    assert (one.z2_after or (9,))[0] == (other.z2_after or (8,))[0]
