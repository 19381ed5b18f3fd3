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
    print(f"\n{case}: {n_solves} solves, {ours * n_solves:.2f} s, {ours / theirs:.1f} x LAPACK")
    assert n_solves <= AIM_SOLVES[case]
    assert ours / theirs < AIM_RATIO
