"""Parities about an inferred inversion, and signs that the Hamiltonian leaves open."""

from __future__ import annotations

import numpy as np
import pytest

from lattice_models import (
    LatticeModel,
    Terms,
    atomic_insulator,
    bhz,
    build_basis,
    fu_kane_mele,
    kane_mele,
    wilson_dirac,
)
from model_changes import parity_of, with_atomic_pair
from topovet.errors import NoInversionError
from topovet.invariants.inferred_parity import compute_inferred_parity
from topovet.invariants.results import ParityWitness
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.symmetry.inference import infer_inversion
from topovet.symmetry.sites import declared_sites


def inferred_parity(model: LatticeModel) -> ParityWitness:
    built = model.tight_binding()
    sites = declared_sites(model.basis.positions_frac, model.crystal)
    inferred = infer_inversion(
        built, model.crystal, sites, np.array(model.centre), spinful=model.spinful
    )
    return compute_inferred_parity(
        build_bloch_sum(built),
        inferred,
        model.filling,
        model.crystal.periodic,
        kramers=model.spinful,
    )


@pytest.mark.parametrize(
    "model",
    [
        kane_mele(),
        bhz(m=1.0),
        bhz(m=-1.0),
        *(wilson_dirac(m=m) for m in (-4.0, -2.0, 0.0, 2.0)),
        fu_kane_mele(dt=(0.4, 0, 0, 0)),
        fu_kane_mele(dt=(-0.4, 0, 0, 0)),
        atomic_insulator(filled="s"),
        atomic_insulator(spinful=False),
    ],
    ids=lambda model: model.name,
)
def test_indices_are_those_of_the_declared_operator(model: LatticeModel) -> None:
    declared, found = parity_of(model), inferred_parity(model)
    assert found.status == declared.status == "ok"
    assert found.z2 == declared.z2
    if declared.kappa is not None:
        assert found.kappa in (declared.kappa, -declared.kappa)
    counts = [(t.n_plus, t.n_minus) for t in declared.trim]
    assert [(t.n_plus, t.n_minus) for t in found.trim] in (counts, [n[::-1] for n in counts])


def test_atomic_pair_that_nothing_couples_does_not_matter() -> None:
    model = with_atomic_pair(wilson_dirac(m=-2.0), (0.5, 0.5, 0.5), 1, -8.0)
    found = inferred_parity(model)
    assert found.status == "ok"
    assert found.z2 == (1, 0, 0, 0)


def _two_bands_that_cross() -> LatticeModel:
    """An s band and a flat level on one site, uncoupled; the level is lowest but at Gamma."""
    terms = Terms(4)
    s, level = slice(0, 2), slice(2, 4)
    terms.add_onsite(s, 2.0 * np.eye(2))
    terms.add_onsite(level, 0.0 * np.eye(2))
    for r_cell in ((1, 0, 0), (0, 1, 0), (0, 0, 1)):
        terms.add(r_cell, s, s, -0.5 * np.eye(2))
    terms.add_onsite(s, 0.3 * np.eye(2))
    terms.add_onsite(level, 0.6 * np.eye(2))
    terms.add_onsite(s, -0.4 * np.eye(2))
    r_cells, h_r = terms.arrays()
    position = (0.0, 0.0, 0.0)
    basis = build_basis([("X1", position, "s"), ("X1", position, "pz")])
    crystal = Crystal(4 * np.eye(3), ("X",), np.array([position]))
    return LatticeModel("crossing", crystal, basis, r_cells, h_r, 2, True, position)


def test_index_that_hangs_on_an_open_sign_is_not_known() -> None:
    """Filled is the s state at Gamma and the level elsewhere: s and p, or both even?"""
    model = _two_bands_that_cross()
    declared = parity_of(model)
    assert declared.z2 is not None
    assert declared.z2[0] == 1  # with the declared parities
    found = inferred_parity(model)
    assert found.status == "failed"
    assert "no hopping couples" in found.reason
    assert found.z2 is None
    assert found.z4 is None


def test_refused_inference_has_no_parities() -> None:
    with pytest.raises(NoInversionError, match="misses the strong bonds"):
        inferred_parity(kane_mele(lambda_v=0.6))
