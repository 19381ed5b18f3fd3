"""How fast `_hr.dat` is read, against reading its bytes and against numpy.loadtxt.

Run with `pytest -m bench -s tests/bench/test_bench_hr.py`. Ratios of one run on one machine; only
that the numbers agree is asserted.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.opening import open_bytes

pytestmark = pytest.mark.bench

N_WANN = 30
N_R = 3000
N_R_SLICE = 150
REPEATS = 5


def write_blocks(path: Path, n_r: int, *, scale_ev: float) -> None:
    """An hr.dat of Wannier90's format; a few different blocks over and over."""
    rng = np.random.default_rng(1)
    blocks = []
    for _ in range(8):
        values = rng.normal(scale=scale_ev, size=(N_WANN, N_WANN, 2)).tolist()
        blocks.append(
            [
                f"{m + 1:5d}{n + 1:5d}{values[n][m][0]:12.6f}{values[n][m][1]:12.6f}\n"
                for n in range(N_WANN)
                for m in range(N_WANN)
            ]
        )
    with path.open("w") as file:
        file.write(f" bench\n{N_WANN:12d}\n{n_r:12d}\n")
        for start in range(0, n_r, 15):
            file.write("    1" * min(15, n_r - start) + "\n")
        for i in range(n_r):
            r_text = f"{i % 17 - 8:5d}{i // 17 % 17 - 8:5d}{i // 289:5d}"
            file.write("".join(r_text + line for line in blocks[i % 8]))


def best_seconds(run: Callable[[], object]) -> float:
    seconds = []
    for _ in range(REPEATS):
        start = time.perf_counter()
        run()
        seconds.append(time.perf_counter() - start)
    return min(seconds)


def read_plainly(path: Path) -> None:
    buffer = bytearray(2 << 20)
    with open_bytes(path) as stream:
        while stream.readinto(buffer):  # type: ignore[attr-defined]
            pass


@pytest.mark.parametrize(
    ("what", "scale_ev"), [("mostly below 1 eV, as real files", 0.05), ("mostly above 1 eV", 5.0)]
)
def test_reading_speed(tmp_path: Path, what: str, scale_ev: float) -> None:
    path, part = tmp_path / "bench_hr.dat", tmp_path / "part_hr.dat"
    write_blocks(path, N_R, scale_ev=scale_ev)
    write_blocks(part, N_R_SLICE, scale_ev=scale_ev)
    megabytes, part_megabytes = (file.stat().st_size / 1e6 for file in (path, part))
    skip = 3 + -(-N_R_SLICE // 15)
    first = time.perf_counter()
    read_hr(path)
    first = time.perf_counter() - first
    speeds = {
        "plain read": megabytes / best_seconds(lambda: read_plainly(path)),
        "read_hr, first": megabytes / first,
        "read_hr, best": megabytes / best_seconds(lambda: read_hr(path)),
        "read_hr, thorough": part_megabytes / best_seconds(lambda: read_hr(part, fast=False)),
        "numpy.loadtxt": part_megabytes / best_seconds(lambda: np.loadtxt(part, skiprows=skip)),
    }
    print(f"\n{megabytes:.0f} MB, elements {what}:")
    for name, speed in speeds.items():
        ratios = (speed / speeds["plain read"], speed / speeds["numpy.loadtxt"])
        print(f"  {name:18s} {speed:7.0f} MB/s, {ratios[0]:.3f} of plain, {ratios[1]:5.2f} loadtxt")
    expected = np.loadtxt(part, skiprows=skip, usecols=(5, 6)).view(np.complex128)
    found = read_hr(part).h_r.transpose(0, 2, 1)
    assert found.tobytes() == expected.reshape(found.shape).tobytes()
