"""`_centres.xyz`: centres apart from atoms, counts that fit."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from companion_files import Refusal
from topovet.intake.shifts.centres import read_centres

SOUND = """\
     3
 Wannier centres, written by Wannier90 on 1Dec2026 at 07:19:55
X          0.00000006      -0.50000249      11.42401486
X         -0.25000009       0.00000256     -14.42401466
Xe         0.00000000      -0.00000000      11.45600000
"""
AGAIN = "copy the file again or let Wannier90 write it again (write_xyz = .true.)"


def written(folder: Path, text: str) -> Path:
    path = folder / "GX_centres.xyz"
    path.write_text(text)
    return path


def test_centres_come_before_the_atoms(tmp_path: Path) -> None:
    centres = read_centres(written(tmp_path, SOUND), 2).centres_cart
    np.testing.assert_array_equal(
        centres, [[0.00000006, -0.50000249, 11.42401486], [-0.25000009, 0.00000256, -14.42401466]]
    )


def test_a_file_without_atoms_is_read(tmp_path: Path) -> None:
    text = "\n".join(SOUND.replace("     3", "2").splitlines()[:4]) + "\n\n"
    assert read_centres(written(tmp_path, text), 2).centres_cart.shape == (2, 3)


@pytest.mark.parametrize(
    ("edit", "sentence"),
    [
        (("     3", "     4"), "line 5: found 3 rows after the comment line, expected 4, as line 1 "
         f"says; {AGAIN}."),
        (("     3", "three"), f'line 1: found "three", expected the number of rows; {AGAIN}.'),
        (("     3", "-3"), f'line 1: found "-3", expected the number of rows; {AGAIN}.'),
        (("     3", "9" * 30),
         f'line 1: found "{"9" * 30}", expected the number of rows; {AGAIN}.'),
        (("X         -0.2", "Bi        -0.2"), "line 3: found 1 centres (X rows), expected 2, one "
         "for each Wannier function of the Hamiltonian; put the file of the same Wannier90 run "
         "here, or remove it."),
        (("Xe", "X "),
         "line 5: found 3 centres (X rows), expected 2, one for each Wannier function of the "
         "Hamiltonian; put the file of the same Wannier90 run here, or remove it."),
    ],
)  # fmt: skip
def test_counts_that_do_not_fit(tmp_path: Path, edit: tuple[str, str], sentence: str) -> None:
    path = written(tmp_path, SOUND.replace(*edit))
    assert Refusal(tmp_path).of(read_centres, path, 2) == f"GX_centres.xyz, {sentence}"


@pytest.mark.parametrize("number", ["**********", "nan", "inf", "1e999", "1_0", "0x10", "1,5", ""])
def test_what_is_not_a_number_is_refused(tmp_path: Path, number: str) -> None:
    path = written(tmp_path, SOUND.replace("-0.25000009", number))
    message = Refusal(tmp_path).of(read_centres, path, 2)
    assert message.startswith('GX_centres.xyz, line 4: found "')
    assert "expected a label, x, y and z; " in message


def test_centres_below_atoms_are_refused(tmp_path: Path) -> None:
    lines = SOUND.splitlines()
    lines[3], lines[4] = lines[4], lines[3]
    path = written(tmp_path, "\n".join(lines) + "\n")
    assert Refusal(tmp_path).of(read_centres, path, 1) == (
        'GX_centres.xyz, line 5: found "X         -0.25000009       0.00000256     -14.42401466" '
        f"below the atoms, expected all X rows before the atoms; {AGAIN}."
    )
