"""Time reversal found, in the right spin order, and missed where it is broken."""

from __future__ import annotations

import numpy as np
import pytest

from lattice_models import LatticeModel, fu_kane_mele, kane_mele, wilson_dirac
from topovet.model.assemble import LatticeHamiltonian
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model
from topovet.model.ordering import interlacing_order
from topovet.symmetry.results import TimeReversalTest
from topovet.symmetry.time_reversal import (
    find_spin_order,
    infer_spin,
    measure_time_reversal,
    spin_operator,
)


def _lattice(model: LatticeModel) -> LatticeHamiltonian:
    built = build_model(model.r_cells, model.h_r, spinful=model.spinful)
    return LatticeHamiltonian(built, build_bloch_sum(built))


def _measure(lattice: LatticeHamiltonian) -> TimeReversalTest:
    return measure_time_reversal(lattice.model, lattice.bloch, PERIODIC)


PERIODIC = (True, True, True)
FKM = _lattice(fu_kane_mele())


def test_model_with_time_reversal() -> None:
    test = _measure(FKM)
    assert test.present
    assert test.violation_mev < 1e-9
    assert test.kramers_splitting_mev == pytest.approx(0, abs=1e-9)


def test_spin_order_is_found() -> None:
    interlaced = find_spin_order(FKM.bloch, PERIODIC, spinful=True)
    assert interlaced.found == "interlaced"
    assert interlaced.interlaced_mev == pytest.approx(0, abs=1e-9)
    assert interlaced.block_mev is not None
    assert interlaced.block_mev > 10
    block = np.argsort(interlacing_order(FKM.model.n_orb))
    shuffled = TightBindingModel(
        FKM.model.r_cells, FKM.model.h_r[:, block[:, None], block], spinful=True
    )
    order = find_spin_order(build_bloch_sum(shuffled), PERIODIC, spinful=True)
    assert order.found == "block"
    assert order.block_mev == pytest.approx(0, abs=1e-9)


@pytest.mark.parametrize("pairs", [(0,), (1,)])
def test_pairs_turned_round_are_found(pairs: tuple[int, ...]) -> None:
    """Down before up in one of two orbitals: neither order has time reversal, this reading has."""
    order = np.arange(FKM.model.n_orb).reshape(-1, 2)
    order[list(pairs)] = order[list(pairs), ::-1]
    flat = order.reshape(-1)
    turned = TightBindingModel(FKM.model.r_cells, FKM.model.h_r[:, flat[:, None], flat], True)
    found = find_spin_order(build_bloch_sum(turned), PERIODIC, spinful=True)
    assert found.found == "interlaced"
    assert found.interlaced_mev is not None
    assert found.interlaced_mev > 10
    # one of two orbitals: which of them is turned is a matter of the overall sign
    assert len(found.swapped_pairs) == 1
    assert found.swapped_mev == pytest.approx(0, abs=1e-9)


def test_minority_of_pairs_is_the_one_that_is_turned() -> None:
    model = wilson_dirac(m=-2.0)
    order = np.arange(model.n_orb).reshape(-1, 2)
    order[2] = order[2, ::-1]
    flat = order.reshape(-1)
    built = model.tight_binding()
    turned = TightBindingModel(built.r_cells, built.h_r[:, flat[:, None], flat], True)
    found = find_spin_order(build_bloch_sum(turned), PERIODIC, spinful=True)
    assert found.swapped_pairs == (2,)
    assert found.swapped_mev == pytest.approx(0, abs=1e-9)


def test_all_pairs_turned_round_are_no_fault() -> None:
    """Another name for the axis of the spin: time reversal holds as it stands."""
    flat = np.arange(FKM.model.n_orb).reshape(-1, 2)[:, ::-1].reshape(-1)
    turned = TightBindingModel(FKM.model.r_cells, FKM.model.h_r[:, flat[:, None], flat], True)
    found = find_spin_order(build_bloch_sum(turned), PERIODIC, spinful=True)
    assert (found.swapped_pairs, found.swapped_mev) == ((), None)


def test_a_moment_is_not_taken_for_turned_pairs() -> None:
    h = FKM.model.h_r.copy()
    h[len(h) // 2] += 0.05 * np.kron(np.eye(FKM.model.n_orb // 2), np.diag([1.0, -1.0]))
    magnetic = build_bloch_sum(TightBindingModel(FKM.model.r_cells, h, True))
    found = find_spin_order(magnetic, PERIODIC, spinful=True)
    assert found.swapped_mev is not None
    assert found.swapped_mev > 10


def test_spin_that_was_not_declared_shows() -> None:
    order = find_spin_order(FKM.bloch, PERIODIC, spinful=False)
    assert order.found == "none"
    assert order.interlaced_mev == pytest.approx(0, abs=1e-9)
    assert order.spinless_mev > 10


@pytest.mark.parametrize("field_ev", [0.0015, 0.05])
def test_zeeman_field_breaks_it_by_its_size(field_ev: float) -> None:
    h = FKM.model.h_r.copy()
    origin = len(h) // 2
    h[origin] += field_ev * np.kron(np.eye(FKM.model.n_orb // 2), np.diag([1.0, -1.0]))
    model = TightBindingModel(FKM.model.r_cells, h, True)
    test = _measure(LatticeHamiltonian(model, build_bloch_sum(model)))
    assert not test.present
    assert test.violation_mev == pytest.approx(2000 * field_ev, rel=1e-9)
    assert test.violation_r_mev == pytest.approx(2000 * field_ev, rel=1e-9)


def test_spoilt_shifts_do_not_hide_time_reversal() -> None:
    """Present on the unshifted reading, violated by the shifted one: present, violation shown."""
    h = FKM.model.h_r.copy()
    origin = len(h) // 2
    h[origin] += 0.005 * np.kron(np.eye(FKM.model.n_orb // 2), np.diag([1.0, -1.0]))
    spoilt = TightBindingModel(FKM.model.r_cells, h, True)
    test = measure_time_reversal(spoilt, build_bloch_sum(spoilt), PERIODIC, unshifted=FKM.bloch)
    assert test.present
    assert test.violation_mev == pytest.approx(10)
    assert test.violation_unshifted_mev == pytest.approx(0, abs=1e-9)


def test_odd_number_of_spinor_components_has_none() -> None:
    model = build_model(np.zeros((1, 3), int), np.eye(3, dtype=complex)[None], spinful=True)
    test = measure_time_reversal(model, build_bloch_sum(model), PERIODIC)
    assert not test.present


def test_spin_mixing_vanishes_without_spin_orbit_coupling() -> None:
    without = _measure(_lattice(kane_mele(lambda_so=0.0)))
    with_it = _measure(_lattice(kane_mele(lambda_so=0.06)))
    assert without.spin_mixing_mev == pytest.approx(0, abs=1e-9)
    assert with_it.spin_mixing_mev is not None
    assert with_it.spin_mixing_mev > 50


def test_spin_is_inferred_only_where_it_is_certain() -> None:
    assert infer_spin(FKM.bloch) is True
    spinless = kane_mele(lambda_so=0.0)
    up = np.arange(0, spinless.h_r.shape[1], 2)
    real = build_model(spinless.r_cells, spinless.h_r[:, up[:, None], up[None, :]], spinful=False)
    # two orbitals without spin are also two equal spins of one orbital only if H says so
    assert infer_spin(build_bloch_sum(real)) is False
    doubled = _lattice(spinless)
    assert infer_spin(doubled.bloch) is None


def test_operator_squares_to_minus_one() -> None:
    for order in ("interlaced", "block"):
        u = spin_operator(6, order)
        np.testing.assert_array_equal(u @ u, -np.eye(6))
    with pytest.raises(ValueError, match="unknown spin order"):
        spin_operator(6, "mixed")
