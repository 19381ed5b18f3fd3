"""Cost of H(k) beside its diagonalisation: our routines against bare LAPACK, one run, one thread.

The yardstick is `numpy.linalg.eigvalsh` / `eigh` (LAPACK zheevd) on the same matrices, already
summed and in memory, so a ratio of 1 would mean that H(k) costs nothing. CPU time of one thread,
the two sides taken in turn, smallest of several rounds each: on a shared machine the minimum is
what the code costs, anything above it is the neighbours.

Run with `pytest -m bench -s tests/bench/test_bench_bloch.py`.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import partial

import numpy as np
import pytest

from topovet.arrays import ComplexArray, FloatArray
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import build_model
from topovet.spectrum import eigen

pytestmark = pytest.mark.bench

ROUNDS = 5
AIM = {"mesh": 1.25, "line": 1.25, "scattered": 1.5}
N_K = {30: 12**3, 100: 8**3}


@pytest.fixture(autouse=True)
def _one_thread(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(eigen, "worker_count", lambda: 1)


def _random_sum(n_orb: int) -> BlochSum:
    """A decaying random Hamiltonian with the 287 R of a 7 x 7 x 7 block cut to a ball."""
    rng = np.random.default_rng(n_orb)
    r_cells = np.array([np.subtract(r, 3) for r in np.ndindex(7, 7, 7)])
    r_cells = r_cells[(r_cells**2).sum(axis=1) <= 18]
    h_r = rng.normal(size=(len(r_cells), n_orb, n_orb, 2)) @ np.array([1, 1j])
    h_r *= np.exp(-np.linalg.norm(r_cells, axis=1))[:, None, None]
    return build_bloch_sum(build_model(r_cells, h_r, spinful=True))


def _seconds(*functions: Callable[[], object]) -> list[float]:
    """Smallest CPU time of each function, taken in turn."""
    best = [np.inf] * len(functions)
    for _ in range(ROUNDS):
        for i, function in enumerate(functions):
            start = time.process_time()
            function()
            best[i] = min(best[i], time.process_time() - start)
    return best


def _cases(bloch: BlochSum) -> dict[str, tuple[BlochSum, FloatArray, Callable[[], object]]]:
    """For each arrangement of k: all k, and our own routine for the energies at them."""
    n_k = N_K[bloch.n_orb]
    side = round(n_k ** (1 / 3))
    scattered = np.random.default_rng(1).random((n_k, 3))
    line = np.linspace(0, 1, n_k, endpoint=False)[:, None]
    mesh = (side, side, side)

    def on_line() -> object:
        return eigen.eigenvalues(bloch.partial((1, 2), np.array([0.1, 0.2])), line)

    return {
        "mesh": (
            bloch,
            eigen.mesh_points(mesh),
            lambda: eigen.mesh_eigenvalues(bloch, mesh, even=False),
        ),
        "line": (bloch, np.concatenate([line, 0 * line + 0.1, 0 * line + 0.2], axis=1), on_line),
        "scattered": (bloch, scattered, lambda: eigen.eigenvalues(bloch, scattered)),
    }


@pytest.mark.parametrize("n_orb", sorted(N_K))
def test_eigenvalues_beside_bare_lapack(n_orb: int, capsys: pytest.CaptureFixture[str]) -> None:
    bloch = _random_sum(n_orb)
    for name, (full, k_frac, ours) in _cases(bloch).items():
        h_k = full.at(k_frac)
        with eigen.one_blas_thread():
            ours_s, bare_s = _seconds(ours, partial(np.linalg.eigvalsh, h_k))
        energies = np.asarray(ours()).reshape(len(k_frac), n_orb)
        np.testing.assert_allclose(energies, np.linalg.eigvalsh(h_k), atol=1e-10)
        _report(capsys, f"{n_orb} bands, {name}, energies", ours_s, bare_s, len(k_frac), AIM[name])


@pytest.mark.parametrize("n_orb", sorted(N_K))
def test_eigenstates_beside_bare_lapack(n_orb: int, capsys: pytest.CaptureFixture[str]) -> None:
    bloch = _random_sum(n_orb)
    k_frac = np.random.default_rng(1).random((N_K[n_orb], 3))
    h_k: ComplexArray = bloch.at(k_frac)
    with eigen.one_blas_thread():
        ours_s, bare_s = _seconds(
            lambda: eigen.eigenstates(bloch, k_frac), lambda: np.linalg.eigh(h_k)
        )
    energies, states = eigen.eigenstates(bloch, k_frac)
    np.testing.assert_allclose(h_k @ states, states * energies[:, None, :], atol=1e-10)
    _report(capsys, f"{n_orb} bands, scattered, states", ours_s, bare_s, len(k_frac), 1.5)


def _report(
    capsys: pytest.CaptureFixture[str],
    what: str,
    ours_s: float,
    bare_s: float,
    n_k: int,
    aim: float,
) -> None:
    with capsys.disabled():
        print(
            f"\n{what:32s} ours {1e6 * ours_s / n_k:8.1f} us/k   "
            f"zheevd {1e6 * bare_s / n_k:8.1f} us/k   ratio {ours_s / bare_s:.2f} (aim {aim})",
            end="",
        )
