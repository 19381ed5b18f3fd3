"""The invented campaign as files: marked, complete, the same everywhere, in nobody's way."""

from __future__ import annotations

import gzip
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from topovet.demo.campaign import ANSWERS, COMPOUNDS, write_campaign
from topovet.demo.compound import Compound
from topovet.demo.draft import Draft
from topovet.demo.mesh import energies_at, mesh_points, wigner_seitz
from topovet.demo.writer import INVENTED
from topovet.errors import InputError
from topovet.intake.case_toml import read_settings
from topovet.intake.discovery import find_case
from topovet.intake.wannier_input.win import read_win
from topovet.verdict.advice import CODES

NO_HONEST_FILE = frozenset({"wilson-unresolved"})
"""Codes that no case of a few orbitals raises: with a gap that is told from zero its Wilson loops
can be followed."""


@pytest.fixture(scope="module")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("campaign") / "demo"
    write_campaign(folder)
    return folder


def _hashes(folder: Path) -> dict[str, bytes]:
    return {
        p.relative_to(folder).as_posix(): p.read_bytes() for p in folder.rglob("*") if p.is_file()
    }


def _text(path: Path) -> str:
    return gzip.decompress(path.read_bytes()).decode() if path.suffix == ".gz" else path.read_text()


def test_codes_are_unique_and_in_order() -> None:
    assert [c.code for c in COMPOUNDS] == [f"GX-{i:02d}" for i in range(1, len(COMPOUNDS) + 1)]


def test_every_flag_has_a_compound() -> None:
    assert {code for c in COMPOUNDS for code in c.flags} == set(CODES) - NO_HONEST_FILE


def test_every_kind_of_phase_has_a_compound() -> None:
    assert {c.truth for c in COMPOUNDS} >= {
        *("strong-ti", "weak-ti", "trivial", "crystalline-ti", "higher-order", "chern", ""),
        *("axion-candidate", "weyl-semimetal", "dirac-semimetal", "undetermined"),
    }


@pytest.mark.parametrize("compound", COMPOUNDS, ids=lambda c: c.code)
def test_everything_invented_says_so(campaign: Path, compound: Compound) -> None:
    files = find_case(campaign / "cases" / compound.code)
    assert files.hr is not None
    assert files.win is not None
    assert files.settings is not None
    assert (read_settings(files.settings).name or "").endswith("(invented)")
    for path in (files.hr, files.win, files.wsvec, files.centres, files.structure):
        if path is not None:
            assert INVENTED in "".join(_text(Path(path)).splitlines(keepends=True)[:2])


def test_readme_says_that_nothing_in_it_exists(campaign: Path) -> None:
    text = (campaign / "README.txt").read_text()
    assert text.startswith("INVENTED FROM BEGINNING TO END")
    assert len((campaign / ANSWERS).read_text().splitlines()) == len(COMPOUNDS) + 1


def test_another_process_writes_the_same_bytes(campaign: Path, tmp_path: Path) -> None:
    code = (
        "from pathlib import Path; from topovet.demo.campaign import write_campaign; "
        "write_campaign(Path('again'))"
    )
    settings = {"PYTHONHASHSEED": "77", "OPENBLAS_NUM_THREADS": "3", "OMP_NUM_THREADS": "3"}
    subprocess.run([sys.executable, "-c", code], cwd=tmp_path, env=settings, check=True)
    assert _hashes(tmp_path / "again") == _hashes(campaign)


def test_folder_that_is_not_empty_is_refused_and_left_alone(tmp_path: Path) -> None:
    (tmp_path / "thesis.txt").write_text("mine")
    with pytest.raises(InputError, match=r"not empty, expected a new or empty folder.*--force"):
        write_campaign(tmp_path)
    assert [p.name for p in tmp_path.iterdir()] == ["thesis.txt"]


def test_file_in_place_of_the_folder_is_refused_even_by_force(tmp_path: Path) -> None:
    (tmp_path / "demo").write_text("mine")
    with pytest.raises(InputError, match="found a file"):
        write_campaign(tmp_path / "demo", force=True)


def test_force_replaces_the_files_of_the_demo_and_no_others(campaign: Path, tmp_path: Path) -> None:
    (tmp_path / "thesis.txt").write_text("mine")
    (tmp_path / "README.txt").write_text("old")
    write_campaign(tmp_path, force=True)
    assert (tmp_path / "thesis.txt").read_text() == "mine"
    assert (tmp_path / "README.txt").read_text() == (campaign / "README.txt").read_text()


@pytest.mark.parametrize("mesh", [(4, 4, 4), (3, 4, 2), (6, 6, 1)])
@pytest.mark.parametrize(
    "cell",
    [
        4.0 * np.eye(3),
        2.5 * np.array([[0.0, 1, 1], [1, 0, 1], [1, 1, 0]]),
        np.array([[4.0, 0, 0], [-2.0, 3.5, 0.3], [0.5, 0.2, 7.0]]),
    ],
    ids=["cubic", "fcc", "triclinic"],
)
def test_wigner_seitz_list_counts_every_mesh_point_once(
    mesh: tuple[int, int, int], cell: np.ndarray[tuple[int, ...], np.dtype[np.float64]]
) -> None:
    """Each R modulo the supercell has weights 1/ndegen that add up to 1, and -R is listed."""
    r_cells, degeneracies = wigner_seitz(cell, mesh)
    homes = np.ravel_multi_index(tuple(np.mod(r_cells, mesh).T), mesh)
    assert np.bincount(homes, 1 / degeneracies, np.prod(mesh)) == pytest.approx(1.0)
    assert {tuple(r) for r in r_cells.tolist()} == {tuple(r) for r in (-r_cells).tolist()}


def _with_energies() -> list[tuple[str, Draft]]:
    drafts = [(c.code, c.draft()) for c in COMPOUNDS if c.truth]
    return [(code, d) for code, d in drafts if d.energies_ev is not None]


def test_energies_of_a_run_are_those_of_its_hamiltonian() -> None:
    """To the rounding of `_hr.dat`; GX-27 is the one whose energies are of another run."""
    found = {}
    for code, draft in _with_energies():
        ours = energies_at(mesh_points(draft.mesh), draft.r_cells, draft.degeneracies, draft.h_r)
        assert draft.energies_ev is not None
        found[code] = float(np.abs(ours - draft.energies_ev).max())
    assert {code for code, difference in found.items() if difference > 2e-5} == {"GX-27"}


def test_mesh_and_k_points_are_declared(campaign: Path) -> None:
    win = read_win(campaign / "cases" / "GX-02" / "GX-02.win")
    assert win.mp_grid == (4, 4, 4)
    assert win.kpoints_frac is not None
    assert win.kpoints_frac[1].tolist() == [0.0, 0.0, 0.25]  # last component fastest
