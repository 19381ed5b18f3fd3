"""A certificate that was tampered with, or that belongs to something else, does not hold."""

from __future__ import annotations

import functools
from dataclasses import replace

import numpy as np
import pytest

from proof_models import proven, random_model
from topovet.spectrum.proof.prove import ProvenHamiltonian, prove_direct_gap
from topovet.spectrum.proof.recheck import recheck
from topovet.spectrum.proof.results import Certificate


@functools.cache
def _made() -> tuple[ProvenHamiltonian, Certificate]:
    hamiltonian = proven(random_model(5, 4, level_ev=4.0))
    proof, certificate = prove_direct_gap(
        hamiltonian, 2, attained_k=np.zeros(3), tolerance=0.3, max_solves=20_000
    )
    assert proof.status == "proved"
    return hamiltonian, certificate


def test_honest_certificate_holds() -> None:
    hamiltonian, certificate = _made()
    found = recheck(hamiltonian.model, certificate)
    assert found.holds
    assert found.lowest_ev >= certificate.claim_ev - 1e-12
    assert (found.n_boxes, found.n_open) == (len(certificate.levels), 0)


def test_a_missing_box_is_a_hole() -> None:
    hamiltonian, made = _made()
    volume = np.prod(0.5**made.levels, axis=1)
    kept = np.arange(len(volume)) != volume.argmax()
    less = replace(made, levels=made.levels[kept], indices=made.indices[kept])
    assert any("hole" in problem for problem in recheck(hamiltonian.model, less).problems)


def test_a_higher_claim_fails() -> None:
    hamiltonian, made = _made()
    more = replace(made, claim_ev=1.4 * made.claim_ev)
    assert any("claims" in problem for problem in recheck(hamiltonian.model, more).problems)


def test_boxes_put_together_fail() -> None:
    """One box in place of all: the cover is right, the bound is not."""
    hamiltonian, made = _made()
    none = np.zeros((1, 3), dtype=np.int64)
    one = replace(made, levels=none, indices=none, lower_ev=np.array([made.claim_ev]))
    assert any("claims" in problem for problem in recheck(hamiltonian.model, one).problems)


@pytest.mark.parametrize("image", [-np.eye(3, dtype=np.int64), 2 * np.eye(3, dtype=np.int64)])
def test_a_symmetry_that_is_not_there_fails(image: np.ndarray) -> None:
    hamiltonian, made = _made()
    images = np.array([np.eye(3, dtype=np.int64), image])
    claimed = replace(made, images=images, residuals_ev=np.array([0.0, 1e-6]))
    assert not recheck(hamiltonian.model, claimed).holds


def test_a_smaller_cell_fails() -> None:
    """Sites nearer to the seed than any of its images would make the part to be covered smaller."""
    hamiltonian, made = _made()
    nearer = made.seed + 0.5 * (made.sites - made.seed)
    problems = recheck(hamiltonian.model, replace(made, sites=nearer)).problems
    assert any("no image of its seed" in problem for problem in problems)


def test_another_hamiltonian_fails() -> None:
    _, made = _made()
    other = random_model(6, 4, level_ev=2.0)
    assert not recheck(other, made).holds
