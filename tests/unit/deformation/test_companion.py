"""Whether a spinless companion is written in the functions of its case, and what is left of H."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from deformation_ends import end_of, turned
from lattice_models import kane_mele
from spinless_companions import square_sp, without_spin
from topovet.arrays import ComplexArray
from topovet.deformation.companion import CompanionTest, compare_companion, coupling_between
from topovet.deformation.comparison import EndMember
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel
from topovet.model.spin_parts import spin_frame, spin_orbit_sum

CASE = end_of(square_sp(offset=0.2, coupling=0.5))
PLAIN = end_of(without_spin(square_sp(offset=0.2, coupling=0.0)), inversion=False, name="plain")
SOME_K = np.array([[0.1, 0.27, 0.0], [-0.3, 0.45, 0.0]])


def fit_of(companion: EndMember, gap_ev: float = 0.3) -> CompanionTest:
    assert CASE.basis is not None
    return compare_companion(CASE, companion, spin_frame(CASE.basis), smallest_gap_ev=gap_ev)


def with_onsite(end: EndMember, extra: ComplexArray) -> EndMember:
    h_r = end.model.h_r.copy()
    h_r[end.model.n_r // 2] += extra
    return replace(end, model=replace(end.model, h_r=h_r))


def in_crystal(end: EndMember, *, scale: float = 1.0, symbol: str = "Te") -> EndMember:
    crystal = end.crystal
    made = Crystal(scale * crystal.cell, (symbol,), crystal.positions_frac, crystal.periodic)
    return replace(end, crystal=made)


def test_the_case_less_an_exact_companion_is_its_spin_dependent_part() -> None:
    coupling = coupling_between(CASE, PLAIN, None)
    built_in = spin_orbit_sum(build_bloch_sum(CASE.model))
    assert np.abs(coupling.at(SOME_K) - built_in.at(SOME_K)).max() < 1e-12
    test = fit_of(PLAIN)
    assert test.fits
    assert (test.difference_mev, test.offset_mev) == pytest.approx((0, 0), abs=1e-9)


def test_spinors_along_other_axes_change_nothing() -> None:
    """A spin axis of its own for each orbital: H turns with the declaration, V with it."""
    rng = np.random.default_rng(5)
    raw = rng.normal(size=(3, 2, 2)) + 1j * rng.normal(size=(3, 2, 2))
    spins = np.linalg.qr(raw)[0]
    spins /= np.sqrt(np.linalg.det(spins))[:, None, None]  # SU(2): time reversal keeps its form
    u = np.zeros((6, 6), dtype=complex)
    for i, spin in enumerate(spins):
        u[2 * i : 2 * i + 2, 2 * i : 2 * i + 2] = spin  # columns: the new spinors
    assert CASE.basis is not None
    basis = replace(CASE.basis, spinors=spins.transpose(0, 2, 1).reshape(6, 2))
    h_r = u.conj().T @ CASE.model.h_r @ u
    model = TightBindingModel(CASE.model.r_cells, h_r, spinful=True)
    case, frame = replace(CASE, basis=basis, model=model, inversion=None), spin_frame(basis)
    test = compare_companion(case, PLAIN, frame, smallest_gap_ev=None)
    assert (test.fits, test.difference_mev) == (True, pytest.approx(0, abs=1e-9))
    turned_back = u @ coupling_between(case, PLAIN, frame).at(SOME_K) @ u.conj().T
    assert np.abs(turned_back - coupling_between(CASE, PLAIN, None).at(SOME_K)).max() < 1e-12


def test_an_offset_of_energy_is_no_difference() -> None:
    test = fit_of(with_onsite(PLAIN, 7.0 * np.eye(3)))
    assert (test.difference_mev, test.offset_mev) == pytest.approx((0, 7000), abs=1e-6)


def test_inversion_is_asked_for_where_the_case_has_it() -> None:
    """s and px of one site coupled by 0.2 eV: D moves the element to its negative."""
    polar = np.zeros((3, 3), dtype=complex)
    polar[0, 1] = polar[1, 0] = 0.2
    assert fit_of(with_onsite(PLAIN, polar), gap_ev=0.5).inversion_mev == pytest.approx(400)
    refused = fit_of(with_onsite(PLAIN, polar), gap_ev=0.3)
    assert not refused.fits
    assert "breaks the inversion of the case by 400 meV at the TRIM" in refused.reason


@pytest.mark.parametrize(
    ("companion", "says"),
    [
        (replace(CASE, name="twin"), "twin is spinful; name a run with spinors = .false."),
        (replace(PLAIN, time_reversal=False), "plain breaks time reversal (spinless: H(R) is not"),
        (
            end_of(without_spin(kane_mele(lambda_so=0.0)), inversion=False, name="other"),
            "other has 4 (the spinless one counted twice): the two cannot be mixed",
        ),
        (replace(PLAIN, filling=1), "plain has 2 (the spinless one counted twice): no gap leads"),
        (turned(PLAIN, [2]), "differ in the signs of Wannier functions 5, 6"),
        (in_crystal(PLAIN, symbol="Se"), "plain has other elements (Te -> Se); name a run of the"),
        (
            in_crystal(PLAIN, scale=1.04),
            "plain has another structure (cell stretched by a factor 1",
        ),
    ],
    ids=["spinful", "magnetic", "size", "filling", "turned", "element", "strained"],
)
def test_a_companion_that_does_not_fit(companion: EndMember, says: str) -> None:
    test = fit_of(companion)
    assert not test.fits
    assert says in test.reason
    assert not test.reason.endswith(".")
    assert test.difference_mev is None
