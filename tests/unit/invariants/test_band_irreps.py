from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest

from lattice_models import atomic_insulator, wilson_dirac
from space_group_samples import SymmetrisedBloch, atomic_basis, orbit, sample_group
from topovet.invariants.band_irreps import (
    compute_band_irreps,
    compute_point_irreps,
    level_label,
    level_slices,
    measure_content,
)
from topovet.invariants.irrep_results import IrrepContent, PointIrreps
from topovet.invariants.parity import compute_parity
from topovet.model.fourier import build_bloch_sum
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.inversion import build_inversion
from topovet.symmetry.irrep_names import IrrepName
from topovet.symmetry.little_group import find_little_group, list_operations
from topovet.symmetry.operators import WannierOperator, build_operator, with_time_reversal
from topovet.symmetry.spacegroup import find_space_group
from topovet.symmetry.special_points import SpecialPoint


@pytest.fixture(autouse=True)
def _one_thread() -> Iterator[None]:
    """Small matrices: threads of BLAS would only wait for each other."""
    with one_blas_thread():
        yield


def _operators(model) -> tuple[WannierOperator, ...]:  # type: ignore[no-untyped-def]
    group = find_space_group(model.crystal)
    unitary = [
        build_operator(model.basis, model.crystal, w, t)
        for w, t in zip(group.rotations, group.translations, strict=True)
    ]
    return (*unitary, *(with_time_reversal(o, model.basis) for o in unitary))


def _irreps(model, **options) -> dict[str, PointIrreps]:  # type: ignore[no-untyped-def]
    found = compute_band_irreps(
        build_bloch_sum(model.tight_binding()),
        _operators(model),
        model.crystal,
        spinful=model.spinful,
        filling=model.filling,
        centre_frac=np.array(model.centre),
        **options,
    )
    return {point.point: point for point in found}


def test_s_and_p_levels_of_an_ionic_cubic_crystal() -> None:
    """s is Γ6+, p splits into Γ6− (j = 1/2) and Γ8− (j = 3/2) (Koster et al. 1963)."""
    at = _irreps(atomic_insulator(filled="p"))["Γ"]
    assert [level.textbook for level in at.levels] == ["Γ6−", "Γ8−", "Γ6+"]
    assert [level.n_bands for level in at.levels] == [2, 4, 2]
    assert (at.n_plus, at.n_minus) == (0, 6)
    assert at.residual_mev < 1e-9
    assert min(level.content.purity for level in at.levels) == pytest.approx(1)


def test_without_spin_the_same_levels_have_single_group_names() -> None:
    """s is Γ1, p is Γ15 (Bouckaert, Smoluchowski, Wigner 1936)."""
    at = _irreps(atomic_insulator(filled="p", spinful=False))["Γ"]
    assert [level.textbook for level in at.levels] == ["Γ15", "Γ1"]


@pytest.mark.parametrize("m", [-4.0, -2.0, 0.5, 2.0, 4.0])
def test_parity_totals_are_those_of_the_parity_witness(m: float) -> None:
    model = wilson_dirac(m=m)
    bloch = build_bloch_sum(model.tight_binding())
    inversion = build_inversion(model.basis, model.crystal, np.array(model.centre))
    witness = compute_parity(bloch, inversion, 2, (True, True, True), kramers=True)
    points = _irreps(model)
    counted = 0
    for trim in witness.trim:
        for point in points.values():
            if any(np.allclose((k - trim.k) % 1.0, 0) for k in point.star):
                assert (point.n_plus, point.n_minus) == (trim.n_plus, trim.n_minus)
                counted += 1
    assert counted == 8


@pytest.mark.parametrize(
    ("number", "site"), [(62, (0.1, 0.25, 0.3)), (136, (0, 0, 0)), (194, (1 / 3, 2 / 3, 0.25))]
)
def test_nonsymmorphic_levels_are_pure_and_as_wide_as_their_irreps(
    number: int, site: tuple[float, float, float]
) -> None:
    """A random H with the symmetry of the group has no degeneracy but those of its irreps."""
    sample = sample_group(number)
    operators = sample.operators(atomic_basis(orbit(sample, site), 0))
    bloch = SymmetrisedBloch(operators, 3, hop=0.5)
    found = compute_band_irreps(bloch, operators, sample.crystal, spinful=True)  # type: ignore[arg-type]
    for point in found:
        assert point.occupied is None
        assert point.gap_ev is None
        for level in point.levels:
            assert level.content.purity == pytest.approx(1, abs=1e-6)
            assert level.label != "?"
            named = [n for n, c in zip(point.irreps, level.content.counts, strict=True) if c]
            width = named[0].dimension * (1 if named[0].time_reversal == "real" else 2)
            assert level.n_bands == width
            assert " " not in level.label or named[0].time_reversal == "doubled"


def test_a_broken_mirror_lowers_the_purity_and_is_measured() -> None:
    """Mixing s and p by an electric field: 10 meV over a gap of some eV, purity 1 - O(theta²)."""
    model = atomic_insulator(filled="p", hop=0.0, soc=0.0, spinful=False)
    h = np.array(build_bloch_sum(model.tight_binding()).at(np.zeros((1, 3)))[0])
    h[0, 1] = h[1, 0] = 0.010  # s with pz

    class Field:
        def at(self, k_frac: np.ndarray) -> np.ndarray:
            return np.repeat(h[None], len(k_frac), axis=0)

    operators = _operators(model)
    operations = list_operations(operators, model.crystal.cell, spinful=False)
    point = SpecialPoint("Γ", np.zeros(3), np.zeros((1, 3)), True)
    group = find_little_group(operations, np.zeros(3))
    found = compute_point_irreps(Field(), operators, group, point, filling=3)  # type: ignore[arg-type]
    theta = 0.010 / 4.0
    assert found.occupied is not None
    assert 1 - found.occupied.purity == pytest.approx(2 * theta**2, rel=0.01)
    assert found.residual_mev == pytest.approx(20, rel=0.01)  # inversion turns its sign
    assert found.moved_mev == pytest.approx(10, rel=0.01)  # the average has none
    assert [level.textbook for level in found.levels] == ["Γ15", "Γ1"]
    assert found.levels[0].spread_mev == pytest.approx(1000 * 0.010**2 / 4, rel=0.02)


def test_a_filling_that_cuts_a_level_is_not_resolved() -> None:
    model = atomic_insulator(filled="p")
    operators = _operators(model)
    operations = list_operations(operators, model.crystal.cell, spinful=True)
    point = SpecialPoint("Γ", np.zeros(3), np.zeros((1, 3)), True)
    found = compute_point_irreps(
        build_bloch_sum(model.tight_binding()),
        operators,
        find_little_group(operations, np.zeros(3)),
        point,
        filling=4,
    )
    assert found.occupied is not None
    assert not found.occupied.resolved
    assert found.gap_ev == pytest.approx(0, abs=1e-9)
    assert (found.n_plus, found.n_minus) == (None, None)


def _name(label: str, time_reversal: str, partner: int, textbook: str | None) -> IrrepName:
    joint = "L1ab−" if time_reversal == "paired" else label
    return IrrepName(label, joint, textbook, 1, -1, "C3", (1.5,), time_reversal, partner)


@pytest.mark.parametrize(
    ("counts", "expected"),
    [
        ((1, 1, 0), ("L1ab−", "L4,5−")),
        ((2, 2, 0), ("2 L1ab−", "2 L4,5−")),
        ((1, 0, 0), ("L1a−", "L4,5−")),
        ((0, 0, 2), ("2 L1c−", "L9−")),
        ((1, 1, 2), ("L1ab− ⊕ 2 L1c−", "L4,5− ⊕ L9−")),
    ],
)
def test_labels_of_levels(counts: tuple[int, ...], expected: tuple[str, str]) -> None:
    names = (
        _name("L1a−", "paired", 1, "L4,5−"),
        _name("L1b−", "paired", 0, "L4,5−"),
        _name("L1c−", "doubled", 2, "L9−"),
    )
    assert level_label(IrrepContent((), counts, 1.0, True), names) == expected
    assert level_label(IrrepContent((), counts, 0.1, False), names) == ("?", None)


def test_levels_are_split_where_energies_are() -> None:
    h = np.diag([0.0, 1e-9, 0.5, 0.5 + 1e-3, 2.0]).astype(complex)
    assert [(s.start, s.stop) for s in level_slices(h)] == [(0, 2), (2, 3), (3, 4), (4, 5)]


def test_no_states_have_no_content() -> None:
    names = (_name("L1a−", "real", 0, None),)
    content = measure_content(np.zeros((4, 0), complex), np.zeros((1, 4, 4), complex), names)
    assert (content.counts, content.purity, content.resolved) == ((0,), 1.0, True)
