"""Damaged `.win` files: each is refused with one sentence that names the line."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.errors import InputError
from topovet.intake.wannier_input.win import parse_win

SOUND = """\
num_wann = 6
num_bands = 8
spinors = .true.
mp_grid = 1 1 2
exclude_bands = 1-4
begin unit_cell_cart
bohr
8 0 0
0 8 0
0 0 8
end unit_cell_cart
begin atoms_frac
Bi 0 0 0
end atoms_frac
begin projections
Bi:p
end projections
begin kpoints
0 0 0
0 0 0.5
end kpoints
"""

EXACT = [
    (
        ("end unit_cell_cart\n", ""),
        'GX.win, line 11: found "begin atoms_frac", expected end unit_cell_cart, for the block '
        "opened on line 6; close one block before the next.",
    ),
    (
        ("end kpoints\n", ""),
        "GX.win, line 18: found the block kpoints without its end, expected end kpoints before the "
        "end of the file; check that the file is complete and add the line.",
    ),
    (
        ("begin atoms_frac\n", ""),
        'GX.win, line 13: found "end atoms_frac", expected the begin of that block on an earlier '
        "line; restore the begin line or delete this one.",
    ),
    (
        ("begin kpoints\n0 0 0\n", "0 0 0\nbegin kpoints\n"),
        'GX.win, line 18: found "0 0 0", expected keyword = value, or begin and the name of a '
        "block; correct the line or put it back into its block.",
    ),
    (
        ("mp_grid", "num_wann"),
        "GX.win, line 4: found num_wann a second time (first on line 1), expected each keyword "
        "once; delete one of the two lines.",
    ),
    (
        ("begin kpoints\n", "begin projections\nBi:s\nend projections\nbegin kpoints\n"),
        "GX.win, line 18: found a second block projections (first on line 15), expected each block "
        "once; delete one of the two blocks.",
    ),
    (
        ("0 8 0", "0 8"),
        'GX.win, line 9: found "0 8", expected three finite numbers for a lattice vector; correct '
        "the line.",
    ),
    (
        ("0 8 0", "0 NaN 0"),
        'GX.win, line 9: found "0 NaN 0", expected three finite numbers for a lattice vector; '
        "correct the line.",
    ),
    (
        ("0 8 0\n", "0 8 0\n0 9 0\n"),
        "GX.win, line 6: found 4 lattice vectors in unit_cell_cart, expected three; correct the "
        "block.",
    ),
    (
        ("0 8 0", "8 0 0"),
        "GX.win, line 6: found lattice vectors that lie in a plane, expected a cell with a volume; "
        "correct unit_cell_cart.",
    ),
    (
        ("bohr", "nm"),
        'GX.win, line 7: found "nm" as the unit of unit_cell_cart, expected ang or bohr; correct '
        "the unit.",
    ),
    (
        ("begin kpoints\n", "begin atoms_cart\nBi 0 0 0\nend atoms_cart\nbegin kpoints\n"),
        "GX.win, line 18: found atoms_frac and atoms_cart together, expected one of the two "
        "blocks; delete the other one.",
    ),
    (
        ("Bi 0 0 0", "Bi 0 0 1e999"),
        'GX.win, line 13: found "Bi 0 0 1e999", expected three finite numbers for the position, '
        "after the label; correct the line.",
    ),
    (
        ("Bi 0 0 0", "Vac 0 0 0"),
        'GX.win, line 13: found the atom label "Vac", expected a chemical symbol, which digits may '
        "follow; rename the atom.",
    ),
    (
        ("mp_grid = 1 1 2", "mp_grid = 1 0 2"),
        'GX.win, line 4: found mp_grid = "1 0 2", expected three integers from 1 to 10000; correct '
        "the line.",
    ),
    (
        ("mp_grid = 1 1 2", "mp_grid = 1 1 3"),
        "GX.win, line 18: found 2 k-points in the block kpoints, expected 3 for the mp_grid "
        "(1, 1, 3); check that the block is complete, or correct mp_grid.",
    ),
    (
        ("0 0 0.5", "0 0 ****"),
        'GX.win, line 20: found "0 0 ****", expected three finite numbers for a k-point (a fourth '
        "may give its weight); correct the line.",
    ),
    (
        ("1-4", "1-4-6"),
        'GX.win, line 5: found "1-4-6" in exclude_bands, expected positive integers and ranges '
        "such as 1-4, 7, 9-10; correct the line.",
    ),
    (
        ("1-4", "1-4, 3"),
        "GX.win, line 5: found 3 more than once in exclude_bands, expected each number once; "
        "correct the line.",
    ),
    (
        ("1-4", "1-999999999"),
        'GX.win, line 5: found "1-999999999" in exclude_bands, expected positive integers and '
        "ranges such as 1-4, 7, 9-10; correct the line.",
    ),
    (
        ("num_bands = 8", "num_bands = 5"),
        "GX.win, line 2: found num_bands = 5, expected at least num_wann = 6; correct one of the "
        "two.",
    ),
    (
        ("num_wann = 6", "num_wann ="),
        "GX.win, line 1: found num_wann without a value, expected num_wann = VALUE; complete or "
        "delete the line.",
    ),
    (
        ("num_wann = 6", "num_wann = six"),
        'GX.win, line 1: found num_wann = "six", expected one integer of at least 1; correct the '
        "line.",
    ),
    (
        (".true.", "yes"),
        'GX.win, line 3: found spinors = "yes", expected .true. or .false.; correct the line.',
    ),
    (
        ("Bi:p", "Sb:p"),
        'GX.win, line 16: found the species "Sb", expected one of the atoms (Bi), f=x,y,z or '
        "c=x,y,z; correct the projection.",
    ),
    (
        ("Bi:p", "Bi:pw"),
        'GX.win, line 16: found "pw" as an orbital, expected names such as s, p, dxy, sp3, sp3-1 '
        "or numbers such as l=1,mr=2; correct the projection.",
    ),
    (
        ("Bi:p", "Bi p"),
        'GX.win, line 16: found "Bi p", expected site:orbitals, e.g. Bi:p; correct the projection.',
    ),
]


def test_the_undamaged_file_is_read() -> None:
    win = parse_win(SOUND.splitlines(), "GX.win")
    assert len(win.orbitals) == win.num_wann == 6


@pytest.mark.parametrize(("edit", "message"), EXACT, ids=[edit[1][:30] for edit, _ in EXACT])
def test_exact_sentence(edit: tuple[str, str], message: str) -> None:
    assert SOUND.count(edit[0]) >= 1
    damaged = SOUND.replace(edit[0], edit[1], 1)
    with pytest.raises(InputError) as caught:
        parse_win(damaged.splitlines(), "GX.win")
    assert str(caught.value) == message


@given(
    position=st.integers(0, len(SOUND)),
    removed=st.integers(0, 12),
    inserted=st.text(max_size=6),
)
@settings(max_examples=150, deadline=None)
def test_random_damage_is_read_or_refused_in_one_line(
    position: int, removed: int, inserted: str
) -> None:
    damaged = SOUND[:position] + inserted + SOUND[position + removed :]
    assert "\n" not in refusal(damaged)


def refusal(damaged: str) -> str:
    """The message with which the file is refused; empty where it is read."""
    try:
        parse_win(damaged.split("\n"), "GX.win")
    except InputError as error:
        return str(error)
    return ""
