"""The projections block: sites, angular parts, axes, spin, order, and what declares nothing."""

from __future__ import annotations

import numpy as np
import pytest

from topovet.errors import InputError
from topovet.intake.records import DeclaredOrbital, WinFile
from topovet.intake.wannier_input.angular import ANGULAR_NAMES
from topovet.intake.wannier_input.win import parse_win
from topovet.units import BOHR_ANGSTROM

STRUCTURE = """\
begin unit_cell_cart
4 0 0
2 4 0
0 0 8
end unit_cell_cart
begin atoms_frac
Bi1 0.0 0.0 0.1
Se  0.5 0.5 0.5
Bi2 0.0 0.0 -0.1
Se  0.5 0.5 1.25
end atoms_frac
"""
FIRST_LINE = STRUCTURE.count("\n") + 2  # of the contents of the block


def declare(*lines: str, keywords: str = "") -> WinFile:
    block = "\n".join(["begin projections", *lines, "end projections"])
    return parse_win((STRUCTURE + block + "\n" + keywords).split("\n"), "x.win")


def orbitals(*lines: str, spinors: bool = False) -> tuple[DeclaredOrbital, ...]:
    win = declare(*lines, keywords="spinors = T" if spinors else "")
    assert win.undeclared_reason is None
    return win.orbitals


def names(*lines: str, spinors: bool = False) -> list[str]:
    sign = {1: "+", -1: "-", 0: ""}
    return [
        f"{o.atom}{ANGULAR_NAMES[o.l][o.mr - 1]}{sign[o.spin]}"
        for o in orbitals(*lines, spinors=spinors)
    ]


def test_species_in_file_order_and_orbitals_in_wannier90_order() -> None:
    assert names("Se:p;s") == [f"{atom}{n}" for atom in (1, 3) for n in ("s", "pz", "px", "py")]


def test_labels_tell_atoms_of_one_element_apart() -> None:
    assert names("Bi2:s", "bi1:s") == ["2s", "0s"]
    with pytest.raises(InputError, match='the species "Bi", expected one of the atoms'):
        orbitals("Bi:s")


def test_lines_stay_in_their_order() -> None:
    assert names("Se:px", "Bi1:sp3-2;s", "Se:s") == ["1px", "3px", "0sp3-2", "0s", "1s", "3s"]


def test_blanks_and_case_do_not_matter() -> None:
    assert names(" BI1 : L = 1 , MR = 2,1 ; S ") == ["0s", "0pz", "0px"]


def test_positions_are_those_of_the_atoms_as_written() -> None:
    assert [o.position_frac for o in orbitals("Se:s")] == [(0.5, 0.5, 0.5), (0.5, 0.5, 1.25)]


def test_fractional_site_keeps_its_cell_and_finds_its_atom() -> None:
    on_atom, between = orbitals("f=1.0,0.0,0.1:s", "F=0.25, 0.25 ,0.3:s")
    assert (on_atom.position_frac, on_atom.atom) == ((1.0, 0.0, 0.1), 0)
    assert (between.position_frac, between.atom) == ((0.25, 0.25, 0.3), None)


@pytest.mark.parametrize(("unit", "scale"), [([], 1.0), (["ang"], 1.0), (["Bohr"], BOHR_ANGSTROM)])
def test_cartesian_site(unit: list[str], scale: float) -> None:
    (orbital,) = orbitals(*unit, "c=3,2,4:s")
    assert orbital.position_frac == pytest.approx(scale * np.array([0.5, 0.5, 0.5]))
    assert orbital.atom == (1 if scale == 1 else None)


def test_unit_does_not_touch_fractional_sites() -> None:
    assert orbitals("bohr", "f=0.25,0,0:s")[0].position_frac == (0.25, 0.0, 0.0)


def test_spinors_interlace_up_and_down() -> None:
    assert names("Bi1:pz;s", spinors=True) == ["0s+", "0s-", "0pz+", "0pz-"]


@pytest.mark.parametrize(
    ("suffix", "spins"),
    [("(u)", "+"), ("(d)", "-"), ("(u,d)", "+-"), ("(d,u)", "+-"), (" ( U , D ) ", "+-")],
)
def test_spin_suffix(suffix: str, spins: str) -> None:
    expected = [f"0{name}{spin}" for name in ("pz", "px") for spin in spins]
    assert names("Bi1:px;pz" + suffix, spinors=True) == expected


def test_single_spins_of_two_lines() -> None:
    lines = ("Bi1:s(u)", "Bi1:s(d)", "Bi2:s(d)")
    assert names(*lines, spinors=True) == ["0s+", "0s-", "2s-"]


@pytest.mark.parametrize("suffix", ["(u)[1,1,0]", "[1,1,0](u)", "[ 2, 2.0d0, 0 ](u)"])
def test_quantisation_axis_is_normalised(suffix: str) -> None:
    (orbital,) = orbitals("Bi1:s:z=0,0,1" + suffix, spinors=True)
    assert orbital.spin == 1
    assert orbital.spin_axis == pytest.approx((0.5**0.5, 0.5**0.5, 0.0))


def test_parentheses_of_orbital_names_are_no_spin() -> None:
    assert names("Bi1:fz(x2-y2);fy(3x2-y2)") == ["0fz(x2-y2)", "0fy(3x2-y2)"]
    line = "Bi1:fx(x2-3y2)(d)"
    assert names(line, spinors=True) == ["0fx(x2-3y2)-"]


@pytest.mark.parametrize(
    "fields",
    [
        "z=0,0,-2:x=0,3,0:r=2:zona=1.5",
        "zona=1.5d0:r=2:x=0,3,0:z=0,0,-2",
        "x=0,3,0 : zona=1.5 : z = 0, 0, -2 : r=2",
    ],
)
def test_optional_fields_in_any_order(fields: str) -> None:
    (orbital,) = orbitals("Bi1:px:" + fields)
    assert orbital.z_axis == (0.0, 0.0, -1.0)
    assert orbital.x_axis == (0.0, 1.0, 0.0)
    assert orbital.radial == 2


def test_defaults_of_the_optional_fields() -> None:
    (orbital,) = orbitals("Bi1:px")
    assert (orbital.z_axis, orbital.x_axis) == ((0.0, 0.0, 1.0), (1.0, 0.0, 0.0))
    assert (orbital.radial, orbital.spin, orbital.spin_axis) == (1, 0, (0.0, 0.0, 1.0))


def test_round_functions_get_some_x_axis_across_z() -> None:
    for orbital in orbitals("Bi1:s;pz;dz2;fz3:z=1,1,1"):
        z, x = np.array(orbital.z_axis), np.array(orbital.x_axis)
        assert z == pytest.approx(np.ones(3) / 3**0.5)
        assert np.linalg.norm(x) == pytest.approx(1)
        assert abs(z @ x) < 1e-14


def test_rounded_right_angle_is_made_right() -> None:
    (orbital,) = orbitals("Bi1:px:z=0.577,0.577,0.577:x=0.707,-0.708,0")
    z, x = np.array(orbital.z_axis), np.array(orbital.x_axis)
    assert abs(z @ x) < 1e-14
    assert x == pytest.approx([0.5**0.5, -(0.5**0.5), 0], abs=2e-3)


@pytest.mark.parametrize(
    "keyword", ["auto_projections = true", "use_bloch_phases : .true.", "AUTO_PROJECTIONS T"]
)
def test_automatic_projections_declare_nothing(keyword: str) -> None:
    win = declare("Bi1:s", keywords=keyword)
    assert win.orbitals == ()
    assert win.undeclared_reason is not None
    assert keyword.split()[0].lower() in win.undeclared_reason


def test_automatic_projections_switched_off() -> None:
    assert len(declare("Bi1:s", keywords="auto_projections = F").orbitals) == 1


@pytest.mark.parametrize("lines", [["random"], ["Random", "Bi1:s"], ["bohr", "Bi1:s", "random"]])
def test_random_lines_declare_nothing(lines: list[str]) -> None:
    win = declare(*lines)
    assert win.orbitals == ()
    assert win.undeclared_reason == "the projections in the .win file are random"


@pytest.mark.parametrize("lines", [[], ["ang"]])
def test_empty_block_declares_nothing(lines: list[str]) -> None:
    win = declare(*lines)
    assert win.orbitals == ()
    assert win.undeclared_reason == "the projections block of the .win file is empty"


def test_select_projections_keeps_its_own_order() -> None:
    win = declare("Bi1:s;p", keywords="num_wann = 3\nselect_projections = 4 1-2")
    assert [(o.l, o.mr) for o in win.orbitals] == [(1, 3), (0, 1), (1, 1)]
    assert win.undeclared_reason is None


@pytest.mark.parametrize(
    ("keywords", "reason"),
    [
        (
            "num_wann = 3",
            "the projections declare 4 Wannier functions and num_wann is 3 (the Hamiltonian may "
            "keep a subset, and nothing says which)",
        ),
        (
            "num_wann = 8",
            "the projections declare 4 Wannier functions and num_wann is 8 (spinors = .true. may "
            "be missing)",
        ),
        ("num_wann = 7", "the projections declare 4 Wannier functions and num_wann is 7"),
        (
            "num_wann = 3\nselect_projections = 1,2",
            "the projections declare 2 Wannier functions and num_wann is 3",
        ),
    ],
)
def test_another_number_than_num_wann_declares_nothing(keywords: str, reason: str) -> None:
    win = declare("Bi1:s;p", keywords=keywords)
    assert win.orbitals == ()
    assert win.undeclared_reason == reason


@pytest.mark.parametrize(
    ("line", "spinors", "message"),
    [
        ("Bi1", False, 'found "Bi1", expected site:orbitals'),
        (":s", False, 'found the species ""'),
        ("Te:s", False, 'found the species "Te", expected one of the atoms (Bi1, Se, Bi2)'),
        ("Bi1:", False, 'found "" as an orbital'),
        ("Bi1:s,q", False, 'found "q" as an orbital'),
        ("f=0,0:s", False, 'found "0,0" for a site, expected three finite numbers x,y,z'),
        ("f=1/3,2/3,0:s", False, 'found "1/3,2/3,0" for a site'),
        ("f=0,0,nan:s", False, 'found "0,0,nan" for a site'),
        ("Bi1:s:z=0,0,0", False, 'found "0,0,0" for the z axis, expected a vector that is not'),
        ("Bi1:s:zaxis=0,0,1", False, 'found the field "zaxis=0,0,1", expected z=, x=, r= or zona='),
        ("Bi1:s:r=1:r=1", False, 'found the field "r=1"'),
        ("Bi1:s:", False, 'found the field ""'),
        ("Bi1:s:r=4", False, "expected r = 1, 2 or 3"),
        ("Bi1:s:zona=-1", False, "zona above 0"),
        ("Bi1:px:z=1,1,1", False, "at right angles to the default x axis 1,0,0"),
        ("Bi1:s;px:z=1,0,1:x=1,0,0", False, "at right angles to its x axis, expected orthogonal"),
        ("Bi1:s(u)", False, 'found the spin "(u)", expected no spin'),
        ("Bi1:s[0,0,1]", False, 'found the spin "[0,0,1]", expected no spin'),
        ("Bi1:s(u)(d)", True, "expected one (u,d) and one [x,y,z], at the end of the line"),
        ("Bi1:s(u):z=0,0,1", True, "at the end of the line"),
        ("Bi1:s(x)", True, 'found "s(x)" as an orbital'),
        ("Bi1:s[0,0]", True, 'found "0,0" for the spin axis'),
        ("Bi1:s[0,0,0]", True, 'found "0,0,0" for the spin axis, expected a vector that is not'),
        ("Bi1:s[0,0,1", True, 'found "s[0" as an orbital'),
    ],
)
def test_refused_lines(line: str, spinors: bool, message: str) -> None:
    with pytest.raises(InputError) as caught:
        declare(line, keywords="spinors = T" if spinors else "")
    assert message in str(caught.value)
    assert caught.value.line == FIRST_LINE


def test_select_projections_beyond_the_declared() -> None:
    with pytest.raises(InputError, match="found 5 in select_projections, expected numbers up to 4"):
        declare("Bi1:s;p", keywords="select_projections = 1-3,5")


def test_cartesian_site_without_a_cell() -> None:
    lines = ["begin projections", "c=0,0,0:s", "end projections"]
    with pytest.raises(InputError, match="found a c= site, expected the block unit_cell_cart"):
        parse_win(lines, "x.win")


def test_too_many_functions_are_refused_before_they_are_made() -> None:
    lines = ["begin projections", *["f=0,0,0:f"] * 3000, "end projections"]
    with pytest.raises(InputError, match="more than 20000 Wannier functions"):
        parse_win(lines, "x.win")
