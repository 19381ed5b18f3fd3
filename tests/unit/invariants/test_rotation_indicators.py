from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest

from d2d_models import D2D_ROTATIONS, wilson_dirac_without_inversion
from lattice_models import LatticeModel, wilson_dirac
from space_group_samples import FlatBloch, atomic_basis, atomic_levels, orbit, sample_group
from topovet.errors import NotInvariantError
from topovet.invariants.rotation_eigenvalues import (
    compute_rotation_contents,
    count_eigenvalues,
    fixed_momenta,
)
from topovet.invariants.rotation_indicators import (
    S4Indicator,
    compute_s4_indicator,
    fixed_point,
    followed_by_translation,
)
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import build_model
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.operators import (
    WannierOperator,
    build_operator,
    operator_at,
    with_time_reversal,
)
from topovet.symmetry.spacegroup import find_space_group
from topovet.symmetry.textbook_names import operation_kinds


@pytest.fixture(autouse=True)
def _one_thread() -> Iterator[None]:
    """Small matrices: threads of BLAS would only wait for each other."""
    with one_blas_thread():
        yield


def _operators(model: LatticeModel) -> tuple[WannierOperator, ...]:
    unitary = [build_operator(model.basis, model.crystal, w, np.zeros(3)) for w in D2D_ROTATIONS]
    return (*unitary, *(with_time_reversal(o, model.basis) for o in unitary))


def _indicator(model: LatticeModel) -> S4Indicator:
    bloch = build_bloch_sum(build_model(model.r_cells, model.h_r, spinful=True))
    return compute_s4_indicator(bloch, _operators(model), model.crystal, 2, kramers=True)


@pytest.mark.parametrize(("m", "nu_0"), [(-3.5, 0), (-2.5, 1), (-2.0, 1), (0.0, 0), (2.0, 1)])
def test_strong_index_without_inversion_changes_with_the_gap(m: float, nu_0: int) -> None:
    """nu_0 of Wilson-Dirac is 0, 1, 0, 1, 0 between m = -3, -1, 1, 3 (see `wilson_dirac`).

    The gap stays open while inversion is taken away, so nu_0 stays, and parities are gone.
    """
    rng = np.random.default_rng(5)
    k = rng.random((400, 3))
    for d_wave in (0.0, 0.1, 0.2):
        model = wilson_dirac_without_inversion(m, d_wave)
        bloch = build_bloch_sum(build_model(model.r_cells, model.h_r, spinful=True))
        energies = np.linalg.eigvalsh(bloch.at(k))
        assert (energies[:, 2] - energies[:, 1]).min() > 0.2
        found = _indicator(model)
        assert (found.status, found.z2) == ("ok", nu_0), found.reason
        assert found.purity == pytest.approx(1)
        assert len(found.axes) == 1
        assert found.axes[0].axis_cart == (0.0, 0.0, 1.0)


def test_the_model_has_d2d_and_time_reversal_and_no_inversion() -> None:
    model = wilson_dirac_without_inversion(-2.0, 0.2)
    bloch = build_bloch_sum(build_model(model.r_cells, model.h_r, spinful=True))
    k = np.array([[0.13, 0.29, 0.41]])
    h = bloch.at(k)[0]
    for operator in _operators(model):
        d = operator_at(operator, k)[0]
        image = bloch.at(k @ operator.k_rotation)[0]
        turned = d @ (h.conj() if operator.antiunitary else h) @ d.conj().T
        np.testing.assert_allclose(turned, image, atol=1e-12)
    inversion = build_operator(model.basis, model.crystal, -np.eye(3, dtype=int), np.zeros(3))
    d = operator_at(inversion, k)[0]
    assert np.abs(d @ h @ d.conj().T - bloch.at(-k)[0]).max() > 0.05


@pytest.mark.parametrize("m", [-4.0, -2.0, 0.0, 2.0, 4.0])
def test_with_inversion_it_is_the_parity_of_the_fu_kane_counts(m: float) -> None:
    """Cubic Wilson-Dirac: three S4 axes agree, and Z8 is odd where the strong index is 1.

    kappa_1 = (1/4) sum (n+ - n-) from the masses m + 3 - 2n of the TRIM (n components 1/2).
    """
    model = wilson_dirac(m=m)
    group = find_space_group(model.crystal)
    operators = [
        build_operator(model.basis, model.crystal, w, t)
        for w, t in zip(group.rotations, group.translations, strict=True)
    ]
    bloch = build_bloch_sum(model.tight_binding())
    found = compute_s4_indicator(bloch, operators, model.crystal, 2, kramers=True)
    masses = [m + 3 - 2 * n for n, times in enumerate((1, 3, 3, 1)) for _ in range(times)]
    kappa_1 = sum(-2 * np.sign(mass) for mass in masses) / 4  # s is even and lies at +mass
    assert len(found.axes) == 3
    assert found.z2 == int(kappa_1) % 2
    assert found.z8 is not None
    assert found.z8 % 2 == found.z2
    assert found.kappa is not None
    assert found.z8 == (int(kappa_1) - 2 * found.kappa) % 8


S4_GROUPS = (81, 82, 83, 87, 111, 115, 121, 123, 127, 128, 136, 139, 216, 225)


@pytest.mark.parametrize("number", S4_GROUPS)
def test_atomic_insulators_have_no_index(number: int) -> None:
    """kappa_4 is even and Z8 zero for the s and p states of every high-symmetry site.

    The definition of an indicator (Po, Vishwanath, Watanabe, Nat. Commun. 8, 50 (2017)): it is zero
    for all atomic insulators.
    """
    sample = sample_group(number)
    step = 4 if number >= 195 else 8
    shared = False
    for position in _positions(number, step):
        basis = atomic_basis(orbit(sample, position), 1)
        operators = sample.operators(basis)
        for states in atomic_levels(operators, basis, seed=1):
            n = states.shape[1]
            if n == basis.n_orb:
                continue
            flat = np.eye(basis.n_orb) - states @ states.conj().T
            found = compute_s4_indicator(
                FlatBloch(flat),
                operators,
                sample.crystal,
                n,
                kramers=True,  # type: ignore[arg-type]
            )
            assert (found.status, found.z2) == ("ok", 0), found.reason
            assert found.z8 in (None, 0)
            shared = shared or found.z8 == 0
    assert shared == (number in (83, 87, 123, 127, 128, 139, 225))


def _positions(number: int, step: int) -> list[np.ndarray]:
    """Positions on a grid, one of each orbit, with a fair share of the operations of their own."""
    at_least = 8 if number >= 195 else 4
    sample = sample_group(number)
    found: list[np.ndarray] = []
    seen: set[bytes] = set()
    for cell in np.ndindex(step, step, step):
        position = np.array(cell) / step
        images = orbit(sample, position)
        if len(sample.rotations) // len(images) < at_least:
            continue
        keys = {np.round(image * 24).astype(int).tobytes() for image in images % 1.0}
        if not keys & seen:
            found.append(position)
        seen |= keys
    return found


def test_the_centre_changes_kappa_but_not_its_parity() -> None:
    model = wilson_dirac_without_inversion(-2.0, 0.2)
    bloch = build_bloch_sum(build_model(model.r_cells, model.h_r, spinful=True))
    kappas = set()
    for cell in np.ndindex(2, 2, 2):
        moved = [followed_by_translation(o, np.array(cell)) for o in _operators(model)]
        found = compute_s4_indicator(bloch, moved, model.crystal, 2, kramers=True)
        assert found.z2 == 1
        kappas.add(found.kappa)
    assert len(kappas) > 1


def test_a_translated_operation_is_the_operation_and_a_translation() -> None:
    model = wilson_dirac(m=-2.0)
    operator = build_operator(model.basis, model.crystal, D2D_ROTATIONS[1], np.zeros(3))
    moved = followed_by_translation(operator, np.array([1, 0, -1]))
    k = np.array([[0.1, 0.2, 0.3]])
    phase = np.exp(-2j * np.pi * (k @ operator.k_rotation)[0] @ np.array([1, 0, -1]))
    np.testing.assert_allclose(operator_at(moved, k), phase * operator_at(operator, k), atol=1e-12)
    np.testing.assert_allclose(
        D2D_ROTATIONS[1] @ fixed_point(moved) + moved.translation, fixed_point(moved), atol=1e-12
    )


@pytest.mark.parametrize("number", [81, 82, 111, 121, 136, 141, 216, 220, 227])
def test_there_are_four_momenta_with_two_trim_at_least(number: int) -> None:
    sample = sample_group(number)
    basis = atomic_basis(orbit(sample, (0, 0, 0)), 0)
    kinds = operation_kinds(sample.rotations)
    operator = sample.operators(basis)[kinds.index("-4")]
    k = fixed_momenta(operator)
    assert len(k) == 4
    moved = k @ operator.k_rotation
    np.testing.assert_allclose(moved - k, np.round(moved - k), atol=1e-9)
    primitive = number in (81, 111, 136)  # the others are body- or face-centred
    doubled = np.abs(2 * k - np.round(2 * k)).max(axis=1) < 1e-9
    assert doubled.tolist() == [True, True, primitive, primitive]


def test_where_it_does_not_apply() -> None:
    model = wilson_dirac_without_inversion(-2.0, 0.2)
    bloch = build_bloch_sum(build_model(model.r_cells, model.h_r, spinful=True))
    operators = _operators(model)
    one = compute_s4_indicator(bloch, operators[:1], model.crystal, 2, kramers=True)
    assert (one.status, one.z2) == ("not-applicable", None)
    assert "no S4" in one.reason
    magnetic = compute_s4_indicator(bloch, operators, model.crystal, 2, kramers=False)
    assert "time reversal" in magnetic.reason
    full = compute_s4_indicator(bloch, operators, model.crystal, 8, kramers=True)
    assert "no empty bands" in full.reason
    assert compute_rotation_contents(bloch, operators, model.crystal, 8, spinful=True) == ()
    with pytest.raises(NotInvariantError):
        fixed_momenta(operators[2])


def test_gapless_and_impure_states_fail_with_the_reason() -> None:
    closed = _indicator(wilson_dirac_without_inversion(-3.0, 0.0))
    assert closed.status == "failed"
    assert "the gap at k = (0, 0, 0)" in closed.reason
    assert closed.z2 is None
    model = wilson_dirac_without_inversion(-2.0, 0.0)
    h_r = np.array(model.h_r)
    home = int(np.flatnonzero(np.all(model.r_cells == 0, axis=1))[0])
    h_r[home][0, 2] += 2.0  # s up with pz up: an electric field along the axis breaks S4
    h_r[home][2, 0] += 2.0
    h_r[home][1, 3] += 2.0
    h_r[home][3, 1] += 2.0
    bloch = build_bloch_sum(build_model(model.r_cells, h_r, spinful=True))
    impure = compute_s4_indicator(bloch, _operators(model), model.crystal, 2, kramers=True)
    assert impure.status == "failed"
    assert "no definite S4 eigenvalues" in impure.reason
    assert impure.purity is not None
    assert impure.purity < 0.8


def test_eigenvalues_of_a_screw_keep_the_phase_of_its_translation() -> None:
    """2_1 at k = 1/2 along it: D² = -exp(-iπ) = 1 for spinors, eigenvalues ±1; at Γ ±i."""
    sample = sample_group(4)  # unique axis b
    basis = atomic_basis(orbit(sample, (0.1, 0.2, 0.3)), 0)
    screw = sample.operators(basis)[operation_kinds(sample.rotations).index("2")]
    rng = np.random.default_rng(1)
    for k_y, angles in ((0.0, (0.5, 1.5)), (0.5, (0.0, 1.0))):
        k = np.array([0.0, k_y, 0.0])
        d = operator_at(screw, k[None])[0]
        x = rng.standard_normal((4, 4))
        h = x + x.T
        h = h + d @ h @ d.conj().T
        counted = count_eigenvalues(h, d, k, 2)
        assert counted.angles_pi == angles
        assert sum(counted.counts) == 2
        assert counted.purity == pytest.approx(1)


def test_rotation_contents_of_s_states() -> None:
    """One s band pair: j = ±1/2 about every axis of the cube, listed once for each kind."""
    model = wilson_dirac(m=-4.0)  # s below p everywhere
    group = find_space_group(model.crystal)
    operators = [
        build_operator(model.basis, model.crystal, w, t)
        for w, t in zip(group.rotations, group.translations, strict=True)
    ]
    found = compute_rotation_contents(
        build_bloch_sum(model.tight_binding()), operators, model.crystal, 2, spinful=True
    )
    at_gamma = [c for c in found if c.point == "Γ"]
    assert [c.symbol for c in at_gamma] == ["C4", "C3", "C2"]
    c4, c3, c2 = (c.eigenvalues for c in at_gamma)
    assert c4.angles_pi == (0.25, 0.75, 1.25, 1.75)
    assert c4.counts == (1, 0, 0, 1)
    assert c3.count_at(1 / 3) == c3.count_at(-1 / 3) == 1
    assert c3.count_at(1.0) == 0
    assert c3.count_at(0.5) == 0
    assert c2.counts == (1, 1)
