"""Irreps and rotation eigenvalues of real bands, against textbooks and plane-wave states."""

from __future__ import annotations

import functools
from collections import Counter

import numpy as np
import pytest

from real_cases import CENTROSYMMETRIC, reference
from real_operators import grey_operators, operated, shifted_onsite
from topovet.invariants.band_irreps import compute_band_irreps, compute_point_irreps
from topovet.invariants.irrep_results import PointIrreps
from topovet.invariants.mirror_indicators import compute_mirror_indicators
from topovet.invariants.parity import compute_parity
from topovet.invariants.rotation_eigenvalues import count_eigenvalues
from topovet.invariants.rotation_indicators import S4Indicator, compute_s4_indicator
from topovet.model.basis import OrbitalBasis
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.inversion import build_inversion
from topovet.symmetry.little_group import find_little_group, list_operations
from topovet.symmetry.operators import cartesian_rotation, operator_at
from topovet.symmetry.special_points import SpecialPoint
from topovet.symmetry.textbook_names import operation_kinds

pytestmark = pytest.mark.real_data


@functools.cache
def _irreps(name: str) -> dict[str, PointIrreps]:
    case = operated(name)
    centres = case.space_group.centres_frac
    found = compute_band_irreps(
        case.bloch,
        case.operators,
        case.crystal,
        spinful=True,
        filling=case.filling,
        centre_frac=centres[0] if len(centres) else None,
    )
    return {point.point: point for point in found}


def _textbook(name: str, point: str) -> list[str | None]:
    return [level.textbook for level in _irreps(name)[point].levels]


@pytest.mark.parametrize("name", CENTROSYMMETRIC)
def test_parity_totals_equal_those_of_the_parity_witness(name: str) -> None:
    case = operated(name)
    centre = case.space_group.centres_frac[0]
    inversion = build_inversion(case.basis, case.crystal, centre)
    witness = compute_parity(
        case.bloch, inversion, case.filling, case.crystal.periodic, kramers=True
    )
    operations = list_operations(case.operators, case.crystal.cell, spinful=True)
    for trim in witness.trim:
        k = np.array(trim.k)
        found = compute_point_irreps(
            case.bloch,
            case.operators,
            find_little_group(operations, k),
            SpecialPoint("T", k, k[None], True),
            filling=case.filling,
            centre_frac=centre,
        )
        assert (found.n_plus, found.n_minus) == (trim.n_plus, trim.n_minus), trim.k
        assert found.occupied is not None
        assert found.occupied.purity > 0.99


def test_silicon() -> None:
    """Γ1, Γ25′ | Γ15, Γ2′ in the double group; L2′, L1, L3′ | L1, L3; X only fourfold levels.

    Yu, Cardona, Fundamentals of Semiconductors (Springer, 2010), figure 2.10, and Cohen,
    Chelikowsky, Electronic Structure and Optical Properties of Semiconductors (Springer, 1988);
    Γ25′ x D1/2 = Γ7+ + Γ8+ with Γ8+ (j = 3/2) on top, Γ15 x D1/2 = Γ6− + Γ8−, Γ2′ x D1/2 = Γ7−,
    L3′ x D1/2 = L4,5− + L6− (Elliott, Phys. Rev. 96, 280 (1954)); X5 alone in the double group of
    diamond at X. From memory.
    """
    assert _textbook("Si", "Γ") == ["Γ6+", "Γ7+", "Γ8+", "Γ6−", "Γ8−", "Γ7−"]
    at_l = _textbook("Si", "L")
    assert at_l[:2] == ["L6−", "L6+"]
    assert set(at_l[2:4]) == {"L6−", "L4,5−"}
    assert at_l[4] == "L6+"
    assert set(at_l[5:7]) == {"L6+", "L4,5+"}
    at_x = _irreps("Si")["X"]
    assert [level.n_bands for level in at_x.levels] == [4, 4, 4, 4]
    assert [name.dimension for name in at_x.irreps] == [4]
    splitting = _irreps("Si")["Γ"].levels[2].energy_ev - _irreps("Si")["Γ"].levels[1].energy_ev
    assert splitting == pytest.approx(0.044, abs=0.01)  # measured spin-orbit splitting, 44 meV


def _without_spin(name: str) -> dict[str, PointIrreps]:
    """Irreps of the mean of the spin-up and spin-down blocks: spin-orbit coupling left out."""
    case = operated(name)
    h_r = (case.model.h_r[:, ::2, ::2] + case.model.h_r[:, 1::2, 1::2]) / 2
    basis = OrbitalBasis(
        case.basis.positions_frac[::2],
        case.basis.harmonics[::2],
        np.tile(np.array([1.0 + 0j, 0.0]), (case.basis.n_orb // 2, 1)),
        tuple(label.removesuffix(" up") for label in case.basis.labels[::2]),
        case.basis.shells[::2],
    )
    model = TightBindingModel(case.model.r_cells, h_r.real.astype(complex), False)
    found = compute_band_irreps(
        build_bloch_sum(model),
        grey_operators(basis, case.crystal, case.space_group),
        case.crystal,
        spinful=False,
        filling=case.filling // 2,
        centre_frac=case.space_group.centres_frac[0],
    )
    return {point.point: point for point in found}


def test_silicon_without_spin_has_the_names_of_the_band_structures_in_textbooks() -> None:
    """Γ1, Γ25′, Γ15, Γ2′ and L2′, L1, L3′, L1, L3; X1, X4, X1 twofold (sources as above).

    X1 and X4 differ in C2 along k, character +2 and -2: X1 goes into X1 + X3 of zinc blende (even
    under C2), X4 into X5 (odd), by the compatibility tables.
    """
    points = _without_spin("Si")
    at_gamma = [level.textbook for level in points["Γ"].levels]
    assert at_gamma[:3] == ["Γ1", "Γ25′", "Γ15"]
    assert at_gamma[3] == "Γ2′"
    at_l = [level.textbook for level in points["L"].levels]
    assert at_l[:5] == ["L2′", "L1", "L3′", "L1", "L3"]
    at_x = points["X"]
    assert [level.n_bands for level in at_x.levels] == [2] * 4
    even = {(1.0, -1.0): False, (2.0, 0.0): True}  # C4 along k: ±i or ±1, so C2 = -1 or +1
    kinds = [at_x.irreps[level.content.counts.index(1)].rotation_numbers for level in at_x.levels]
    assert [even[tuple(j)] for j in kinds[:3]] == [True, False, True]


@pytest.mark.parametrize("name", ["PbTe", "PbTe_a656"])
def test_lead_telluride(name: str) -> None:
    """Band edges L6+ below L6− (origin at lead); Te p at Γ is Γ6− below Γ8−; X6−, X7− from p.

    Mitchell, Wallis, Phys. Rev. 151, 581 (1966); Dimmock, Wright, Phys. Rev. 135, A821 (1964): the
    valence edge of PbTe is L6+, the conduction edge L6− (from memory). Pb p is odd about Pb at L,
    Te p even. p x D1/2 by Koster et al.
    """
    assert np.allclose(operated(name).space_group.centres_frac[0], 0)
    assert operated(name).crystal.symbols[0] == "Pb"
    assert np.allclose(operated(name).crystal.positions_frac[0], 0)
    assert _textbook(name, "L") == ["L6+", "L4,5+", "L6+", "L6−", "L6−", "L4,5−"]
    assert _textbook(name, "Γ") == ["Γ6−", "Γ8−", "Γ6−", "Γ8−"]
    assert Counter(_textbook(name, "X")) == {"X6−": 4, "X7−": 2}


def test_cadmium_telluride() -> None:
    """Zinc blende, normal order: split-off Γ7, valence top Γ8, conduction Γ6 (Yu, Cardona)."""
    assert _textbook("CdTe", "Γ") == ["Γ7", "Γ8", "Γ6", "Γ7", "Γ8"]
    assert set(_textbook("CdTe", "L")[:3]) == {"L6", "L4,5"}
    assert set(_textbook("CdTe", "X")) == {"X6", "X7"}


def test_bismuth_selenide() -> None:
    """The inverted pair at Γ: even (Bi pz) below, odd (Se pz) above, both j = 1/2.

    Zhang, Liu, Qi, Dai, Fang, Zhang, Nat. Phys. 5, 438 (2009), doi:10.1038/nphys1270: P1z+ (Bi) is
    below P2z− (Se) in the solid, about the central Se.
    """
    for name in ("Bi2Se3", "Bi2Se3_k666", "Bi2Se3_mlwf", "Bi2Se3_centres_off"):
        levels = _irreps(name)["Γ"].levels
        edge = next(i for i, level in enumerate(levels) if level.first_band == 18)
        assert [level.textbook for level in levels[edge - 1 : edge + 1]] == ["Γ6+", "Γ6−"]


def test_purity_tells_the_untidy_set() -> None:
    """Maximally localised, disentangled functions break C3 by 100 meV; irreps still hold."""
    tidy, untidy = _irreps("Bi2Se3"), _irreps("Bi2Se3_mlwf")
    for point in ("Γ", "Z"):
        one, other = tidy[point], untidy[point]
        assert one.residual_mev < 1
        assert other.residual_mev > 50
        assert one.occupied is not None
        assert other.occupied is not None
        assert one.occupied.counts == other.occupied.counts
        assert 1 - one.occupied.purity < 1e-6
        assert 1e-5 < 1 - other.occupied.purity < 1e-2
        worst = [min(level.content.purity for level in p.levels) for p in (one, other)]
        assert worst[1] < worst[0]


@pytest.mark.parametrize("name", [*CENTROSYMMETRIC, "BiTeI", "BiTeI_pressed", "CdTe"])
def test_levels_at_gamma_are_pure_and_kramers_degenerate(name: str) -> None:
    at = _irreps(name)["Γ"]
    assert all(level.n_bands % 2 == 0 for level in at.levels)
    assert all(level.content.resolved for level in at.levels)
    assert sum(level.n_bands for level in at.levels) == operated(name).basis.n_orb
    assert max(level.spread_mev for level in at.levels) < 0.1


def test_rashba_levels_split_off_the_trim() -> None:
    """BiTeI, no inversion: single levels at K and H, pairs at the TRIM."""
    points = _irreps("BiTeI")
    for name in ("Γ", "A", "M", "L"):
        assert {level.n_bands for level in points[name].levels} == {2}
    for name in ("K", "H"):
        assert {level.n_bands for level in points[name].levels} == {1}
    assert set(_textbook("BiTeI", "Γ")) == {"Γ4,5", "Γ6"}


def _s4(
    name: str, onsite_ev: dict[str, float] | None = None, *, axial: bool = False
) -> S4Indicator:
    """S4 indicator of a case, with energies added to some orbitals, by the operations about z."""
    case = operated(name)
    operators, bloch = case.operators, case.bloch
    if onsite_ev:
        labels = [label.rsplit(" ", 1)[0] for label in case.basis.labels]
        shifts = np.array([onsite_ev.get(label, 0.0) for label in labels])
        bloch = build_bloch_sum(shifted_onsite(case.model, shifts))
    if axial:
        operators = tuple(
            o
            for o in operators
            if abs(abs(cartesian_rotation(o.rotation, case.crystal.cell)[2, 2]) - 1) < 1e-6
        )
    return compute_s4_indicator(bloch, operators, case.crystal, case.filling, kramers=True)


@pytest.mark.parametrize("name", ["CdTe", "Si"])
def test_s4_eigenvalues_equal_those_of_the_plane_wave_states(name: str) -> None:
    """Counts at each momentum; CdTe's Wannier manifold leaves out the 12 lowest DFT states."""
    dft, found, case = reference(name, "dft_s4.json"), _s4(name), operated(name)
    assert found.z2 == dft["strong_index"] == 0
    assert found.status == "ok"
    kinds = operation_kinds(np.array([o.rotation for o in case.operators]))
    about_z = [
        o
        for kind, o in zip(kinds, case.operators, strict=True)
        if kind == "-4" and cartesian_rotation(o.rotation, case.crystal.cell)[2, 2] < -0.99
    ]
    sense = {tuple(axis.axis_cart) for axis in found.axes}
    assert (0.0, 0.0, 1.0) in sense
    # S4 with the proper part counter-clockwise about z
    s4 = next(o for o in about_z if cartesian_rotation(o.rotation, case.crystal.cell)[0, 1] > 0.5)
    for point in dft["points"]:
        k = np.array(point["k"])
        counted = count_eigenvalues(
            case.bloch.at(k[None])[0], operator_at(s4, k[None])[0], k, case.filling
        )
        expected = Counter(point["alphas"][-case.filling :])
        assert [counted.count_at(alpha / 4) for alpha in (1, 3, 5, 7)] == [
            expected[alpha] for alpha in (1, 3, 5, 7)
        ]
        assert counted.purity > 0.9999


def test_strained_cadmium_telluride_with_inverted_s_is_a_strong_insulator() -> None:
    """HgTe under tensile strain: s below p at Γ, the fourfold Γ8 split by a tetragonal field.

    Fu, Kane, Phys. Rev. B 76, 045302 (2007), section V; Dai, Hughes, Qi, Fang, Zhang, Phys. Rev. B
    77, 125319 (2008), doi:10.1103/PhysRevB.77.125319: strained HgTe is strong, CdTe trivial.
    """
    tetragonal = {"Te1 pz": 0.3}
    normal = _s4("CdTe", tetragonal, axial=True)
    inverted = _s4("CdTe", tetragonal | {"Cd1 s": -0.9}, axial=True)
    assert (normal.status, normal.z2) == ("ok", 0)
    assert (inverted.status, inverted.z2) == ("ok", 1)
    assert len(inverted.axes) == 1
    unstrained = _s4("CdTe", {"Cd1 s": -0.9})
    assert unstrained.status == "failed"  # HgTe itself: no gap at Γ
    assert "the gap at k = (0, 0, 0)" in unstrained.reason


def test_rock_salt_inverted_at_l_has_z8_of_four() -> None:
    """SnTe is z8 = 4 with all Z2 zero, PbTe 0 (Song et al. 2018; Hsieh et al. 2012).

    Hsieh, Lin, Liu, Duan, Bansil, Fu, Nat. Commun. 3, 982 (2012): L6− below L6+ in SnTe.
    """
    inverted = {f"Pb1 {p}": -0.4 for p in ("pz", "px", "py")}
    for name in ("PbTe", "PbTe_a656"):
        found = _s4(name)
        assert (found.z2, found.z8, found.z8_reason) == (0, 0, "")
    found = _s4("PbTe_a656", inverted)
    assert (found.status, found.z2, found.z8) == ("ok", 0, 4)


def test_mirror_numbers_normal_to_the_fourfold_axes_of_rock_salt_are_zero() -> None:
    """The planes k_z = 0 hold no L; the mirror Chern number of SnTe is on {110} planes instead."""
    case = operated("PbTe_a656")
    found = compute_mirror_indicators(case.bloch, case.operators, case.crystal, case.filling)
    assert [(f.n, f.status, f.mirror_chern) for f in found] == [(4, "ok", 0)] * 3


def test_s4_where_it_does_not_apply() -> None:
    assert "no S4" in _s4("Bi2Se3").reason
    case = operated("Bi111_bilayer")
    layer = compute_s4_indicator(
        case.bloch, case.operators, case.crystal, case.filling, kramers=True
    )
    assert "three dimensions" in layer.reason
    assert layer.status == "not-applicable"
