"""Cost of Wilson loops beside the diagonalisations they need, and beside a plain loop over k.

Yardstick of the first ratio: bare LAPACK (`numpy.linalg.eigh`, or `eigvalsh` where no states are
asked for) on as many matrices as the witness solves, already summed and in memory. Of the second: a
loop that takes one k at a time, sums H(k) over all R, diagonalises, overlaps, takes an SVD for each
link and closes a loop every 16 points, over the same k. CPU time of one thread, sides taken in
turn, smallest of several rounds: on a shared machine the minimum is what the code costs.

Lines and points are put where the states turn, so that a plane takes a twentieth of the k of the
even mesh. Per k the witness does more than a plain loop (links across lines, the test with every
second point left out, gaps looked into), and the decompositions, which both sides need alike, are
half of the time of either: over as many k the two are equally fast, and with everything else for
nothing the witness would be twice as fast. What is left are products of small matrices, which grow
with the bands as the decompositions do; `test_where_the_time_goes` prints their shares.

Run with `pytest -m bench -s tests/bench/test_bench_wilson.py`.
"""

from __future__ import annotations

import collections
import functools
import time
from collections.abc import Callable

import numpy as np
import pytest

from real_cases import CASES
from topovet.arrays import ComplexArray, FloatArray
from topovet.invariants import wilson_line, wilson_sheet
from topovet.invariants.results import WilsonPlane, WilsonWitness
from topovet.invariants.wilson_plane import compute_wilson_plane
from topovet.invariants.wilson_sheet import SheetCriteria
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model
from topovet.model.plane import invariant_planes
from topovet.pipeline.dossier import start_run
from topovet.spectrum import plane_states
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.equivalent_planes import equivalent_planes

pytestmark = [pytest.mark.bench, pytest.mark.real_data]

CASE = "Bi2Se3"
FILLING = 18
ROUNDS = 7
POINTS_PER_LOOP = 16
FIXED_MESH = 6 * 61 * 60
"""61 lines of 60 points on half of each plane, the mesh of the plain loops in `fixtures`."""
AIM_LAPACK, AIM_PLAIN = 1.4, 4.0

STAGES = {
    "eigenstates": (plane_states.PlaneStates, "states_at"),
    "gaps": (plane_states.PlaneStates, "gaps_at"),
    "links": (wilson_line, "loop_links"),
    "links of new points": (wilson_line, "renewed_links"),
    "centres": (wilson_line, "hybrid_wannier_centres"),
    "strips": (wilson_sheet, "strip_fluxes"),
}
"""Functions that do not call each other, H(k) included in the first two. Centres are those of each
line and of every second of its points."""


@functools.cache
def model_of(case: str) -> TightBindingModel:
    model: TightBindingModel = (
        start_run(CASES / case).result("hamiltonian-with-basis").lattice.model
    )
    return model


@functools.cache
def bloch_of(case: str) -> BlochSum:
    return build_bloch_sum(model_of(case))


def repeated(model: TightBindingModel, copies: int) -> TightBindingModel:
    """Several copies of a model, mixed and a little apart in energy: more bands, nearly the gap."""
    rng = np.random.default_rng(copies)
    mix = np.linalg.qr(rng.normal(size=(copies, copies)))[0]
    shifts = mix @ np.diag(np.linspace(-0.03, 0.03, copies)) @ mix.T
    # copy by copy, which keeps the spins of an orbital next to each other
    h_r = np.array([np.kron(np.eye(copies), h) for h in model.h_r])
    h_r[~model.r_cells.any(axis=1)] += np.kron(shifts, np.eye(model.n_orb))
    return build_model(model.r_cells, h_r, spinful=True)


def all_planes(bloch: BlochSum, filling: int, criteria: SheetCriteria) -> list[WilsonPlane]:
    return [
        compute_wilson_plane(bloch, plane, filling, criteria)
        for plane in invariant_planes((True, True, True))
    ]


class Tally:
    """The k at which states were asked for, and the number of gaps asked for besides."""

    def __init__(self, monkeypatch: pytest.MonkeyPatch) -> None:
        self.k_frac: list[FloatArray] = []
        self.n_gaps = 0
        states_at = plane_states.PlaneStates.states_at
        gaps_at = plane_states.PlaneStates.gaps_at

        def counted_states(states: plane_states.PlaneStates, xy: FloatArray) -> ComplexArray:
            self.k_frac.append(states.plane.k_at(xy))
            return states_at(states, xy)

        def counted_gaps(states: plane_states.PlaneStates, xy: FloatArray) -> FloatArray:
            self.n_gaps += len(xy)
            return gaps_at(states, xy)

        with monkeypatch.context() as patch:
            patch.setattr(plane_states.PlaneStates, "states_at", counted_states)
            patch.setattr(plane_states.PlaneStates, "gaps_at", counted_gaps)
            self.planes = all_planes(bloch_of(CASE), FILLING, SheetCriteria())


def seconds(*functions: Callable[[], object], rounds: int = ROUNDS) -> list[float]:
    """Smallest CPU time of each function, taken in turn, BLAS on one thread."""
    best = [np.inf] * len(functions)
    with one_blas_thread():
        for _ in range(rounds):
            for i, function in enumerate(functions):
                start = time.process_time()
                function()
                best[i] = min(best[i], time.process_time() - start)
    return best


def seconds_by_stage(
    monkeypatch: pytest.MonkeyPatch, run: Callable[[], object]
) -> dict[str, float]:
    """CPU time of each stage in one run, smallest of several; what is left is choosing points."""
    spent: collections.Counter[str] = collections.Counter()

    def timed(stage: str, function: Callable[..., object]) -> Callable[..., object]:
        def call(*args: object, **options: object) -> object:
            start = time.process_time()
            try:
                return function(*args, **options)
            finally:
                spent[stage] += time.process_time() - start

        return call

    rounds = []
    with monkeypatch.context() as patch, one_blas_thread():
        for stage, (owner, name) in STAGES.items():
            patch.setattr(owner, name, timed(stage, getattr(owner, name)))
        for _ in range(ROUNDS):
            spent.clear()
            start = time.process_time()
            run()
            whole = time.process_time() - start
            rounds.append({**spent, "the rest": whole - sum(spent.values())})
    return min(rounds, key=lambda found: sum(found.values()))


def lapack_alone(bloch: BlochSum, n_states: int, n_gaps: int) -> Callable[[], object]:
    h = bloch.at(np.random.default_rng(0).random((min(n_states, 1000), 3)))

    def run() -> None:
        for start in range(0, n_states, len(h)):
            np.linalg.eigh(h[: n_states - start])
        for start in range(0, n_gaps, len(h)):
            np.linalg.eigvalsh(h[: n_gaps - start])

    return run


def plain_loops(model: TightBindingModel, k_frac: FloatArray) -> None:
    """Loops of 16 points one k at a time."""
    r_cells = model.r_cells.astype(float)
    for start in range(0, len(k_frac), POINTS_PER_LOOP):
        states = []
        for k in k_frac[start : start + POINTS_PER_LOOP]:
            h = np.tensordot(np.exp(2j * np.pi * (r_cells @ k)), model.h_r, axes=1)
            states.append(np.linalg.eigh(h)[1][:, :FILLING])
        loop = np.eye(FILLING)
        for i, left in enumerate(states):
            w, _, v = np.linalg.svd(left.conj().T @ states[(i + 1) % len(states)])
            loop = loop @ (w @ v)
        np.linalg.eigvals(loop)


def test_six_planes(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    tally = Tally(monkeypatch)
    assert [plane.z2 for plane in tally.planes] == [1, 0, 1, 0, 1, 0]
    model, bloch, k_frac = model_of(CASE), bloch_of(CASE), np.concatenate(tally.k_frac)
    ours, lapack, plain = seconds(
        lambda: all_planes(bloch, FILLING, SheetCriteria()),
        lapack_alone(bloch, len(k_frac), tally.n_gaps),
        lambda: plain_loops(model, k_frac),
    )
    with capsys.disabled():
        print(
            f"\n{CASE}, 30 bands, 18 filled, six planes: {len(k_frac)} with states and "
            f"{tally.n_gaps} without, {sum(p.lines for p in tally.planes)} lines\n"
            f"  ours {ours:.3f} s   LAPACK alone {lapack:.3f} s   plain loop {plain:.3f} s\n"
            f"  ratio to LAPACK {ours / lapack:.2f} (aim {AIM_LAPACK}), faster than the plain "
            f"loop {plain / ours:.1f} times (aim {AIM_PLAIN}) over as many k; over an even mesh of "
            f"{FIXED_MESH} k, by extrapolation, {plain * FIXED_MESH / len(k_frac) / ours:.0f} times"
        )


def test_where_the_time_goes(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    bloch = bloch_of(CASE)
    spent = seconds_by_stage(monkeypatch, lambda: all_planes(bloch, FILLING, SheetCriteria()))
    assert set(STAGES) <= set(spent)
    with capsys.disabled():
        shown = ", ".join(f"{stage} {1e3 * s:.0f}" for stage, s in spent.items())
        print(f"\n{CASE}, six planes, ms: {shown}; in all {1e3 * sum(spent.values()):.0f}")


@pytest.mark.parametrize("copies", [1, 2, 4])
def test_growth_with_bands(copies: int, capsys: pytest.CaptureFixture[str]) -> None:
    model = repeated(model_of(CASE), copies)
    bloch, plane = build_bloch_sum(model), invariant_planes((True, True, True))[0]
    found = compute_wilson_plane(bloch, plane, copies * FILLING)
    assert found.status == "ok"
    ours, lapack = seconds(
        lambda: compute_wilson_plane(bloch, plane, copies * FILLING),
        lapack_alone(bloch, found.n_solves, 0),
        rounds=3,
    )
    with capsys.disabled():
        print(
            f"\n{model.n_orb:4d} bands, one plane: {found.lines} lines, {found.n_solves} solves, "
            f"{ours:.3f} s, {1e6 * ours / found.n_solves:.0f} us for each, "
            f"{ours / lapack:.2f} times as many eigenstates alone"
        )


@pytest.mark.parametrize("spacing", [1 / 16, 1 / 32, 1 / 64])
def test_growth_with_lines(spacing: float, capsys: pytest.CaptureFixture[str]) -> None:
    bloch, plane = bloch_of(CASE), invariant_planes((True, True, True))[0]
    criteria = SheetCriteria(spacing=spacing)
    found = compute_wilson_plane(bloch, plane, FILLING, criteria)
    assert found.z2 == 1
    (ours,) = seconds(lambda: compute_wilson_plane(bloch, plane, FILLING, criteria))
    with capsys.disabled():
        print(
            f"\nfirst spacing 1/{round(1 / spacing)}: {found.lines} lines, {found.n_solves} "
            f"solves, {ours:.3f} s, {1e6 * ours / found.n_solves:.0f} us for each"
        )


@pytest.mark.parametrize("case", ["PbTe", "Si", "CdTe", "Bi2Se3"])
def test_planes_that_symmetry_makes_equal(case: str, capsys: pytest.CaptureFixture[str]) -> None:
    """Solves of all six planes, both ways, and of those that no operation of H makes of another."""
    run = start_run(CASES / case)
    bloch, filling = bloch_of(case), run.result("electrons").filling
    planes = invariant_planes((True, True, True))
    alike = equivalent_planes(planes, run.result("group"), run.result("gap").direct_ev)

    def witness(equivalent: tuple[tuple[str, ...], ...]) -> WilsonWitness:
        return compute_wilson(
            bloch,
            filling,
            (True, True, True),
            time_reversal=True,
            spinful=True,
            equivalent=equivalent,
        )

    every, few = witness(()), witness(alike)
    assert every.z2 == few.z2
    all_s, few_s = seconds(lambda: witness(()), lambda: witness(alike), rounds=3)
    with capsys.disabled():
        print(
            f"\n{case}: six planes {every.n_solves} solves, {all_s:.3f} s; "
            f"{len(few.planes)} planes {few.n_solves} solves, {few_s:.3f} s"
        )
