"""Cost of a proof beside bare LAPACK, and the eigenvalue problems that a certified case takes.

The yardstick is `numpy.linalg.eigh` (LAPACK zheevd) on as many matrices of the same size, already
in memory: CPU time of one thread, smallest of several rounds. A box needs, beside one eigenproblem,
ten sums over R, their projection on two blocks, and the largest eigenvalue of each block at eight
corners; the ratio says what all of that costs in eigenproblems.

Run with `pytest -m bench -s tests/bench/test_bench_proof.py`.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
import pytest

from real_cases import CASES
from topovet.pipeline.dossier import start_run
from topovet.pipeline.steps_proof import images_on_offer
from topovet.spectrum import eigen
from topovet.spectrum.proof.expansion import expand
from topovet.spectrum.proof.prove import ProvenHamiltonian, prove_direct_gap

pytestmark = pytest.mark.bench

AIM_SOLVES = {"PbTe": 600, "Bi2Se3": 3000}
AIM_RATIO = 25.0


@pytest.fixture(autouse=True)
def _one_thread(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(eigen, "worker_count", lambda: 1)


def _seconds(function: Callable[[], object], rounds: int = 3) -> float:
    best = np.inf
    for _ in range(rounds):
        start = time.process_time()
        function()
        best = min(best, time.process_time() - start)
    return best


def _uniform_mesh(hamiltonian: ProvenHamiltonian, loss_ev: float) -> float:
    """Points of a mesh on whose cells no gap falls by more than loss_ev, by Weyl's inequality.

    Every level moves by at most ||H(k) - H(k0)|| <= ||sum_R |H(R)| 2 pi sum_a h_a |d_a| ||.
    """
    expansion = expand(hamiltonian.model, hamiltonian.bloch, np.zeros(3), np.eye(3))
    d = np.abs(expansion.reach[:, :, None, None] + expansion.offsets).sum(axis=1)
    slope = 2 * np.pi * (np.abs(hamiltonian.model.h_r) * d).sum(axis=0)
    half_width = loss_ev / 2 / np.linalg.norm(slope, ord=2)
    return float((0.5 / half_width) ** 3)


@pytest.mark.parametrize("case", AIM_SOLVES)
def test_cost_of_a_proof(case: str) -> None:
    run = start_run(CASES / case)
    based, crystal = run.result("hamiltonian-with-basis"), run.result("declarations").crystal
    images = images_on_offer(based, crystal, run.result("time-reversal"), run.result("group"))
    lattice, gap = based.lattice, run.result("gap")
    hamiltonian = ProvenHamiltonian(lattice.model, lattice.bloch, crystal, images)
    filling = run.result("electrons").filling

    def prove() -> int:
        proof, _ = prove_direct_gap(
            hamiltonian, filling, attained_k=np.array(gap.direct_k), max_solves=20_000
        )
        assert proof.status == "proved"
        return proof.n_solves

    n_solves = prove()
    h = lattice.bloch.at(np.random.default_rng(0).random((256, 3)))
    with eigen.one_blas_thread():
        ours = _seconds(prove) / n_solves
        theirs = _seconds(lambda: np.linalg.eigh(h)) / len(h)
    mesh = _uniform_mesh(hamiltonian, 0.02 * gap.direct_ev)
    print(f"\n{case}: {n_solves} solves, {ours * n_solves:.2f} s, {ours / theirs:.1f} x LAPACK")
    print(f"  a uniform mesh with the same guarantee has {mesh:.1e} points")
    assert n_solves <= AIM_SOLVES[case]
    assert ours / theirs < AIM_RATIO
