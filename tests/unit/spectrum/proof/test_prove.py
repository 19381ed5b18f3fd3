"""Proved gaps against gaps known in closed form, and against whatever sampling finds."""

from __future__ import annotations

import functools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from chern_models import haldane, qi_wu_zhang
from lattice_models import LatticeModel, kane_mele, wilson_dirac
from proof_models import hidden_pair, plain_energies, proven, random_model, weyl_pair
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import build_model
from topovet.spectrum.eigen import mesh_eigenvalues
from topovet.spectrum.gap import sample_gap
from topovet.spectrum.proof.prove import (
    ProvenHamiltonian,
    prove_direct_gap,
    prove_indirect_gap,
)
from topovet.spectrum.proof.recheck import recheck
from topovet.spectrum.proof.symmetry_use import images_of, no_images
from topovet.symmetry.operators import build_operator

GAMMA = np.zeros(3)
EASY = {"max_solves": 20_000}


def _qi_wu_zhang(m: float) -> tuple[LatticeModel, float]:
    """E^2 = 2 + m^2 + 2 m (x + y) + 2 x y, x = cos k_x, y = cos k_y: least at a corner."""
    return qi_wu_zhang(m=m), 2 * min(abs(m + 2), abs(m), abs(m - 2))


def _wilson_dirac(m: float) -> tuple[LatticeModel, float]:
    """E^2 = 3 + m^2 + 2 m sum_i x_i + 2 sum_(i<j) x_i x_j, linear in each cosine: at a TRIM."""
    return wilson_dirac(m=m), 2 * min(abs(m + 3), abs(m + 1), abs(m - 1), abs(m - 3))


KNOWN = {
    "Qi-Wu-Zhang": _qi_wu_zhang(-1.0),
    "Qi-Wu-Zhang, narrow": _qi_wu_zhang(1.999),
    "Wilson-Dirac": _wilson_dirac(-2.0),
    "Wilson-Dirac, narrow": _wilson_dirac(-2.9995),
    # Kane and Mele 2005, as in their docstring: |6 sqrt(3) lambda_so - 2 lambda_v| at K
    "Kane-Mele": (kane_mele(lambda_v=0.1), 6 * np.sqrt(3) * 0.06 - 0.2),
    # Haldane 1988: 2 |m - 3 sqrt(3) t2 sin phi| at K or K'
    "Haldane": (haldane(m=0.2), 2 * (3 * np.sqrt(3) * 0.1 - 0.2)),
}


def _of(model: LatticeModel) -> ProvenHamiltonian:
    """With time reversal as its only symmetry, where there is spin."""
    tight = model.tight_binding()
    images = no_images()
    if model.spinful:
        images = images_of(tight, [], time_reversal=True)
    return ProvenHamiltonian(tight, build_bloch_sum(tight), model.crystal, images)


@pytest.mark.parametrize("name", KNOWN)
def test_known_gaps(name: str) -> None:
    model, gap = KNOWN[name]
    start = np.array([0.07, 0.12, 0.03]) * np.array(model.crystal.periodic)
    proof, certificate = prove_direct_gap(_of(model), model.filling, attained_k=start, **EASY)
    assert (proof.status, proof.reason) == ("proved", "")
    assert proof.attained_ev == pytest.approx(gap, rel=1e-6)
    assert 0.98 * gap * (1 - 1e-6) <= proof.proved_min_ev <= gap
    assert recheck(model.tight_binding(), certificate).holds


def test_a_chain() -> None:
    """Su, Schrieffer and Heeger's chain, |t_1 + t_2 exp(i k)|: gap 2 |t_1 - t_2| at k = 1/2."""
    raising = np.array([[0, 1], [0, 0]], dtype=complex)
    hops = np.array([0.7 * (raising + raising.T), 0.5 * raising, 0.5 * raising.T])
    model = build_model(np.array([[0, 0, 0], [-1, 0, 0], [1, 0, 0]]), hops, spinful=False)
    crystal = Crystal(np.diag([2.5, 9.0, 9.0]), ("C",), np.zeros((1, 3)), (True, False, False))
    images = images_of(model, [], time_reversal=True)
    assert len(images.matrices) == 2
    proof, certificate = prove_direct_gap(
        proven(model, crystal=crystal, images=images), 1, attained_k=GAMMA + 0.1, **EASY
    )
    assert proof.attained_ev == pytest.approx(0.4)
    assert proof.proved_min_ev >= 0.392 - 1e-9
    assert recheck(model, certificate).holds


def _nothing_sampled_is_below_the_proof(seed: int, filling: int, planar: bool) -> None:
    model = random_model(seed, 4, level_ev=3.0, planar=planar)
    crystal = Crystal(np.diag([3.0, 4.0, 9.0]), ("H",), np.zeros((1, 3)), (True, True, not planar))
    proof, _ = prove_direct_gap(
        proven(model, crystal=crystal), filling, attained_k=GAMMA, tolerance=0.3, max_solves=800
    )
    k = np.random.default_rng(seed + 1).random((400, 3)) * [1, 1, not planar]
    energies = plain_energies(model, k)
    assert proof.proved_min_ev <= (energies[:, filling] - energies[:, filling - 1]).min() + 1e-12
    assert proof.proved_min_ev <= proof.attained_ev
    if proof.status == "proved":
        assert proof.proved_min_ev >= 0.7 * proof.attained_ev - 1e-12


RANDOM_MODELS = {
    "seed": st.integers(0, 1_000_000),
    "filling": st.integers(1, 3),
    "planar": st.booleans(),
}


@settings(max_examples=25, deadline=None)
@given(**RANDOM_MODELS)
def test_nothing_sampled_is_below_the_proof(seed: int, filling: int, planar: bool) -> None:
    _nothing_sampled_is_below_the_proof(seed, filling, planar)


@pytest.mark.endurance
@settings(max_examples=1000, deadline=None)
@given(**RANDOM_MODELS)
def test_nothing_sampled_is_below_a_thousand_proofs(seed: int, filling: int, planar: bool) -> None:
    _nothing_sampled_is_below_the_proof(seed, filling, planar)


def test_a_cone_that_no_sample_sees_is_found() -> None:
    """0.1 meV between the mesh points, where another pair of bands is nearer on the whole mesh."""
    centre = np.array([0.0398, 0.4453, 0.2117])
    model = hidden_pair(centre, 5e-5)
    bloch = build_bloch_sum(model)
    sampled = sample_gap(bloch, mesh_eigenvalues(bloch, (18, 18, 18), even=False), 2)
    assert sampled.direct_ev == pytest.approx(0.07)
    proof, _ = prove_direct_gap(
        proven(model), 2, attained_k=np.array(sampled.direct_k), max_solves=60_000
    )
    assert proof.status == "proved"
    assert proof.attained_ev == pytest.approx(1e-4, rel=1e-3)
    assert proof.proved_min_ev >= 0.979e-4
    np.testing.assert_allclose(proof.k_frac, centre, atol=1e-4)


@pytest.mark.parametrize("half_distance", [0.13, 5e-4])
def test_closings_are_not_proved_away(half_distance: float) -> None:
    crystal = Crystal(4.0 * np.eye(3), ("H",), np.zeros((1, 3)))
    proof, certificate = prove_direct_gap(
        proven(weyl_pair(half_distance), crystal=crystal), 2, attained_k=GAMMA + 0.02, **EASY
    )
    assert proof.status == "closing suspected"
    assert proof.proved_min_ev == 0.0
    assert proof.elsewhere_ev >= 1e-3
    centres = (2 * certificate.open_indices + 1) * 0.5 ** (certificate.open_levels + 1.0)
    k = certificate.origin + centres @ certificate.axes
    node = np.array([0.0, 0.0, half_distance])
    for sign in (1, -1):
        off = k - sign * node
        assert np.abs(off - np.round(off)).max(axis=1).min() < 3e-3
    assert recheck(weyl_pair(half_distance), certificate).holds


def test_gapped_weyl_pair_is_proved() -> None:
    crystal = Crystal(4.0 * np.eye(3), ("H",), np.zeros((1, 3)))
    proof, _ = prove_direct_gap(
        proven(weyl_pair(5e-4, mass=0.003), crystal=crystal), 2, attained_k=GAMMA + 0.02, **EASY
    )
    assert proof.status == "proved"
    assert proof.attained_ev == pytest.approx(0.006, rel=1e-6)


def test_spent_budget_leaves_a_bound() -> None:
    model = random_model(5, 4, level_ev=3.0)
    whole, _ = prove_direct_gap(proven(model), 2, attained_k=GAMMA, **EASY)
    assert whole.status == "proved"
    bounds = []
    for budget in (100, 300, 600):
        proof, certificate = prove_direct_gap(proven(model), 2, attained_k=GAMMA, max_solves=budget)
        assert proof.status == "budget ended"
        assert proof.n_open == len(certificate.open_levels) > 0
        assert "budget" in proof.reason
        assert recheck(model, certificate).holds
        bounds.append(proof.proved_min_ev)
    assert bounds == sorted(bounds)
    assert bounds[-1] < whole.proved_min_ev


def test_a_budget_of_nothing_says_nothing_false() -> None:
    model = random_model(5, 4, level_ev=3.0)
    proof, certificate = prove_direct_gap(proven(model), 2, attained_k=GAMMA, max_solves=1)
    assert proof.status == "budget ended"
    assert 0.0 <= proof.proved_min_ev <= proof.elsewhere_ev <= proof.attained_ev
    assert (proof.n_boxes, len(certificate.levels)) == (0, 0)


@pytest.mark.parametrize(("filling", "tolerance"), [(0, 0.02), (4, 0.02), (2, 0.0)])
def test_questions_without_an_answer(filling: int, tolerance: float) -> None:
    hamiltonian = proven(random_model(5, 4))
    with pytest.raises(ValueError, match=r"no gap above band|without tolerance"):
        prove_direct_gap(hamiltonian, filling, attained_k=GAMMA, tolerance=tolerance, max_solves=10)


def test_indirect_gap() -> None:
    """Each edge is proved by itself; between them lies whatever sampling finds."""
    model = random_model(11, 4, level_ev=6.0)
    proof, certificates = prove_indirect_gap(
        proven(model), 2, valence_k=GAMMA, conduction_k=GAMMA, tolerance_ev=0.05, **EASY
    )
    assert proof.status == "proved"
    assert proof.attained_ev - 0.05 <= proof.proved_min_ev <= proof.attained_ev
    energies = plain_energies(model, np.random.default_rng(0).random((20_000, 3)))
    sampled = energies[:, 2].min() - energies[:, 1].max()
    assert proof.proved_min_ev <= sampled
    assert sampled - proof.attained_ev < 0.05
    assert all(recheck(model, c).holds for c in certificates)


@functools.cache
def _wilson_with_images(broken_ev: float) -> tuple[ProvenHamiltonian, float]:
    """The cubic model with all 48 operations; one level of one spin moved by `broken_ev`."""
    model = wilson_dirac(m=-2.0)
    tight = model.tight_binding()
    h_r = tight.h_r.copy()
    h_r[tight.n_r // 2, 0, 0] += broken_ev
    tight = type(tight)(tight.r_cells, h_r, True)
    rotations = {np.eye(3, dtype=int).tobytes(): np.eye(3, dtype=int)}
    generators = [
        np.array([[0, -1, 0], [1, 0, 0], [0, 0, 1]]),
        np.array([[0, 0, 1], [1, 0, 0], [0, 1, 0]]),
        -np.eye(3, dtype=int),
    ]
    while True:
        more = {(a @ g).tobytes(): a @ g for a in rotations.values() for g in generators}
        if more.keys() <= rotations.keys():
            break
        rotations |= more
    operators = [
        build_operator(model.basis, model.crystal, w, np.zeros(3)) for w in rotations.values()
    ]
    images = images_of(tight, operators, time_reversal=True)
    hamiltonian = ProvenHamiltonian(tight, build_bloch_sum(tight), model.crystal, images)
    return hamiltonian, float(images.worst_ev)


def test_reduced_zone_says_what_the_whole_zone_says() -> None:
    reduced, residual = _wilson_with_images(0.0)
    assert residual < 1e-9
    whole = ProvenHamiltonian(reduced.model, reduced.bloch, reduced.crystal, no_images())
    start = np.array([0.1, 0.2, 0.3])
    a, certificate = prove_direct_gap(reduced, 2, attained_k=start, **EASY)
    b, _ = prove_direct_gap(whole, 2, attained_k=start, **EASY)
    assert (a.n_operations, b.n_operations) == (48, 1)
    for proof in (a, b):
        assert proof.status == "proved"
        assert 1.96 <= proof.proved_min_ev <= 2.0
        assert proof.attained_ev == pytest.approx(2.0)
    assert a.n_solves < b.n_solves / 8
    assert recheck(reduced.model, certificate).holds


def test_broken_symmetry_is_paid_for_or_not_used() -> None:
    slightly, residual = _wilson_with_images(4e-3)
    assert 4e-3 - 1e-9 <= residual < 0.05
    start = np.array([0.1, 0.2, 0.3])
    proof, certificate = prove_direct_gap(slightly, 2, attained_k=start, **EASY)
    assert proof.status == "proved"
    assert proof.n_operations == 48
    assert proof.symmetry_cost_ev == pytest.approx(2 * proof.symmetry_residual_ev)
    assert proof.symmetry_residual_ev >= 4e-3 - 1e-9
    assert proof.proved_min_ev <= certificate.claim_ev - proof.symmetry_cost_ev + 1e-12
    k = np.random.default_rng(3).random((4000, 3))
    energies = plain_energies(slightly.model, k)
    assert proof.proved_min_ev <= (energies[:, 2] - energies[:, 1]).min()
    badly, _ = _wilson_with_images(0.3)
    proof, _ = prove_direct_gap(badly, 2, attained_k=start, **EASY)
    assert proof.n_operations < 48
    assert proof.symmetry_cost_ev <= proof.tolerance_ev
