"""Screens: two workers against one, what surrounds the tasks, what an unchanged case costs, memory.

Run with `pytest -m bench -s tests/bench/test_bench_screening.py`.
"""

from __future__ import annotations

import os
import resource
import subprocess
import sys
import time
from collections.abc import Callable
from contextlib import ExitStack
from dataclasses import replace
from pathlib import Path
from unittest.mock import patch

import numpy as np
import pytest

from case_writer import write_case
from lattice_models import wilson_dirac
from screening_runs import Program, copy_program, write_small_cases
from topovet.intake.hamiltonian.hr_write import write_hr
from topovet.pipeline import dossier, store
from topovet.screening.memory import AT_REST, estimate

pytestmark = pytest.mark.bench

CASES = 24


@pytest.fixture(scope="module")
def program(tmp_path_factory: pytest.TempPathFactory) -> Program:
    return copy_program(tmp_path_factory.mktemp("program"))


def _screen(program: Program, root: Path, out: Path, workers: int, processors: int | None) -> float:
    """Wall time of a screen, on a limited number of processors if wanted."""
    limit: Callable[[], None] | None = None
    if processors is not None:
        chosen = sorted(os.sched_getaffinity(0))[:processors]

        def limit() -> None:
            os.sched_setaffinity(0, chosen)

    started = time.perf_counter()
    subprocess.run(
        program.command("screen", root, "--out", out, "--workers", str(workers)),
        env=program.environment,
        check=True,
        capture_output=True,
        preexec_fn=limit,
    )
    return time.perf_counter() - started


def test_two_workers_against_one(
    program: Program, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    if len(os.sched_getaffinity(0)) < 2:
        pytest.skip("needs two processors")
    for i in range(CASES):
        model = replace(wilson_dirac(m=-2.0 - 0.01 * i), name=f"W{i:02d}")
        write_case(model, tmp_path / "cases" / model.name)
    plans = {"2 workers": (2, 2), "1 worker, 1 processor": (1, 1), "1 worker, 2 processors": (1, 2)}
    taken: dict[str, list[float]] = {name: [] for name in plans}
    for turn in range(2):
        for name, (workers, processors) in plans.items():
            out = tmp_path / f"{turn}{workers}{processors}"
            taken[name].append(_screen(program, tmp_path / "cases", out, workers, processors))
    best = {name: min(seconds) for name, seconds in taken.items()}
    with capsys.disabled():
        print(f"\n{CASES} cases of 8 functions, standard effort, start-up included")
        for name, seconds in best.items():
            ratio = seconds / best["2 workers"]
            print(f"  {name}: {3600 * CASES / seconds:.0f} cases/h, 2 workers are {ratio:.2f}x")


def test_what_surrounds_the_tasks(
    real_case: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Wall time of one case in a warm process, by what it goes to."""
    small = write_case(replace(wilson_dirac(m=-2.0), name="W"), tmp_path / "W")
    with capsys.disabled():
        print()
        for case in (small, real_case):
            dossier.vet_case(case, out=tmp_path / "warm")
            best: dict[str, float] = {"wall": np.inf}
            for i in range(3):
                spent = _spent(case, tmp_path / f"{case.name}{i}")
                best = min(best, spent, key=lambda s: s["wall"])
            known = best["tasks"] + best["figures"] + best["page"]
            print(
                f"  {case.name}: wall {best['wall']:.2f} s; tasks {best['tasks']:.2f}, figures "
                f"{best['figures']:.2f}, page {best['page']:.2f}, writing {best['writing']:.3f}; "
                f"around them {100 * (best['wall'] - known) / best['tasks']:.1f} % of tasks"
            )


def _spent(case: Path, out: Path) -> dict[str, float]:
    spent = {"figures": 0.0, "page": 0.0, "writing": 0.0}

    def timed(name: str, function: Callable[..., object]) -> Callable[..., object]:
        def call(*args: object, **options: object) -> object:
            started = time.perf_counter()
            try:
                return function(*args, **options)
            finally:
                spent[name] += time.perf_counter() - started

        return call

    places = [
        *((dossier, "_draw", "figures"), (dossier, "render_report", "page")),
        *((dossier, "write_atomically", "writing"), (store, "write_atomically", "writing")),
    ]
    with ExitStack() as patches:
        for module, function, name in places:
            wrapped = timed(name, getattr(module, function))
            patches.enter_context(patch.object(module, function, wrapped))
        started = time.perf_counter()
        made = dossier.vet_case(case, out=out)
        spent["wall"] = time.perf_counter() - started
    spent["tasks"] = sum(made.verdict.provenance.task_seconds.values())
    return spent


@pytest.fixture
def real_case() -> Path:
    return Path(__file__).parents[2] / "fixtures" / "cases" / "Bi2Se3"


def test_start_up_and_unchanged_cases(
    program: Program, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    def seconds(*words: str) -> float:
        taken = []
        for _ in range(3):
            started = time.perf_counter()
            subprocess.run(words, env=program.environment, check=True, capture_output=True)
            taken.append(time.perf_counter() - started)
        return min(taken)

    write_small_cases(tmp_path / "cases", 40)
    words = program.command("screen", tmp_path / "cases", "--out", tmp_path / "out")
    subprocess.run(words, env=program.environment, check=True, capture_output=True)
    unchanged = seconds(*words)
    python = sys.executable
    imports = {
        "interpreter alone": (python, "-c", ""),
        "topovet screen --help": (*program.command("screen", "--help"),),
        "all that a worker imports": (python, "-c", "import topovet.screening.vetting"),
    }
    with capsys.disabled():
        print()
        for name, command in imports.items():
            print(f"  {name}: {seconds(*command):.2f} s")
        start = seconds(*imports["topovet screen --help"])
        print(f"  40 unchanged cases: {unchanged:.2f} s, {25 * (unchanged - start):.1f} ms each")


def test_estimated_memory_against_the_peak(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """A Hamiltonian that is large for its time: few symmetries, quick effort."""
    case = _large_case(tmp_path / "large", n_wann=60, reach=4)
    code = (
        "import resource, sys; from pathlib import Path; "
        "from topovet.pipeline.dossier import vet_case; "
        "vet_case(sys.argv[1], out=Path(sys.argv[2]), settings={'effort': 'quick'}); "
        "print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)"
    )
    assert resource.getpagesize()
    done = subprocess.run(
        [sys.executable, "-c", code, str(case), str(tmp_path / "out")],
        env={**os.environ, "OPENBLAS_NUM_THREADS": "1"},
        capture_output=True,
        text=True,
        check=True,
    )
    peak, (_, estimated) = int(done.stdout) / 1024, estimate(case)
    with capsys.disabled():
        print(
            f"\n  peak {peak:.0f} MiB, estimated {estimated / 2**20:.0f} MiB "
            f"({AT_REST / 2**20:.0f} at rest)"
        )


def _large_case(folder: Path, n_wann: int, reach: int) -> Path:
    """An insulator of pairs with random hoppings that decay; the same at R and -R."""
    rng = np.random.default_rng(0)
    cells = np.array(list(np.ndindex(*(3 * (2 * reach + 1,))))) - reach
    half = len(cells) // 2
    size = n_wann // 2
    blocks = rng.normal(size=(half + 1, size, size)) * 0.05
    blocks *= np.exp(-1.5 * np.linalg.norm(cells[: half + 1], axis=1))[:, None, None]
    blocks[half] = np.diag(np.where(np.arange(size) < size // 2, -3.0, 3.0))
    h_r = np.kron(np.concatenate([blocks, blocks[half - 1 :: -1].transpose(0, 2, 1)]), np.eye(2))
    folder.mkdir()
    write_hr(folder / "L_hr.dat", cells, h_r.astype(complex), degeneracies=np.ones(len(cells), int))
    (folder / "L.win").write_text(
        f"num_wann = {n_wann}\nspinors = .true.\nuse_ws_distance = .false.\n"
        "begin unit_cell_cart\nang\n8 0 0\n0 8.5 0\n0 0 9\nend unit_cell_cart\n"
        "begin atoms_frac\nBi 0 0 0\nend atoms_frac\n"
    )
    (folder / "case.toml").write_text(f"filling = {size}\ndimension = 3\n")
    return folder
