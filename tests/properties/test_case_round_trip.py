"""A model written as a case folder and read again is the same model (hypothesis)."""

from __future__ import annotations

import tempfile
from dataclasses import replace
from pathlib import Path

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from case_writer import write_case
from lattice_models import LatticeModel, bhz, fu_kane_mele, kane_mele, wilson_dirac
from model_changes import parity_of, with_home_cells, with_order
from topovet.intake.case_toml import read_settings
from topovet.intake.discovery import find_case
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.structure import read_structure
from topovet.intake.wannier_input.win import read_win
from topovet.model.assemble import assemble
from topovet.model.build_basis import build_basis
from topovet.model.declarations import declare

models = st.sampled_from(
    [
        kane_mele(),
        bhz(m=5.7, d=0.2),
        wilson_dirac(m=2.3),
        fu_kane_mele(dt=(0.3, -0.2, 0.1, 0.0)),
    ]
)


def read_back(model: LatticeModel, folder: Path) -> LatticeModel:
    files = find_case(folder)
    assert files.hr is not None
    assert files.win is not None
    assert files.structure is not None
    assert files.settings is not None
    hamiltonian = read_hr(files.hr)
    declared = declare(
        files,
        hamiltonian,
        read_win(files.win),
        read_structure(files.structure),
        read_settings(files.settings),
    )
    assert declared.settings.filling is not None
    assert declared.spinful is not None
    lattice = assemble(hamiltonian, None, declared.crystal.periodic, spinful=declared.spinful)
    return replace(
        model,
        crystal=declared.crystal,
        basis=build_basis(declared.orbitals, declared.crystal),
        r_cells=lattice.model.r_cells,
        h_r=lattice.model.h_r,
        filling=declared.settings.filling,
        spinful=declared.spinful,
    )


@settings(max_examples=15, deadline=None)
@given(models, st.integers(0, 2**20))
def test_degeneracies_are_divided_out(model: LatticeModel, seed: int) -> None:
    """Weights other than 1 and shuffled R, written as Wannier90 writes them."""
    rng = np.random.default_rng(seed)
    order = rng.permutation(len(model.r_cells))
    shuffled = replace(model, r_cells=model.r_cells[order], h_r=model.h_r[order])
    weights = rng.integers(1, 7, size=len(order))
    with tempfile.TemporaryDirectory() as folder:
        write_case(shuffled, Path(folder), degeneracies=weights, decimals=12)
        back = read_back(model, Path(folder))
    np.testing.assert_array_equal(back.r_cells, model.tight_binding().r_cells)
    np.testing.assert_allclose(back.h_r, model.tight_binding().h_r, atol=1e-12)
    assert parity_of(back).z2 == parity_of(model).z2


@settings(max_examples=15, deadline=None)
@given(models, st.integers(0, 2**20))
def test_declared_basis_is_the_models_own(model: LatticeModel, seed: int) -> None:
    """Orbitals in any order and from any home cell, declared one by one with their spin."""
    rng = np.random.default_rng(seed)
    reach = np.array(model.crystal.periodic) * 1
    moves = np.repeat(rng.integers(-reach, reach + 1, size=(model.n_orb // 2, 3)), 2, axis=0)
    told = with_order(with_home_cells(model, moves), rng.permutation(model.n_orb))
    with tempfile.TemporaryDirectory() as folder:
        back = read_back(told, write_case(told, Path(folder)))
    np.testing.assert_allclose(back.basis.positions_frac, told.basis.positions_frac, atol=1e-9)
    np.testing.assert_array_equal(back.basis.harmonics, told.basis.harmonics)
    np.testing.assert_array_equal(back.basis.spinors, told.basis.spinors)
    np.testing.assert_allclose(back.crystal.cell, told.crystal.cell, atol=1e-9)
    assert back.crystal.periodic == told.crystal.periodic
    assert (back.filling, back.spinful) == (told.filling, told.spinful)
    assert parity_of(back).z2 == parity_of(model).z2
