"""A `.win` file as a whole: structure blocks and the keywords that vetting needs."""

from __future__ import annotations

import gzip
from pathlib import Path

import numpy as np
import pytest

from topovet.errors import InputError
from topovet.intake.records import WinFile
from topovet.intake.wannier_input.win import parse_win, read_win
from topovet.units import BOHR_ANGSTROM

CELL = ["begin unit_cell_cart", "4 0 0", "0 4 0", "0 0 8", "end unit_cell_cart"]


def parse(*lines: str) -> WinFile:
    return parse_win(lines, "x.win")


def test_everything_missing_gives_the_defaults() -> None:
    win = parse("! only a comment")
    assert win.cell is None
    assert win.symbols == ()
    assert win.positions_frac.shape == (0, 3)
    assert win.spinors is False
    assert (win.num_wann, win.num_bands, win.mp_grid, win.kpoints_frac) == (None,) * 4
    assert win.exclude_bands == ()
    assert win.fermi_energy_ev is None
    assert win.use_ws_distance is True
    assert win.ws_distance_tol == 1e-5
    assert win.ws_search_size == (2, 2, 2)
    assert win.orbitals == ()
    assert win.undeclared_reason == "the .win file has no projections block"


@pytest.mark.parametrize("word", [".true.", "true", "T", "t", ".T.", ".TRUE.", "True"])
def test_logical_true(word: str) -> None:
    assert parse(f"spinors = {word}").spinors is True


@pytest.mark.parametrize("word", [".false.", "false", "F", "f", ".F.", ".FALSE."])
def test_logical_false(word: str) -> None:
    assert parse(f"use_ws_distance : {word}").use_ws_distance is False


def test_numbers() -> None:
    win = parse(
        "num_wann=6",
        "num_bands : 12",
        "Fermi_Energy = 0.62d1",
        "fermi_energy_min = 1.0",
        "fermi_energy_max = 2.0",
        "ws_distance_tol 1.0D-3",
        "ws_search_size = 3",
        "some_future_keyword = 17",
    )
    assert (win.num_wann, win.num_bands) == (6, 12)
    assert win.fermi_energy_ev == 6.2
    assert win.ws_distance_tol == 1e-3
    assert win.ws_search_size == (3, 3, 3)


def test_fermi_energy_window_is_no_fermi_energy() -> None:
    assert parse("fermi_energy_min = 1.0", "fermi_energy_max = 2.0").fermi_energy_ev is None


@pytest.mark.parametrize("text", ["4 5 6", "4, 5, 6", "4,5,6", "4 ,5  6"])
def test_triples(text: str) -> None:
    win = parse(f"mp_grid : {text}", f"ws_search_size = {text}")
    assert win.mp_grid == (4, 5, 6)
    assert win.ws_search_size == (4, 5, 6)


@pytest.mark.parametrize(
    ("text", "one_based"),
    [
        ("1-4, 7,9:10", [1, 2, 3, 4, 7, 9, 10]),
        ("1 - 4 ; 7", [1, 2, 3, 4, 7]),
        ("9:10 7 1-2", [1, 2, 7, 9, 10]),
        ("3-1", [1, 2, 3]),
        ("12", [12]),
    ],
)
def test_exclude_bands_counts_from_zero(text: str, one_based: list[int]) -> None:
    assert parse(f"exclude_bands = {text}").exclude_bands == tuple(b - 1 for b in one_based)


@pytest.mark.parametrize(
    ("unit", "scale"),
    [
        ([], 1.0),
        (["ang"], 1.0),
        (["Angstrom"], 1.0),
        (["bohr"], BOHR_ANGSTROM),
        (["Bohr"], 0.529177),
    ],
)
def test_cell_units(unit: list[str], scale: float) -> None:
    win = parse(
        "begin unit_cell_cart", *unit, "4.0d0 0 0", ".5 4 0", "0, 0, 8.", "end unit_cell_cart"
    )
    assert win.cell == pytest.approx(
        scale * np.array([[4, 0, 0], [0.5, 4, 0], [0, 0, 8]]), rel=1e-6
    )


def test_atoms_frac_with_labels() -> None:
    win = parse(
        "begin atoms_frac", "Bi1 0 0 0", "bi2 .5,.5,.5", "SE  0.25 0.25 1.25", "end atoms_frac"
    )
    assert win.symbols == ("Bi", "Bi", "Se")
    assert win.positions_frac.tolist() == [[0, 0, 0], [0.5, 0.5, 0.5], [0.25, 0.25, 1.25]]


@pytest.mark.parametrize(("unit", "scale"), [("ang", 1.0), ("bohr", BOHR_ANGSTROM)])
def test_atoms_cart_in_an_oblique_cell(unit: str, scale: float) -> None:
    cell = ["begin unit_cell_cart", "4 0 0", "2 4 0", "0 0 8", "end unit_cell_cart"]
    win = parse("begin atoms_cart", unit, "C 3 2 4", "end atoms_cart", *cell)
    # 3 = 4a + 2b, 2 = 4b, 4 = 8c in units of the written numbers
    assert win.positions_frac == pytest.approx(scale * np.array([[0.5, 0.5, 0.5]]))


def test_kpoints_with_and_without_weights() -> None:
    win = parse("mp_grid = 1 1 2", "begin kpoints", "0 0 0 0.5", "0.0 0.0 5.0d-1", "end kpoints")
    assert win.kpoints_frac is not None
    assert win.kpoints_frac.tolist() == [[0, 0, 0], [0, 0, 0.5]]


def test_projections_reach_the_record() -> None:
    win = parse(*CELL, "num_wann = 1", "begin atoms_frac", "Li 0 0 0", "end atoms_frac",
                "begin projections", "li:s", "end projections")  # fmt: skip
    assert len(win.orbitals) == 1
    assert win.undeclared_reason is None


@pytest.mark.parametrize("packed", [False, True])
def test_read_win_opens_plain_and_gzipped_files(tmp_path: Path, packed: bool) -> None:
    data = b"num_wann = 4\r\nspinors = T\r\n"
    path = tmp_path / "GX.win"
    path.write_bytes(gzip.compress(data) if packed else data)
    win = read_win(path)
    assert (win.file, win.num_wann, win.spinors) == (str(path), 4, True)


def test_read_win_names_the_file_and_the_line(tmp_path: Path) -> None:
    path = tmp_path / "GX.win"
    path.write_text("num_wann = 4\nnum_wann = 5\n")
    with pytest.raises(InputError) as caught:
        read_win(path)
    assert str(caught.value).startswith(f"{path}, line 2: ")
    assert caught.value.line == 2
