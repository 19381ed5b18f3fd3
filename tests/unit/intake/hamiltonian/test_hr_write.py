"""Writing `_hr.dat`: what is written is what is read, or nothing is."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.hamiltonian.hr_write import write_hr

R_CELLS = np.array([[-1, 0, 12], [0, 0, 0], [1, 0, -12]])


def hamiltonian(decimals: int = 6, seed: int = 0) -> np.ndarray:
    """Random elements that the decimals can hold."""
    rng = np.random.default_rng(seed)
    parts = np.round(rng.normal(scale=3.0, size=(3, 4, 4, 2)), decimals)
    return parts.view(np.complex128)[..., 0]


@pytest.mark.parametrize("name", ["x_hr.dat", "x_hr.dat.gz"])
@pytest.mark.parametrize("decimals", [1, 6, 9, 15])
def test_written_and_read_again(tmp_path: Path, name: str, decimals: int) -> None:
    path = tmp_path / name
    h_r = hamiltonian(decimals)
    weights = np.array([2, 1, 4])
    write_hr(path, R_CELLS, h_r, degeneracies=weights, header="a model", decimals=decimals)
    found = read_hr(path)
    assert found.h_r.tobytes() == h_r.tobytes()
    assert (found.r_cells == R_CELLS).all()
    assert (found.degeneracies == weights).all()
    assert (found.header, found.decimals, found.reader) == ("a model", decimals, "fixed-columns")


def test_the_text_is_wannier90s(tmp_path: Path) -> None:
    """Columns 5I5,2F12.6, m fastest, 15 degeneracies to a line (Wannier90 3.1 user guide)."""
    path = tmp_path / "x_hr.dat"
    r_cells = np.array([[i, 0, -i] for i in range(16)])
    h_r = np.zeros((16, 2, 2), dtype=complex)
    h_r[0] = [[1, 2 - 0.5j], [-3e-7, 4]]
    write_hr(path, r_cells, h_r, header="made")
    lines = path.read_text().split("\n")
    assert lines[:9] == [
        " made",
        "           2",
        "          16",
        "    1" * 15,
        "    1",
        "    0    0    0    1    1    1.000000    0.000000",
        "    0    0    0    2    1   -0.000000    0.000000",
        "    0    0    0    1    2    2.000000   -0.500000",
        "    0    0    0    2    2    4.000000    0.000000",
    ]
    assert lines[9].startswith("    1    0   -1    1    1")
    assert lines[-1] == ""


def test_the_same_hamiltonian_gives_the_same_gzip(tmp_path: Path) -> None:
    for name in ("a.gz", "b.gz"):
        write_hr(tmp_path / name, R_CELLS, hamiltonian())
    assert (tmp_path / "a.gz").read_bytes() == (tmp_path / "b.gz").read_bytes()


@pytest.mark.parametrize("decimals", [6, 10])
@pytest.mark.parametrize("value", [99999.9, -9999.9, 99999.9j, -9999.9j])
def test_the_largest_numbers_that_fit(tmp_path: Path, decimals: int, value: complex) -> None:
    h_r = hamiltonian(decimals)
    h_r[1, 2, 3] = value
    write_hr(tmp_path / "x", R_CELLS, h_r, decimals=decimals)
    assert read_hr(tmp_path / "x").h_r[1, 2, 3] == value


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"value": 99999.99999999}, "does not fit a column"),
        ({"value": -10000.0}, "does not fit a column"),
        ({"value": 1e5, "decimals": 12}, "does not fit a column"),
        ({"value": complex(0, np.nan)}, "not finite"),
        ({"value": np.inf}, "not finite"),
        ({"r": 1000}, "components of R"),
        ({"degeneracies": np.array([1, 0, 1])}, "degeneracies must be 1"),
        ({"degeneracies": np.array([1, 1])}, "3 R vectors in h_r"),
        ({"degeneracies": np.array([1.0, 1.0, 1.0])}, "integer arrays"),
        ({"header": "two\nlines"}, "one line"),
        ({"decimals": 16}, "decimals must be"),
        ({"decimals": 0}, "decimals must be"),
        ({"shape": (3, 4, 3)}, "h_r must be"),
        ({"shape": (0, 4, 4)}, "h_r must be"),
    ],
)
def test_what_does_not_fit_is_refused_and_the_old_file_kept(
    tmp_path: Path, changes: dict[str, Any], message: str
) -> None:
    path = tmp_path / "x_hr.dat"
    path.write_text("old")
    h_r, r_cells = hamiltonian(), R_CELLS.copy()
    if "shape" in changes:
        h_r = np.zeros(changes.pop("shape"), dtype=complex)
    if "value" in changes:
        h_r[0, 0, 0] = changes.pop("value")
    if "r" in changes:
        r_cells[0, 0] = changes.pop("r")
    with pytest.raises(ValueError, match=message):
        write_hr(path, r_cells, h_r, **changes)
    assert path.read_text() == "old"
    assert [file.name for file in tmp_path.iterdir()] == ["x_hr.dat"]


def test_an_interrupted_writing_leaves_nothing_behind(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(_: int) -> None:
        raise KeyboardInterrupt

    path = tmp_path / "x_hr.dat"
    path.write_text("old")
    monkeypatch.setattr("os.fsync", fail)
    with pytest.raises(KeyboardInterrupt):
        write_hr(path, R_CELLS, hamiltonian())
    assert path.read_text() == "old"
    assert [file.name for file in tmp_path.iterdir()] == ["x_hr.dat"]


@given(
    parts=st.lists(st.floats(-9999, 99999), min_size=2, max_size=2),
    decimals=st.integers(1, 15),
)
@settings(max_examples=100, deadline=None)
def test_what_is_read_is_the_rounded_number(
    tmp_path_factory: pytest.TempPathFactory, parts: list[float], decimals: int
) -> None:
    path = tmp_path_factory.getbasetemp() / "one_hr.dat"
    h_r = np.array([[[complex(*parts)]]])
    write_hr(path, np.zeros((1, 3), dtype=int), h_r, decimals=decimals)
    element = read_hr(path).h_r[0, 0, 0]
    assert [element.real, element.imag] == [float(f"{part:.{decimals}f}") for part in parts]
