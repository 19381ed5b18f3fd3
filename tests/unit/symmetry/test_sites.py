"""Sites and home cells from centres and from declared positions."""

from __future__ import annotations

import numpy as np
import pytest

from inverted_models import random_inverted_model
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import build_model
from topovet.symmetry.sites import (
    assign_sites,
    declared_sites,
    estimate_positions,
    nominal_positions,
    relocate_strays,
    settle_homes,
)

BOND = Crystal(6 * np.eye(3), ("A", "B"), np.array([[0, 0, 0], [0.4, 0, 0]]))
"""Two atoms 2.4 angstrom apart."""


def test_scattered_centres_belong_to_their_atom() -> None:
    centres = np.array([[0.03, 0, 0], [0.37, 0, 0.02], [-0.02, 0.01, 0], [0.41, 0, 0]])
    sites = assign_sites(centres, BOND)
    assert sites.atoms.tolist() == [0, 1]
    assert sites.site_of.tolist() == [0, 1, 0, 1]
    assert not sites.homes.any()
    np.testing.assert_allclose(sites.positions_frac, [[0.005, 0.005, 0], [0.39, 0, 0.01]])
    nominal = nominal_positions(sites, BOND)
    np.testing.assert_array_equal(nominal, BOND.positions_frac[[0, 1, 0, 1]])
    assert sites.offsets_ang[0] == pytest.approx(0.18)


def test_middle_of_a_bond_is_a_site_of_its_own() -> None:
    sites = assign_sites(np.array([[0.2, 0, 0], [0.0, 0, 0], [0.201, 0, 0]]), BOND)
    assert sites.atoms.tolist() == [-1, 0]
    assert sites.site_of.tolist() == [0, 1, 0]
    np.testing.assert_allclose(sites.positions_frac[0], [0.2005, 0, 0])


def test_a_hybrid_pointing_along_the_bond_stays_on_its_atom() -> None:
    half_an_angstrom = 0.5 / 6
    sites = assign_sites(np.array([[half_an_angstrom, 0, 0]]), BOND)
    assert sites.atoms.tolist() == [0]


def test_centres_far_from_atoms_cluster_without_them() -> None:
    bare = Crystal(6 * np.eye(3), (), ())
    centres = np.array([[0.5, 0.5, 0.5], [0.54, 0.5, 0.5], [0.2, 0.5, 0.5], [1.52, 0.5, 0.5]])
    sites = assign_sites(centres, bare)
    assert sites.site_of.tolist() == [0, 0, 1, 0]
    assert sites.homes.tolist() == [[0, 0, 0], [0, 0, 0], [0, 0, 0], [1, 0, 0]]
    np.testing.assert_allclose(sites.positions_frac[0], [0.52, 0.5, 0.5])


def test_home_cells_count_from_the_first_function_of_a_site() -> None:
    centres = np.array([[1.0, 0, 0], [0.0, 2.0, 0], [1.4, 0, -1.0]])
    sites = assign_sites(centres, BOND)
    assert sites.homes.tolist() == [[0, 0, 0], [-1, 2, 0], [0, 0, 0]]
    np.testing.assert_allclose(sites.positions_frac, [[1, 0, 0], [1.4, 0, -1]])
    np.testing.assert_allclose(sites.function_positions, centres)


def test_no_home_cells_along_a_vacuum() -> None:
    film = Crystal(6 * np.eye(3), ("A",), np.zeros((1, 3)), (True, True, False))
    sites = assign_sites(np.array([[0.0, 0, 0], [1.0, 0, 1.0]]), film)
    assert sites.homes.tolist() == [[0, 0, 0], [1, 0, 0]]


def test_declared_positions_give_the_same_structure() -> None:
    declared = np.array([[0.0, 0, 0], [0.0, 0, 0], [0.4, 0, 0], [1.4, 0, 0]])
    by_position = declared_sites(declared, BOND)
    by_centre = assign_sites(declared + 0.01, BOND)
    np.testing.assert_array_equal(by_position.site_of, by_centre.site_of)
    np.testing.assert_array_equal(by_position.homes, by_centre.homes)
    assert by_position.atoms.tolist() == [0, 1]
    assert by_position.source == "declared"


def test_declared_position_beside_an_atom_stays_where_it_is() -> None:
    sites = declared_sites(np.array([[0.05, 0, 0]]), BOND)
    assert sites.atoms.tolist() == [-1]
    np.testing.assert_allclose(sites.positions_frac, [[0.05, 0, 0]])


def test_hoppings_know_the_positions_roughly() -> None:
    rng = np.random.default_rng(0)
    made = random_inverted_model(
        rng,
        [(2, True), (1, False)],
        cell=5 * np.eye(3),
        centre=np.zeros(3),
        spinful=True,
        radius=2,
        move_homes=True,
    )
    estimate, coupled = estimate_positions(made.model)
    assert coupled.max() == 0
    off = estimate - made.positions_frac
    assert np.abs(off - np.median(off, axis=0)).max() < 0.5


def test_printed_supercell_images_are_brought_home() -> None:
    """Wannier90 prints centres modulo the supercell; the hoppings say which image is meant."""
    rng = np.random.default_rng(1)
    made = random_inverted_model(
        rng, [(2, True)], cell=5 * np.eye(3), centre=np.zeros(3), spinful=False, radius=2
    )
    printed = made.positions_frac.copy()
    printed[1] += [4, 0, 0]
    printed[0] += [0, -4, 0]
    sites = assign_sites(printed, made.crystal, model=made.model)
    assert sites.rehomed == (0, 1)
    np.testing.assert_allclose(sites.function_positions, made.positions_frac, atol=1e-9)
    untouched = assign_sites(printed, made.crystal)
    assert untouched.rehomed == ()
    np.testing.assert_allclose(untouched.function_positions, printed)


def test_home_cell_one_off_is_only_doubted_when_asked_to() -> None:
    """One cell off is within what the estimate may miss: only symmetry can confirm it."""
    rng = np.random.default_rng(1)
    made = random_inverted_model(
        rng, [(2, True)], cell=5 * np.eye(3), centre=np.zeros(3), spinful=False, radius=2
    )
    declared = made.positions_frac.copy()
    declared[2] += [1, 0, 0]
    sites = declared_sites(declared, made.crystal)
    assert settle_homes(sites, made.crystal, made.model) is sites
    settled = settle_homes(sites, made.crystal, made.model, doubt_cells=0.5)
    assert settled.rehomed == (2,)
    np.testing.assert_allclose(settled.function_positions, made.positions_frac, atol=1e-9)
    right = declared_sites(made.positions_frac, made.crystal)
    assert settle_homes(right, made.crystal, made.model, doubt_cells=0.5) is right


def test_strays_are_put_on_the_free_atom() -> None:
    h_r = np.zeros((3, 2, 2), dtype=complex)
    h_r[1, 0, 1] = h_r[1, 1, 0] = 1.0
    model = build_model(np.array([[-1, 0, 0], [0, 0, 0], [1, 0, 0]]), h_r, spinful=False)
    sites = assign_sites(np.array([[0.0, 0, 0], [0.0, 0.5, 0.5]]), BOND)
    assert sites.atoms.tolist() == [0, -1]
    moved = relocate_strays(sites, BOND, model)
    assert moved is not None
    assert moved.atoms.tolist() == [0, 1]
    assert moved.relocated == (1,)
    np.testing.assert_allclose(moved.function_positions[1], [0.4, 0, 0])
    assert moved.offsets_ang[1] == pytest.approx(6 * np.sqrt(0.4**2 + 0.5))


def test_without_strays_or_free_atoms_there_is_no_other_reading() -> None:
    model = build_model(np.zeros((1, 3), dtype=int), np.eye(2)[None] + 0j, spinful=False)
    all_placed = assign_sites(np.array([[0.0, 0, 0], [0.4, 0, 0]]), BOND)
    assert relocate_strays(all_placed, BOND, model) is None
    bare = Crystal(6 * np.eye(3), (), ())
    nowhere = assign_sites(np.array([[0.0, 0, 0], [0.4, 0, 0]]), bare)
    assert relocate_strays(nowhere, bare, model) is None
