"""The oracle of the sabotage suite against published phases, both sides of each transition."""

from __future__ import annotations

import numpy as np
import pytest
from truth import Lattice, smallest_gap_ev, true_z2

from lattice_models import (
    LatticeModel,
    atomic_insulator,
    bhz,
    fu_kane_mele,
    kane_mele,
    wilson_dirac,
)


def lattice_of(model: LatticeModel) -> Lattice:
    return Lattice(model.r_cells, model.h_r, model.crystal.periodic)


@pytest.mark.parametrize(
    ("model", "z2"),
    [
        # Kane, Mele, PRL 95, 146802: nontrivial up to lambda_v = 3 sqrt(3) lambda_so
        (kane_mele(lambda_v=0.29), (1,)),
        (kane_mele(lambda_v=0.33), (0,)),
        (kane_mele(lambda_v=0.1, lambda_r=0.05), (1,)),
        (bhz(m=0.2), (1,)),
        (bhz(m=-0.2), (0,)),
        # Fu, Kane, PRB 76, 045302, and Fu, Kane, Mele, PRL 98, 106803: see lattice_models
        (wilson_dirac(m=-3.1), (0, 0, 0, 0)),
        (wilson_dirac(m=-2.9), (1, 0, 0, 0)),
        (wilson_dirac(m=-0.9), (0, 1, 1, 1)),
        (wilson_dirac(m=1.1), (1, 1, 1, 1)),
        (fu_kane_mele(dt=(0.4, 0, 0, 0)), (1, 1, 1, 1)),
        (fu_kane_mele(dt=(0, -0.4, 0, 0)), (0, 1, 0, 0)),
        (atomic_insulator(), (0, 0, 0, 0)),
    ],
)
def test_published_phases(model: LatticeModel, z2: tuple[int, ...]) -> None:
    assert true_z2(lattice_of(model), model.filling) == z2


@pytest.mark.parametrize(
    "model",
    [
        wilson_dirac(m=-1.0),
        kane_mele(lambda_v=3 * np.sqrt(3) * 0.06),
        wilson_dirac(m=-2.0, zeeman=0.01),
    ],
    ids=["closed", "closed at K", "without time reversal"],
)
def test_no_index(model: LatticeModel) -> None:
    assert true_z2(lattice_of(model), model.filling) is None


def test_odd_filling_has_no_index() -> None:
    assert true_z2(lattice_of(atomic_insulator()), 5) is None


def test_gap_of_kane_mele() -> None:
    """|6 sqrt(3) lambda_so - 2 lambda_v| at K (PRL 95, 226801, and 146802)."""
    gap = smallest_gap_ev(lattice_of(kane_mele(lambda_v=0.2)), 2)
    assert gap == pytest.approx(6 * np.sqrt(3) * 0.06 - 0.4, abs=1e-6)
