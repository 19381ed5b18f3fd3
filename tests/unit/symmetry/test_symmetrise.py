"""The mean over a group: what it must be for a known model, how far it lies, and its file."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from lattice_models import kane_mele, wilson_dirac
from topovet.intake.hamiltonian.hr import read_hr
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, r_index
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import NotClosedError, WannierOperator, with_time_reversal
from topovet.symmetry.spacegroup import find_space_group
from topovet.symmetry.symmetrise import symmetrise, write_symmetrised
from topovet.symmetry.trim import sample_points

K = sample_points((True, True, True))
DIRAC = wilson_dirac(m=-2.0)


def operators_of(model: object) -> tuple[WannierOperator, ...]:
    group = find_space_group(model.crystal)  # type: ignore[attr-defined]
    built = build_operators(
        model.basis,  # type: ignore[attr-defined]
        model.crystal,  # type: ignore[attr-defined]
        group.rotations,
        group.translations,
    )
    assert not built.reasons
    return built.operators


def theta_of(model: object) -> WannierOperator:
    return with_time_reversal(operators_of(model)[0], model.basis)  # type: ignore[attr-defined]


def strained(amount_ev: float) -> TightBindingModel:
    """The cubic model with its s-s hopping along z raised."""
    built = DIRAC.tight_binding()
    h_r = built.h_r.copy()
    for r in ([0, 0, 1], [0, 0, -1]):
        at = int(r_index(built.r_cells, np.array([r]))[0])
        h_r[at, :2, :2] += amount_ev * np.eye(2)
    return TightBindingModel(built.r_cells, h_r, True)


def test_mean_of_a_strained_cube_is_the_mean_of_its_axes() -> None:
    """30 meV more along z alone becomes 10 meV more along each axis; distances by hand.

    H_sym - H is -20 meV along +-z and +10 meV along +-x, +-y on the s states: 2 (10 + 10 + 20) = 80
    meV is the bound, met at k = (0, 0, 1/2).
    """
    model = strained(0.03)
    k_frac = np.array([[0, 0, 0.5], [0.1, 0.2, 0.3]])
    made = symmetrise(
        model, build_bloch_sum(model), operators_of(DIRAC), k_frac, time_reversal=theta_of(DIRAC)
    )
    assert made.n_operations == 96
    plain = DIRAC.tight_binding()
    for axis in np.eye(3, dtype=np.int64):
        at, before = (r_index(m.r_cells, axis[None])[0] for m in (made.model, plain))
        moved = made.model.h_r[at] - plain.h_r[before]
        np.testing.assert_allclose(moved[:2, :2], 0.01 * np.eye(2), atol=1e-14)
        assert np.abs(moved[2:]).max() < 1e-14
    assert made.distance_mev == pytest.approx(80.0, rel=1e-9)
    assert made.distance_bound_mev == pytest.approx(80.0, rel=1e-9)
    assert made.distance_r_mev == pytest.approx(20.0, rel=1e-9)
    assert max(made.before_mev) > 30
    assert max(made.after_mev) < 1e-9


def test_symmetric_models_stay_as_they_are() -> None:
    model = DIRAC.tight_binding()
    made = symmetrise(model, build_bloch_sum(model), operators_of(DIRAC), K)
    assert made.distance_bound_mev < 1e-9
    assert np.array_equal(made.model.r_cells, model.r_cells)
    assert len(made.before_mev) == len(made.after_mev) == 48


def test_twice_is_once() -> None:
    rng = np.random.default_rng(5)
    built = DIRAC.tight_binding()
    noise = rng.normal(size=built.h_r.shape) + 1j * rng.normal(size=built.h_r.shape)
    noise = 0.02 * (noise + noise[::-1].conj().transpose(0, 2, 1))
    model = TightBindingModel(built.r_cells, built.h_r + noise, True)
    once = symmetrise(model, build_bloch_sum(model), operators_of(DIRAC), K)
    again = symmetrise(once.model, build_bloch_sum(once.model), operators_of(DIRAC), K)
    assert once.distance_mev > 10
    assert again.distance_bound_mev < 1e-9


def test_time_reversal_alone_takes_out_a_zeeman_field() -> None:
    """The field is odd: its mean with its reverse is the model without it."""
    magnetic = wilson_dirac(m=-2.0, zeeman=0.1)
    model = magnetic.tight_binding()
    made = symmetrise(
        model,
        build_bloch_sum(model),
        [operators_of(DIRAC)[0]],
        K,
        time_reversal=theta_of(DIRAC),
    )
    assert made.before_mev[1] > 100
    # far p levels stand lower where no field is to be cleared: compare the near states only
    near = made.model.h_r[made.model.n_r // 2][:2, :2]
    np.testing.assert_allclose(near, -2.0 * np.eye(2), atol=1e-14)
    assert max(made.after_mev) < 1e-9


def test_magnetic_groups_are_groups_too() -> None:
    """Half turns about x beside a field along z only together with time reversal."""
    magnetic = wilson_dirac(m=-2.0, zeeman=0.1)
    model = magnetic.tight_binding()
    identity = operators_of(DIRAC)[0]
    turn = next(o for o in operators_of(DIRAC) if np.array_equal(o.rotation, np.diag([1, -1, -1])))
    group = [identity, with_time_reversal(turn, DIRAC.basis)]
    made = symmetrise(model, build_bloch_sum(model), group, K)
    assert made.distance_bound_mev < 1e-9
    wrong = symmetrise(model, build_bloch_sum(model), [identity, turn], K)
    assert wrong.distance_mev == pytest.approx(100, rel=1e-9)  # the whole field


def test_distance_bounds_how_far_bands_move() -> None:
    model = strained(0.05)
    bloch = build_bloch_sum(model)
    made = symmetrise(model, bloch, operators_of(DIRAC), K)
    after = build_bloch_sum(made.model)
    moved = np.abs(np.linalg.eigvalsh(after.at(K)) - np.linalg.eigvalsh(bloch.at(K))).max()
    assert 0.01 < moved <= made.distance_mev / 1000 + 1e-12
    assert made.distance_mev <= made.distance_bound_mev + 1e-9


def test_result_is_hermitian_to_the_last_bit() -> None:
    model = strained(0.05)
    made = symmetrise(model, build_bloch_sum(model), operators_of(DIRAC)[:1], K[:1]).model
    assert np.array_equal(made.h_r, made.h_r[::-1].conj().transpose(0, 2, 1))


def test_what_is_no_group_is_refused() -> None:
    model, operators = DIRAC.tight_binding(), operators_of(DIRAC)
    third = next(o for o in operators if o.rotation.trace() == 0 and np.linalg.det(o.rotation) > 0)
    with pytest.raises(NotClosedError, match="no group"):
        symmetrise(model, build_bloch_sum(model), [operators[0], third], K)
    theta = theta_of(DIRAC)
    with pytest.raises(NotClosedError, match="without it"):
        symmetrise(model, build_bloch_sum(model), [operators[0], theta], K, time_reversal=theta)


def test_layers_stay_layers() -> None:
    layer = kane_mele()
    model = layer.tight_binding()
    made = symmetrise(
        model,
        build_bloch_sum(model),
        operators_of(layer),
        sample_points(layer.crystal.periodic),
        time_reversal=theta_of(layer),
    )
    assert made.distance_bound_mev < 1e-9
    assert not made.model.r_cells[:, 2].any()


@pytest.mark.parametrize("name", ["made_hr.dat", "made_hr.dat.gz"])
def test_written_file_is_read_back(tmp_path: Path, name: str) -> None:
    model = strained(0.03)
    made = symmetrise(model, build_bloch_sum(model), operators_of(DIRAC), K[:2]).model
    write_symmetrised(tmp_path / name, made)
    file = read_hr(tmp_path / name)
    assert np.all(file.degeneracies == 1)
    assert np.array_equal(file.r_cells, made.r_cells)
    np.testing.assert_allclose(file.h_r, made.h_r, atol=1e-12)


def test_written_in_wannier90_columns_where_asked(tmp_path: Path) -> None:
    write_symmetrised(tmp_path / "m_hr.dat", DIRAC.tight_binding(), header="a note", decimals=6)
    lines = (tmp_path / "m_hr.dat").read_text().splitlines()
    assert lines[0].strip() == "a note"
    assert len(lines[-1]) == 5 * 5 + 2 * 12
    with pytest.raises(ValueError, match="header"):
        write_symmetrised(tmp_path / "m_hr.dat", DIRAC.tight_binding(), header="two\nlines")


def test_orbitals_may_come_in_any_home_cell() -> None:
    """Homes and shifts cancel: a model with functions moved to other cells stays as it is."""
    basis = replace(DIRAC.basis, positions_frac=DIRAC.basis.positions_frac + np.array([[0, 1, 0]]))
    moved = replace(DIRAC, basis=basis)
    model = DIRAC.tight_binding()
    made = symmetrise(model, build_bloch_sum(model), operators_of(moved), K[:3])
    assert made.distance_bound_mev < 1e-9
