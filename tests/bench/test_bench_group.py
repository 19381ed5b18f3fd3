"""Cost of a whole cubic group on 100 Wannier functions, beside one pass over H(R).

The yardstick is one read and one write of all of H(R) (its complex conjugate into an array that is
there). All sides on one thread, CPU time, smallest of several rounds.

Run with `pytest -m bench -s tests/bench/test_bench_group.py`.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
import pytest

from crystal_models import Recipe, crystal_model, near_cells
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import build_model
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.group import measure_group
from topovet.symmetry.hopping import real_space_residual_mev
from topovet.symmetry.spacegroup import find_space_group
from topovet.symmetry.symmetrise import symmetrise
from topovet.symmetry.trim import sample_points

pytestmark = pytest.mark.bench

PEROVSKITE = Recipe(
    221,
    ("Ba", "Ti", "O", "X"),  # X: a second shell on the oxygen site
    ((0, 0, 0), (0.5, 0.5, 0.5), (0.5, 0.5, 0), (0.5, 0.5, 0)),
    (4, 4, 4, 90, 90, 90),
    ("f", "f", "f", "d"),
)


def _seconds(function: Callable[[], object], rounds: int) -> float:
    best = np.inf
    for _ in range(rounds):
        start = time.process_time()
        function()
        best = min(best, time.process_time() - start)
    return best


def test_cubic_group_beside_a_pass_over_the_hoppings(capsys: pytest.CaptureFixture[str]) -> None:
    crystal = crystal_model(PEROVSKITE, spinful=True)
    n = crystal.basis.n_orb
    r_cells = near_cells(3)
    r_cells = r_cells[(r_cells**2).sum(axis=1) <= 18]
    rng = np.random.default_rng(1)
    h_r = rng.normal(size=(len(r_cells), n, n, 2)) @ np.array([1, 1j])
    h_r *= np.exp(-np.linalg.norm(r_cells, axis=1))[:, None, None]
    operators = crystal.operators()
    model = build_model(r_cells, h_r, spinful=True)
    gamma, theta = np.zeros((1, 3)), crystal.time_reversal()
    neutral = [o for o in operators if np.array_equal(o.rotation, np.eye(3))]
    # time reversal, as most crystals have it; no other symmetry, the worst case for the norms
    model = symmetrise(model, build_bloch_sum(model), neutral, gamma, time_reversal=theta).model
    bloch = build_bloch_sum(model)
    space_group = find_space_group(crystal.crystal)
    target = np.empty_like(model.h_r)

    def residuals() -> object:
        return [real_space_residual_mev(model, o) for o in operators]

    def group() -> object:
        return measure_group(
            model, bloch, None, crystal.basis, crystal.crystal, space_group, (6, 6, 6), filling=40
        )

    def mean() -> object:
        return symmetrise(model, bloch, operators, sample_points((True, True, True), 4))

    with one_blas_thread():
        a_pass = _seconds(lambda: np.conjugate(model.h_r, out=target), 20)
        taken = [
            ("residuals over R", _seconds(residuals, 2), len(operators)),
            ("whole test of the group", _seconds(group, 1), len(operators)),
            ("mean over the group, with residuals before and after", _seconds(mean, 1), 1),
        ]
    with capsys.disabled():
        print(f"\n{n} functions, {model.n_r} R, {len(operators)} operations; one pass over H(R) "
              f"{1000 * a_pass:.1f} ms")  # fmt: skip
        for what, seconds, count in taken:
            each = f", {seconds / a_pass / count:.0f} passes an operation" if count > 1 else ""
            print(f"  {what}: {seconds:.2f} s, {seconds / a_pass:.0f} passes{each}")
