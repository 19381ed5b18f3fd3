"""`.eig`, `_band.dat` and `_band.kpt`: labels, counts, and whether they belong together."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from companion_files import Refusal
from topovet.intake.bands import read_bands, read_eig

EIG = """\
    1    1    3.077203786560
    2    1    3.177203786560
    1    2   -0.100000000000
    2    2    2.000000000000
    1    3    1.000000000000
    2    3    4.000000000000
"""
KPT = """\
         3
    0.000000    0.000000    0.000000   1.0
    0.025000    0.000000   -0.025000   1.0
    0.050000    0.000000   -0.050000   1.0
"""
BAND = """\
  0.00000000E+00 -0.30772038E+01
  0.16453872E-01 -0.30715541E+01
  0.32907744E-01 -0.30562555E+01

  0.00000000E+00  0.30772038E+01
  0.16453872E-01  0.40715541E+01
  0.32907744E-01  0.50562555E+01

"""
EIG_AGAIN = "copy the file of the same calculation again"
BANDS_AGAIN = "copy _band.dat and _band.kpt of one Wannier90 run again, or remove both"


def eig(folder: Path, text: str) -> Path:
    (folder / "GX.eig").write_text(text)
    return folder / "GX.eig"


def bands(folder: Path, band: str = BAND, kpt: str = KPT) -> tuple[Path, Path]:
    (folder / "GX_band.dat").write_text(band)
    (folder / "GX_band.kpt").write_text(kpt)
    return folder / "GX_band.dat", folder / "GX_band.kpt"


def test_eig_goes_by_its_labels(tmp_path: Path) -> None:
    expected = [[3.07720378656, 3.17720378656], [-0.1, 2.0], [1.0, 4.0]]
    np.testing.assert_array_equal(read_eig(eig(tmp_path, EIG)).energies_ev, expected)
    shuffled = "\n".join(EIG.splitlines()[i] for i in (3, 0, 5, 1, 4, 2)) + "\n\n"
    found = read_eig(eig(tmp_path, shuffled), n_bands=2, n_k=3)
    np.testing.assert_array_equal(found.energies_ev, expected)


def test_fortran_double_precision_exponents_are_numbers(tmp_path: Path) -> None:
    path = eig(tmp_path, "1 1 0.5D+01\n")
    assert read_eig(path).energies_ev.tolist() == [[5.0]]


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        (EIG[: EIG.index("    2    3")],
         f", line 5: found 5 energies at the end of the file, expected 2 bands at each of 3 "
         f"k-points, 6 in all; {EIG_AGAIN}."),
        (EIG.replace("2    3", "2    2"),
         f', line 6: found "2    2    4.000000000000", whose band and k-point stood there before, '
         f"expected one energy for each band and k-point; {EIG_AGAIN}."),
        (EIG.replace("1    1", "0    1"),
         f', line 1: found "0    1    3.077203786560", expected a band and a k-point counted from '
         f"1, and an energy; {EIG_AGAIN}."),
        (EIG.replace("1    2", "1 1e9"),
         f', line 3: found "1 1e9   -0.100000000000", expected a band and a k-point counted from '
         f"1, and an energy; {EIG_AGAIN}."),
        (EIG.replace("    1    3 ", "    1.5  3 "),
         f', line 5: found "1.5  3    1.000000000000", expected a band and a k-point counted from '
         f"1, and an energy; {EIG_AGAIN}."),
        (EIG.replace("2.000000000000", "**************"),
         ', line 4: found "2    2    **************", expected a band, a k-point and an energy; '
         "copy the file again or let Wannier90 write it again."),
        (EIG.replace("2.000000000000", "2.0 2.0"),
         ', line 4: found "2    2    2.0 2.0", expected a band, a k-point and an energy; '
         "copy the file again or let Wannier90 write it again."),
    ],
)  # fmt: skip
def test_damaged_eig(tmp_path: Path, text: str, sentence: str) -> None:
    assert Refusal(tmp_path).of(read_eig, eig(tmp_path, text)) == f"GX.eig{sentence}"


def test_eig_of_another_mesh_or_window(tmp_path: Path) -> None:
    refusal, path = Refusal(tmp_path), eig(tmp_path, EIG)
    assert refusal.of(read_eig, path, n_k=64) == (
        f"GX.eig: found 3 k-points, expected 64 k-points; {EIG_AGAIN}."
    )
    assert refusal.of(read_eig, path, n_bands=42) == (
        f"GX.eig: found 2 bands, expected 42 bands; {EIG_AGAIN}."
    )


def test_bands_are_the_columns(tmp_path: Path) -> None:
    found = read_bands(*bands(tmp_path), n_wann=2)
    np.testing.assert_array_equal(found.k_frac[1], [0.025, 0, -0.025])
    np.testing.assert_array_equal(
        found.energies_ev,
        [[-3.0772038, 3.0772038], [-3.0715541, 4.0715541], [-3.0562555, 5.0562555]],
    )


def test_projections_beside_the_bands_are_ignored(tmp_path: Path) -> None:
    lines = [line + "  0.5" if line.strip() else line for line in BAND.splitlines()]
    found = read_bands(*bands(tmp_path, "\n".join(lines) + "\n"))
    assert found.energies_ev.shape == (3, 2)


@pytest.mark.parametrize(
    ("band", "kpt", "sentence"),
    [
        (BAND[: BAND.index("  0.32907744E-01  0.5")], KPT,
         f"GX_band.dat, line 6: found 2 energies of band 2, expected 3, one for each k-point of "
         f"GX_band.kpt; {BANDS_AGAIN}."),
        (BAND, KPT[: KPT.index("    0.05")],
         f"GX_band.kpt, line 3: found 2 k-points, expected 3, as line 1 says; {BANDS_AGAIN}."),
        (BAND, KPT[KPT.index("    0.0") :],
         f'GX_band.kpt, line 1: found "0.000000    0.000000    0.000000   1.0", expected the '
         f"number of k-points; {BANDS_AGAIN}."),
        (BAND.replace("0.16453872E-01  0.4", "0.17453872E-01  0.4"), KPT,
         f"GX_band.dat, line 6: found path coordinate 0.017454, expected the path coordinate that "
         f"the first band has there; {BANDS_AGAIN}."),
        (BAND.replace("0.32907744E-01", "0.00907744E-01"), KPT,
         f"GX_band.dat, line 3: found path coordinate 0.000908, expected a path coordinate that "
         f"does not decrease; {BANDS_AGAIN}."),
        (BAND[: BAND.index("  0.00000000E+00  0.3")], KPT,
         f"GX_band.dat: found 1 bands, expected 2 bands; {BANDS_AGAIN}."),
        (" \n\n", KPT, f"GX_band.dat: found 0 bands, expected 2 bands; {BANDS_AGAIN}."),
    ],
)  # fmt: skip
def test_damaged_bands(tmp_path: Path, band: str, kpt: str, sentence: str) -> None:
    refusal = Refusal(tmp_path)
    assert refusal.of(read_bands, *bands(tmp_path, band, kpt), n_wann=2) == sentence
