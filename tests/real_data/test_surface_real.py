"""Surfaces of the real cases: odd against even, and the cone of Bi2Se3.

The references are those of the first-principles side: parities of the plane-wave states, and Wilson
loops where there is no inversion. None of them is an input of the witness.
"""

from __future__ import annotations

import functools

import numpy as np
import pytest

from real_cases import CENTROSYMMETRIC, reference, run_of
from topovet.boundary.cleavage import rank_surfaces
from topovet.boundary.layers import LayerStack
from topovet.boundary.projected import projected_edges
from topovet.boundary.recut import Miller, Recut
from topovet.boundary.results import SurfaceWitness
from topovet.boundary.slab import compute_slab_bands, compute_thickness_series
from topovet.boundary.witness import prepare_surface

pytestmark = pytest.mark.real_data

NO_INVERSION = {"BiTeI": (0, 0, 0, 0), "BiTeI_pressed": (1, 0, 0, 1), "CdTe": (0, 0, 0, 0)}

COSTLY = ("Sb", "Bi2Se3_k666", "Bi2Se3_mlwf", "Bi2Se3_centres_off", "Sb2Se3_compressed")
"""Half a minute together, and much like others; run with the endurance tests."""

EV_ANG_IN_M_PER_S = 1e-10 / 6.582119569e-16
"""1 eV angstrom over hbar, in m/s."""


@functools.cache
def _surface(case: str) -> SurfaceWitness:
    """The witness alone, without what else a verdict needs."""
    found: SurfaceWitness = run_of(case).result("surface")
    return found


def _expected(case: str) -> tuple[int, ...]:
    if case in NO_INVERSION:
        return NO_INVERSION[case]
    return tuple(reference(case, "dft_parity.json")["indices_wannier_occupied"])


@pytest.mark.parametrize(
    "case",
    [
        pytest.param(name, marks=pytest.mark.endurance) if name in COSTLY else name
        for name in (*CENTROSYMMETRIC, *NO_INVERSION)
    ],
)
def test_crossings_are_odd_where_the_bulk_is_strong(case: str) -> None:
    surface = _surface(case)
    assert (surface.status, surface.reason) == ("ok", "")
    expected = _expected(case)
    assert surface.z2_strong == expected[0]
    assert surface.z2 is not None
    assert all(a in (None, b) for a, b in zip(surface.z2, expected, strict=True))
    for line in surface.lines:
        counts = [c.net % 2 for c in line.crossings if c.net is not None]
        assert len(counts) >= 4
        assert set(counts) == {line.parity}


@functools.cache
def _prepared(case: str, miller: tuple[int, int, int]) -> tuple[Recut, LayerStack, int]:
    run = run_of(case)
    based = run.result("hamiltonian-with-basis")
    cut, _, stack = prepare_surface(
        based.lattice.model,
        run.result("declarations").crystal,
        based.basis.positions_frac,
        miller,
        most_dropped_mev=0.0,
    )
    return cut, stack, run.result("electrons").filling


@pytest.mark.parametrize("case", ["Bi2Se3", "Sb2Se3"])
def test_the_natural_surface_lies_between_the_quintuple_layers(case: str) -> None:
    """(001) of the hexagonal setting, between two planes of Se; 9.5 to 10 angstrom to the next."""
    surface = _surface(case)
    assert surface.miller == (1, 1, 1)
    assert surface.chosen_by == "weakest bonds"
    assert all("Se outermost" in name for name in surface.terminations)


FCC_PLANES = {"PbTe": (1, 0, 0), "Si": (1, 1, 1), "CdTe": (1, 1, 0)}
"""Cleavage of rock salt, diamond and zinc blende, of their cubic cells: textbook, e.g. Kelly,
Groves, Kidd, Crystallography and Crystal Defects (Wiley, 2000), and Yu, Cardona, Fundamentals of
Semiconductors (Springer, 2010) for the last (from memory)."""


OTHER_PLANES = {"Sb": (1, 1, 1), "BiTeI": (0, 0, 1), "BiTeI_pressed": (0, 0, 1)}
"""Of the Hamiltonian's cells. Antimony: (0001) of its hexagonal cell, between bilayers, perfect
(Handbook of Mineralogy, from memory). BiTeI: between iodine and tellurium, Ishizaka et al., Nat.
Mater. 10, 521 (2011), doi:10.1038/nmat3051."""


@pytest.mark.parametrize(
    ("case", "plane"),
    [
        pytest.param(*item, marks=[] if item[0] in ("Sb", "CdTe") else pytest.mark.endurance)
        for item in (OTHER_PLANES | FCC_PLANES).items()
    ],
)
def test_crystals_are_cut_where_they_cleave(case: str, plane: Miller) -> None:
    run = run_of(case)
    based, declared = run.result("hamiltonian-with-basis"), run.result("declarations")
    planes = rank_surfaces(
        based.lattice.model,
        declared.crystal,
        based.basis.positions_frac,
        run.result("electrons").filling,
        run.result("space-group").rotations,
    )
    miller = planes[0].miller
    if case in FCC_PLANES:
        # their cubic cells lie along the Cartesian axes
        normal = np.linalg.inv(declared.crystal.cell) @ np.array(miller)
        cubic = np.sort(np.abs(normal))[::-1] / np.abs(normal).max()
        assert cubic == pytest.approx(plane, abs=1e-3)
    else:
        assert miller == plane


def test_bi2se3_has_one_cone_in_its_gap() -> None:
    """One Kramers pair on each face at Gamma, in the gap, and a velocity of 3 to 6e5 m/s.

    Sources: Zhang, Liu, Qi, Dai, Fang, Zhang, Nat. Phys. 5, 438 (2009), doi:10.1038/nphys1270 (5e5
    m/s by density functionals), and Xia et al., Nat. Phys. 5, 398 (2009), doi:10.1038/nphys1274
    (photoemission, about 5e5 m/s along Gamma-M); both from memory.
    """
    cut, stack, filling = _prepared("Bi2Se3", (1, 1, 1))
    k_par = np.array([[0.0, 0.0], [0.004, 0.0], [0.012, 0.0]])
    bands = compute_slab_bands(stack, cut, k_par, 8)
    edges = projected_edges(stack, k_par, filling)
    inside = (bands.energies_ev > edges.top_ev[:, None] + 0.02) & (
        bands.energies_ev < edges.bottom_ev[:, None] - 0.02
    )
    # two levels on each of the two faces, and no other in the gap
    assert inside.sum(axis=1).tolist() == [4, 4, 4]
    on_faces = (bands.lower_face + bands.upper_face)[inside]
    assert on_faces.min() > 0.65
    levels = bands.energies_ev[inside].reshape(3, 4)
    assert np.ptp(levels[0]) < 1e-3
    k_ang = np.linalg.norm(k_par @ cut.reciprocal, axis=1)
    opening = (levels[1, 2:].mean() - levels[1, :2].mean()) / 2 / k_ang[1]
    upper = (levels[2, 2:].mean() - levels[0].mean()) / k_ang[2]
    for slope in (opening, upper):
        assert 3e5 < slope * EV_ANG_IN_M_PER_S < 6e5


def test_spin_and_momentum_are_locked_at_right_angles() -> None:
    """Source: Hsieh et al., Nature 460, 1101 (2009), doi:10.1038/nature08234 (from memory)."""
    cut, stack, filling = _prepared("Bi2Se3", (1, 1, 1))
    k_par = np.array([[0.012, 0.0], [-0.012, 0.0]])
    bands = compute_slab_bands(stack, cut, k_par, 6)
    assert bands.spin_lower is not None
    k_cart = k_par @ np.linalg.inv(cut.cell).T[:2]
    spins = []
    for i in range(2):
        first_empty = 6 * filling  # levels of the upper cone on the two faces
        state = first_empty + int(np.argmax(bands.lower_face[i, first_empty : first_empty + 2]))
        spins.append(bands.spin_lower[i, state] / bands.lower_face[i, state])
    assert spins[0] == pytest.approx(-spins[1], abs=0.02)
    assert np.linalg.norm(spins[0]) > 0.4
    along = spins[0] @ k_cart[0] / np.linalg.norm(k_cart[0])
    assert abs(along) < 0.05
    assert abs(spins[0] @ cut.normal_cart) < 0.05


def test_sb2se3_has_no_level_in_its_gap() -> None:
    cut, stack, filling = _prepared("Sb2Se3", (1, 1, 1))
    k_par = np.zeros((1, 2))
    bands = compute_slab_bands(stack, cut, k_par, 8)
    edges = projected_edges(stack, k_par, filling)
    inside = (bands.energies_ev > edges.top_ev[:, None]) & (
        bands.energies_ev < edges.bottom_ev[:, None]
    )
    assert not inside.any()


def test_thin_films_of_bi2se3_open_a_gap() -> None:
    """Tens to hundreds of meV for one to three quintuple layers, next to nothing for six.

    Source: Zhang et al., Nat. Phys. 6, 584 (2010), doi:10.1038/nphys1689: a gap below six layers
    (from memory; calculated values scatter, so only the orders of magnitude are compared).
    """
    cut, stack, filling = _prepared("Bi2Se3", (1, 1, 1))
    gaps = compute_thickness_series(stack, cut, np.zeros(2), filling, range(1, 8)).gap_ev
    assert gaps[0] > 0.3
    assert 0.05 < gaps[1] < 0.3
    assert max(gaps[5:]) < 5e-3
    assert list(gaps) == sorted(gaps, reverse=True)


def test_edges_of_bismuth_against_antimony() -> None:
    """Murakami, PRL 97, 236805 (2006), doi:10.1103/PhysRevLett.97.236805: helical edges of Bi(111).

    The antimony bilayer is trivial: Chuang, Hsu, Chen, et al., Appl. Phys. Lett. 102, 022424
    (2013), doi:10.1063/1.4776734 (from memory)."""
    bismuth, antimony = (_surface(f"{x}111_bilayer") for x in ("Bi", "Sb"))
    assert (bismuth.z2_strong, antimony.z2_strong) == (1, 0)
