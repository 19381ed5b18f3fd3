"""Films: faces, spin, thickness."""

from __future__ import annotations

import numpy as np
import pytest

from boundary_models import prepared
from chern_models import random_model
from lattice_models import bhz, wilson_dirac
from topovet.boundary.slab import compute_slab_bands, compute_thickness_series, slab_hamiltonian
from topovet.boundary.spectral import compute_surface_maps, surface_path


def test_a_film_is_the_bulk_chain_cut_off() -> None:
    model = random_model(6, inversion=False)
    _, _, stack = prepared(model, (0, 0, 1))
    k = np.array([0.21, 0.43])
    h = slab_hamiltonian(stack.planes_at(k[None]), 3)[0]
    by_hand = np.zeros((3, 8, 3, 8), dtype=complex)
    matrix = prepared(model, (0, 0, 1))[0].matrix
    r_new = model.r_cells @ np.linalg.inv(matrix).round().astype(int)
    for r, block in zip(r_new, model.h_r, strict=True):
        for a in range(3):
            if 0 <= a + r[2] < 3:
                by_hand[a, :, a + r[2]] += np.exp(2j * np.pi * (k @ r[:2])) * block
    expected = np.linalg.eigvalsh(by_hand.reshape(24, 24))
    assert np.linalg.eigvalsh(h) == pytest.approx(expected, abs=1e-10)


def test_faces_of_a_topological_film() -> None:
    """One Kramers pair at the surface TRIM on each face, split by next to nothing."""
    cut, _, stack = prepared(wilson_dirac(m=-2.0), (0, 0, 1))
    bands = compute_slab_bands(stack, cut, np.array([[0.0, 0.0], [0.02, 0.0]]), 14, face_planes=3)
    middle = np.argsort(np.abs(bands.energies_ev[0]))[:4]
    assert np.abs(bands.energies_ev[0, middle]).max() < 1e-3
    on_faces = bands.lower_face[0, middle] + bands.upper_face[0, middle]
    assert on_faces.min() > 0.9
    assert bands.thickness_ang == pytest.approx(14 * 3.8)
    # total weights: one for each orbital of the face
    assert bands.lower_face.sum(axis=1) == pytest.approx(3 * 8)


def test_spins_of_the_two_faces_cancel() -> None:
    """Inversion and Theta pair the levels of the two faces, with opposite spins."""
    cut, _, stack = prepared(wilson_dirac(m=-2.0), (0, 0, 1))
    k = np.array([[0.03, 0.01], [-0.03, -0.01]])
    bands = compute_slab_bands(stack, cut, k, 14, face_planes=14)
    spins = []
    for i in range(2):
        state = int(np.flatnonzero(bands.energies_ev[i] > 0)[0])
        # inversion and time reversal make levels of the two faces equal: tell them apart by hand
        pair = [state, state + 1]
        assert np.ptp(bands.energies_ev[i, pair]) < 1e-3
        spins.append(bands.spin_lower[i, pair].sum(axis=0))
    # summed over both faces nothing is left
    assert np.abs(spins).max() < 1e-6


def test_spin_map_is_helical_and_odd() -> None:
    """Surface spin lies in the plane, normal to k, and turns with it: Theta, C4 and the mirrors."""
    model = wilson_dirac(m=-2.0)
    cut, place, stack = prepared(model, (0, 0, 1))
    k_par = np.array([[-0.04, 0.0], [-0.02, 0.0], [0.02, 0.0], [0.04, 0.0]])
    path = (k_par, np.arange(4.0), (0, 3), ("X", "X"))
    names = tuple(t.name for t in place.terminations)
    maps = compute_surface_maps(stack, cut, path, np.array([0.125, 0.3]), 0.02, 2, names)
    for found in maps:
        spin = found.spin
        assert np.abs(spin[:, :, 1:]).max() < 1e-9  # nothing along k, nothing along the normal
        assert spin[:2, :, 0] == pytest.approx(-spin[:1:-1, :, 0], abs=1e-9)
        assert np.abs(spin[1, 0, 0]) > 0.2 * found.density[1, 0]
    # seen from outside both faces have the same helicity, as inversion demands
    assert maps[0].spin[:, :, 0] == pytest.approx(maps[1].spin[:, :, 0], abs=1e-9)
    assert np.all(np.abs(maps[0].spin[:, :, 0]) <= maps[0].density + 1e-12)


def test_spin_of_map_and_film_point_the_same_way() -> None:
    """The film ends towards -n with the face of the upper half: level by level the same spin."""
    model = wilson_dirac(m=-2.0)
    cut, place, stack = prepared(model, (0, 0, 1))
    k_par = np.array([[0.03, 0.0], [0.05, 0.0]])
    film = compute_slab_bands(stack, cut, k_par, 16)
    names = tuple(t.name for t in place.terminations)
    level = float(film.energies_ev[1][film.energies_ev[1] > 0][0])
    path = (k_par, np.arange(2.0), (0, 1), ("G", "X"))
    maps = compute_surface_maps(stack, cut, path, np.array([level, level + 1]), 0.01, 2, names)
    along = cut.cell[0] / np.linalg.norm(cut.cell[0])
    above = (film.energies_ev[1] > 0) & (film.energies_ev[1] < level + 0.1)
    for found, spins, outward in (
        (maps[0], film.spin_lower, -cut.normal_cart),
        (maps[1], film.spin_upper, cut.normal_cart),
    ):
        sideways = spins[1, above].sum(axis=0) @ np.cross(outward, along)
        assert abs(sideways) > 0.3
        assert np.sign(found.spin[1, 0, 0]) == np.sign(sideways)
        # a Lorentzian's height is its weight over pi times the broadening
        assert found.spin[1, 0, 0] * np.pi * 0.01 == pytest.approx(sideways, rel=0.05)


def test_hybridisation_gap_dies_out_exponentially() -> None:
    """At the Dirac momentum of the Wilson-Dirac film the split falls by a constant factor a plane.

    With H(0, 0, k_z) the mass is m + 2c + c cos k_z; at m = -2.5 and a = c = 1 the end states of
    the chain decay as 0.5^j per plane (the root of the Jackiw-Rebbi equation: -(m + 2c)/c), and so
    does the overlap of the two faces."""
    cut, _, stack = prepared(wilson_dirac(m=-2.5), (0, 0, 1))
    found = compute_thickness_series(stack, cut, np.zeros(2), 2, range(4, 12))
    gaps = np.array(found.gap_ev)
    assert gaps[1:] / gaps[:-1] == pytest.approx(0.5, rel=0.02)
    assert found.thickness_ang[0] == pytest.approx(4 * 3.8)
    assert found.k_par == (0.0, 0.0)


def test_a_ribbon_of_spinors_has_its_levels_at_the_edges() -> None:
    cut, _, stack = prepared(bhz(m=1.0), (0, 1, 0))
    bands = compute_slab_bands(stack, cut, np.array([[0.02, 0.0]]), 30, face_planes=8)
    inside = np.abs(bands.energies_ev[0]) < 0.5
    assert inside.sum() == 4
    # two levels on each edge, spin up and down along z
    for face, spin in ((bands.lower_face, bands.spin_lower), (bands.upper_face, bands.spin_upper)):
        assert face[0, inside].sum() == pytest.approx(2.0, abs=0.05)
        assert spin[0, inside].sum(axis=0) == pytest.approx([0, 0, 0], abs=1e-6)


@pytest.mark.parametrize("miller", [(0, 0, 1), (1, 1, 1), (1, 2, 0)])
def test_paths_close_and_measure_their_length(miller) -> None:
    cut, _, _ = prepared(wilson_dirac(m=-2.0), miller)
    k, distance, at, labels = surface_path(cut, 60)
    assert len(k) == len(distance)
    assert len(at) == len(labels)
    g = np.linalg.inv(cut.cell).T[:2] * 2 * np.pi
    flat = g - np.outer(g @ cut.normal_cart, cut.normal_cart)
    lengths = np.linalg.norm(np.diff(k, axis=0) @ flat, axis=1)
    assert np.diff(distance) == pytest.approx(lengths, rel=1e-6)
    assert k[at[labels.index("G")]] == pytest.approx([0, 0])
