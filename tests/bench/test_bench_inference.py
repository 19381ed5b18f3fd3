"""Cost of inferring inversion for 100 Wannier functions on 300 R.

The yardstick is one conjugation of the whole H(R) with dense matrices, U H(R) U† for every R: what
merely testing a given operator costs. CPU time of the process, smallest of several rounds.

Run with `pytest -m bench -s tests/bench/test_bench_inference.py`.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
import pytest

from inverted_models import InvertedModel, random_inverted_model, with_noise
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.inference import infer_inversion, residuals_mev
from topovet.symmetry.inversion_blocks import invert_sites, solve_blocks
from topovet.symmetry.sites import declared_sites

pytestmark = pytest.mark.bench

ROUNDS = 3
SHAPES = {
    "2 sites of 25 orbitals": [(25, True)],
    "4 sites of 13": [(13, True), (13, True)],
    "10 sites of 5": [(5, True)] * 5,
    "16 sites of 3": [(3, True)] * 8,
}


def _made(functions: list[tuple[int, bool]]) -> InvertedModel:
    made = random_inverted_model(
        np.random.default_rng(1),
        functions,
        cell=9 * np.eye(3),
        centre=np.zeros(3),
        spinful=True,
        radius=3,
    )
    kept = (made.model.r_cells**2).sum(axis=1) <= 18
    model = TightBindingModel(made.model.r_cells[kept], made.model.h_r[kept], True)
    return InvertedModel(model, made.crystal, made.positions_frac, made.operator)


def _seconds(function: Callable[[], object]) -> float:
    best = np.inf
    for _ in range(ROUNDS):
        start = time.process_time()
        function()
        best = min(best, time.process_time() - start)
    return best


@pytest.mark.parametrize("shape", SHAPES)
def test_inference_of_100_functions(shape: str) -> None:
    made = _made(SHAPES[shape])
    model, crystal = made.model, made.crystal
    sites = declared_sites(made.positions_frac, crystal)
    images = invert_sites(sites, crystal, np.zeros(3))
    noisy = with_noise(model, 0.02, np.random.default_rng(0))
    u = made.operator.matrix

    def conjugate() -> object:
        return u @ model.h_r @ u.conj().T

    def blocks(which: TightBindingModel) -> Callable[[], object]:
        return lambda: solve_blocks(which, sites, images, spin=2)

    yardstick = _seconds(conjugate)
    figures = {
        "blocks": _seconds(blocks(model)),
        "blocks, noisy": _seconds(blocks(noisy)),
        "residual": _seconds(lambda: residuals_mev(model, made.operator)),
        "whole": _seconds(
            lambda: infer_inversion(model, crystal, sites, np.zeros(3), spinful=True)
        ),
    }
    found = infer_inversion(model, crystal, sites, np.zeros(3), spinful=True)
    print(f"\n{shape}: {model.n_orb} functions, {model.n_r} R, {found.n_bonds} bonds used")
    print(f"  one dense conjugation of H(R): {yardstick:.2f} s")
    for name, seconds in figures.items():
        print(f"  {name:14s} {seconds:6.2f} s = {seconds / yardstick:5.1f} conjugations")
    assert found.reliability in ("good", "doubtful")
    assert found.max_residual_mev is not None
