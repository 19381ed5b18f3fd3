"""Cost of the surface spectral map beside the bare products of a decimation, and its memory.

Yardstick: for as many energies and as many steps as a decimation needs, one LAPACK solve with 2 n
right-hand sides and four BLAS products of n x n matrices, on matrices already in memory. Measured
is a part of the map of 200 x 300 points (all are alike); the whole is scaled up from it. CPU time
of one thread, sides taken in turn, smallest of several rounds.

Run with `pytest -m bench -s tests/bench/test_bench_surface.py`.
"""

from __future__ import annotations

import functools
import time
import tracemalloc
from collections.abc import Callable

import numpy as np
import pytest

from real_cases import CASES
from topovet.arrays import ComplexArray
from topovet.boundary.greens import decimate, greens_functions
from topovet.boundary.layers import CHUNK_BYTES, LayerStack, principal_blocks
from topovet.boundary.many_energies import face_densities
from topovet.boundary.recut import Recut
from topovet.boundary.spectral import compute_surface_maps, surface_path
from topovet.boundary.witness import prepare_surface
from topovet.pipeline.dossier import start_run
from topovet.spectrum.eigen import one_blas_thread, worker_count

pytestmark = [pytest.mark.bench, pytest.mark.real_data]

WHOLE = (200, 300)
PART_K, ENERGIES, BROADENING_EV, ROUNDS = 3, 300, 0.005, 4


@functools.cache
def thirty_bands(most_dropped_mev: float) -> tuple[Recut, LayerStack]:
    """Quintuple layers of Bi2Se3, 30 orbitals each."""
    run = start_run(CASES / "Bi2Se3")
    based = run.result("hamiltonian-with-basis")
    cut, _, stack = prepare_surface(
        based.lattice.model,
        run.result("declarations").crystal,
        based.basis.positions_frac,
        (1, 1, 1),
        most_dropped_mev=most_dropped_mev,
    )
    return cut, stack


def _least(*sides: Callable[[], object]) -> list[float]:
    best = [np.inf] * len(sides)
    with one_blas_thread():
        for _ in range(ROUNDS):
            for i, side in enumerate(sides):
                started = time.process_time()
                side()
                best[i] = min(best[i], time.process_time() - started)
    return best


@pytest.mark.parametrize("most_dropped_mev", [1e3, 0.0], ids=["one plane", "all of it"])
def test_map_of_thirty_bands(most_dropped_mev: float) -> None:
    """Layers coupled to the next alone, 30 orbitals; and all couplings, 60 to a principal layer."""
    _, stack = thirty_bands(most_dropped_mev)
    size = stack.layer_size
    k_par = np.linspace(0, 0.4, PART_K)[:, None] * np.array([1.0, 0.0])
    inside, across = principal_blocks(stack.planes_at(k_par))
    energy = np.linspace(5.1, 6.1, ENERGIES) + 1j * BROADENING_EV
    steps = decimate(*_spread(inside[:1], across[:1], ENERGIES), energy).steps

    def bare() -> None:
        rng = np.random.default_rng(0)
        a = rng.normal(size=(ENERGIES, size, size)) + 1j * rng.normal(size=(ENERGIES, size, size))
        both = np.concatenate([a, a], axis=2)
        for _ in range(PART_K * steps):
            np.linalg.solve(a, both)
            for _ in range(4):
                a @ a

    def plain() -> None:
        for i in range(PART_K):
            found = decimate(*_spread(inside[i : i + 1], across[i : i + 1], ENERGIES), energy)
            greens_functions(energy, found.upper)
            greens_functions(energy, found.lower)

    def ours() -> None:
        for i in range(PART_K):
            face_densities(inside[i], across[i], energy, 30, negligible_ev=0.2 * BROADENING_EV)

    b, p, o = _least(bare, plain, ours)
    whole = WHOLE[0] * WHOLE[1] / (PART_K * ENERGIES)
    print(
        f"\nmap 200 x 300, {stack.layer_size} orbitals to a layer, {steps} steps, CPU s of one "
        f"thread: bare products {b * whole:.0f}; decimation {p * whole:.0f} ({p / b:.2f} times); "
        f"as the map does it {o * whole:.0f} ({o / b:.2f} times)"
    )


def _spread(
    inside: ComplexArray, across: ComplexArray, n: int
) -> tuple[ComplexArray, ComplexArray]:
    return np.repeat(inside, n, axis=0), np.repeat(across, n, axis=0)


@pytest.mark.parametrize("n_k", [4, 16])
def test_memory_of_a_map(n_k: int) -> None:
    """What is held beyond the result does not grow with the points along the path."""
    cut, stack = thirty_bands(1e3)
    tracemalloc.start()
    maps = compute_surface_maps(
        stack, cut, surface_path(cut, n_k), np.linspace(5.1, 6.1, 300), 0.01, 18, ("a", "b")
    )
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    result = sum(m.density.nbytes + (0 if m.spin is None else m.spin.nbytes) for m in maps)
    print(f"\n{n_k} k, 300 energies: peak {peak / 2**20:.0f} MB, result {result / 2**20:.1f} MB")
    assert peak < 2 * worker_count() * CHUNK_BYTES + 100 * result
