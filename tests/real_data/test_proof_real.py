"""Proved gaps of first-principles cases, against sampling that shares no code with the proof."""

from __future__ import annotations

import functools

import numpy as np
import pytest

from proof_models import plain_energies
from real_cases import run_of
from topovet.model.hamiltonian import TightBindingModel
from topovet.pipeline.steps_proof import images_on_offer
from topovet.spectrum.proof.prove import ProvenHamiltonian, prove_direct_gap, prove_indirect_gap
from topovet.spectrum.proof.recheck import recheck
from topovet.spectrum.proof.results import Certificate, GapProof
from topovet.spectrum.proof.symmetry_use import no_images
from topovet.spectrum.results import GapSample

pytestmark = pytest.mark.real_data

SOLVES = {"PbTe": 600, "PbTe_a656": 600, "Bi2Se3": 3000, "BiTeI": 3000, "CdTe": 600}
"""Most eigenvalue problems for 2 %, local minimisation included."""


@functools.cache
def _hamiltonian(case: str) -> tuple[ProvenHamiltonian, int, GapSample]:
    run = run_of(case)
    lattice, crystal = run.result("hamiltonian-with-basis").lattice, run.result("declarations")
    images = images_on_offer(
        run.result("hamiltonian-with-basis"),
        crystal.crystal,
        run.result("time-reversal"),
        run.result("group"),
    )
    hamiltonian = ProvenHamiltonian(lattice.model, lattice.bloch, crystal.crystal, images)
    return hamiltonian, run.result("electrons").filling, run.result("gap")


TOLERANCE = {"Sb": 0.05}
"""Else 2 %: for the 4.7 meV of Sb that is too little for its symmetries to be of use."""


@functools.cache
def _proved(case: str) -> tuple[GapProof, Certificate]:
    hamiltonian, filling, gap = _hamiltonian(case)
    return prove_direct_gap(
        hamiltonian,
        filling,
        attained_k=np.array(gap.direct_k),
        tolerance=TOLERANCE.get(case, 0.02),
        max_solves=40_000,
    )


def _gaps_near_and_far(model: TightBindingModel, filling: int, at: np.ndarray) -> np.ndarray:
    """Gaps at points all over the zone, and ever closer to a place."""
    rng = np.random.default_rng(7)
    near = at + rng.normal(size=(1500, 3)) * 10 ** rng.uniform(-4, -1, (1500, 1))
    energies = plain_energies(model, np.concatenate([rng.random((2500, 3)), near]))
    return np.asarray(energies[:, filling] - energies[:, filling - 1])


@pytest.mark.parametrize(
    "case",
    [
        *("PbTe", "BiTeI", "Sb"),
        *(pytest.param(c, marks=pytest.mark.endurance) for c in ("PbTe_a656", "Bi2Se3", "CdTe")),
    ],
)
def test_proof_and_sampling_agree(case: str) -> None:
    hamiltonian, filling, gap = _hamiltonian(case)
    proof, _ = _proved(case)
    assert (proof.status, proof.reason) == ("proved", "")
    assert proof.attained_ev == pytest.approx(gap.direct_ev, abs=2e-6)
    asked = (1 - TOLERANCE.get(case, 0.02)) * proof.attained_ev
    assert asked - 1e-12 <= proof.proved_min_ev <= proof.attained_ev
    gaps = _gaps_near_and_far(hamiltonian.model, filling, np.array(proof.k_frac))
    assert gaps.min() >= proof.proved_min_ev
    assert gaps.min() < 1.1 * proof.attained_ev
    assert proof.n_solves <= SOLVES.get(case, 40_000)


@pytest.mark.parametrize("case", ["PbTe", "BiTeI"])
def test_certificates_hold(case: str) -> None:
    hamiltonian, _, _ = _hamiltonian(case)
    proof, certificate = _proved(case)
    found = recheck(hamiltonian.model, certificate)
    assert found.problems == ()
    assert found.lowest_ev - found.cost_ev >= proof.proved_min_ev - 1e-9
    assert found.n_boxes == proof.n_boxes


def test_symmetry_saves_and_does_not_change_the_answer() -> None:
    hamiltonian, filling, gap = _hamiltonian("PbTe_a656")
    whole = ProvenHamiltonian(
        hamiltonian.model, hamiltonian.bloch, hamiltonian.crystal, no_images()
    )
    proof, _ = prove_direct_gap(
        whole, filling, attained_k=np.array(gap.direct_k), max_solves=40_000
    )
    reduced, _ = _proved("PbTe_a656")
    assert (reduced.n_operations, proof.n_operations) == (48, 1)
    assert proof.status == "proved"
    assert proof.attained_ev == pytest.approx(reduced.attained_ev, abs=1e-5)
    assert proof.proved_min_ev == pytest.approx(reduced.proved_min_ev, rel=0.02)
    assert proof.n_solves > 8 * reduced.n_solves


def test_minimum_is_found_from_anywhere() -> None:
    """The cone of Sb, 4.7 meV, from a start at the 69 meV of L: the search itself finds it."""
    hamiltonian, filling, gap = _hamiltonian("Sb")
    proof, _ = prove_direct_gap(
        hamiltonian,
        filling,
        attained_k=np.array([0.0, 0.0, 0.5]),
        tolerance=0.1,
        max_solves=40_000,
    )
    assert proof.status == "proved"
    assert gap.direct_ev - 1e-6 <= proof.attained_ev <= 1.1 * gap.direct_ev


def test_indirect_gap_of_silicon() -> None:
    hamiltonian, filling, gap = _hamiltonian("Si")
    proof, certificates = prove_indirect_gap(
        hamiltonian,
        filling,
        valence_k=np.array(gap.vbm_k),
        conduction_k=np.array(gap.cbm_k),
        tolerance_ev=0.04,
        max_solves=20_000,
    )
    assert proof.status == "proved"
    assert proof.attained_ev == pytest.approx(gap.indirect_ev, abs=1e-5)
    assert proof.attained_ev - 0.04 <= proof.proved_min_ev <= proof.attained_ev
    assert all(recheck(hamiltonian.model, c).holds for c in certificates)


def test_gap_between_other_bands() -> None:
    """The widest gap between two neighbouring bands of PbTe, wherever that is."""
    hamiltonian, _, _ = _hamiltonian("PbTe")
    energies = plain_energies(hamiltonian.model, np.random.default_rng(0).random((500, 3)))
    gaps = np.diff(energies, axis=1).min(axis=0)
    below = int(gaps.argmax()) + 1
    proof, _ = prove_direct_gap(hamiltonian, below, attained_k=np.zeros(3), max_solves=20_000)
    assert proof.proved_min_ev <= gaps[below - 1]
    assert proof.filling == below
