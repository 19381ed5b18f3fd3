"""Inversion centres of the Hamiltonian, and structure files told from another origin."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from lattice_models import atomic_insulator, fu_kane_mele, kane_mele, wilson_dirac
from model_changes import with_origin
from topovet.model.crystal import Crystal
from topovet.symmetry.centre_search import (
    candidate_centres,
    centre_shift,
    search_centres,
)
from topovet.symmetry.sites import assign_sites, declared_sites


def test_candidates_are_all_midpoints_that_work() -> None:
    model = fu_kane_mele()
    sites = declared_sites(model.basis.positions_frac, model.crystal)
    found = candidate_centres(sites, model.crystal)
    # on either atom the other one has no image; half-way between them all is well
    np.testing.assert_allclose(found, [[0.125, 0.125, 0.125]], atol=1e-12)


def test_two_kinds_of_site_leave_their_own_positions() -> None:
    model = atomic_insulator()
    sites = declared_sites(model.basis.positions_frac, model.crystal)
    np.testing.assert_allclose(candidate_centres(sites, model.crystal), [[0, 0, 0]])


def test_rocksalt_with_equal_sets_has_a_false_candidate() -> None:
    """Midpoints of two unlike atoms map the sites, but not the Hamiltonian."""
    crystal = Crystal(4 * np.eye(3), (), ())
    sites = declared_sites(np.array([[0, 0, 0], [0.5, 0.5, 0.5]]), crystal)
    np.testing.assert_allclose(candidate_centres(sites, crystal), [[0, 0, 0], [0.25, 0.25, 0.25]])


@pytest.mark.parametrize("model", [wilson_dirac(m=-2.0), fu_kane_mele(), kane_mele()])
def test_structure_file_with_another_origin_is_found_out(model: object) -> None:
    moved = np.array([0.11, 0.07, 0.0])
    assert hasattr(model, "basis")
    structure = with_origin(model, moved)  # type: ignore[arg-type]
    sites = assign_sites(model.basis.positions_frac, structure.crystal)
    centres = np.array([structure.centre])
    best = search_centres(
        model.tight_binding(),  # type: ignore[attr-defined]
        structure.crystal,
        sites,
        centres,
        spinful=True,
    )[0]
    assert best.inferred.reliability == "good"
    assert not best.in_structure
    assert best.shift_frac is not None
    np.testing.assert_allclose(best.shift_frac, -moved, atol=1e-9)
    length = np.linalg.norm(moved @ structure.crystal.cell)
    assert best.shift_ang == pytest.approx(length)


def test_structure_that_agrees_has_no_shift() -> None:
    model = fu_kane_mele()
    sites = declared_sites(model.basis.positions_frac, model.crystal)
    other_centre = np.array([model.centre]) + np.array([0.5, 0, 0.5])
    (trial,) = search_centres(
        model.tight_binding(), model.crystal, sites, other_centre, spinful=True
    )
    assert trial.in_structure
    assert trial.shift_ang == pytest.approx(0, abs=1e-9)


def test_structure_without_centres_has_nothing_to_compare() -> None:
    assert centre_shift(np.zeros(3), np.zeros((0, 3)), Crystal(np.eye(3), (), ())) == (None, None)


def test_atoms_are_not_asked() -> None:
    """The structure of the wrong symmetry does not keep the search from its answer."""
    model = atomic_insulator()
    sites = declared_sites(model.basis.positions_frac, model.crystal)
    other = replace(model.crystal, positions_frac=np.array([[0, 0, 0], [0.5, 0.5, 0.3]]))
    (trial,) = search_centres(model.tight_binding(), other, sites, np.zeros((0, 3)), spinful=True)
    assert trial.inferred.reliability == "good"
    assert trial.shift_frac is None
    assert not trial.in_structure
