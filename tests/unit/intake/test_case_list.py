"""Lists of cases: every slip is an error that names its line, never a guess."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.errors import InputError
from topovet.intake.case_list import CaseList, read_case_list


def _read(tmp_path: Path, text: str, encoding: str = "utf-8") -> CaseList:
    path = tmp_path / "list.csv"
    path.write_bytes(text.encode(encoding))
    return read_case_list(path)


def test_every_column_becomes_a_value(tmp_path: Path) -> None:
    text = (
        "path,name,filling,fermi_eV,dimension,inversion_centre,surface,spinless\r\n"
        "a,GX-1,28,,3,0 0 0.5,0 0 1,\r\n"
        "\r\n"
        '../b,"Bi, thin",,-1.5e0,2,,"[1, -1, 0]",b0\r\n'
    )
    first, second = _read(tmp_path, text, "utf-8-sig").cases
    assert (first.line, first.path, first.written) == (2, tmp_path / "a", "a")
    assert (first.name, first.filling, first.fermi_ev) == ("GX-1", 28, None)
    assert (first.dimension, first.inversion_centre, first.surface) == (3, (0, 0, 0.5), (0, 0, 1))
    assert (second.line, second.path, second.name) == (4, tmp_path / "../b", "Bi, thin")
    assert (second.filling, second.fermi_ev, second.surface) == (None, -1.5, (1, -1, 0))
    assert (first.spinless, second.spinless) == (None, tmp_path / "b0")


def test_absolute_paths_stay_and_foreign_columns_are_named(tmp_path: Path) -> None:
    found = _read(tmp_path, "comment,path,icsd\n=1+1,/data/x,12\n")
    assert found.cases[0].path == Path("/data/x")
    assert found.unused == ("comment", "icsd")


def test_one_hamiltonian_may_be_listed_under_two_names(tmp_path: Path) -> None:
    found = _read(tmp_path, "path,name,filling\nx,low,18\nx,high,20\n")
    assert [case.filling for case in found.cases] == [18, 20]


@pytest.mark.parametrize(
    ("text", "line", "message"),
    [
        ("", None, "an empty file"),
        ("name,filling\nx,1\n", 1, "path among them"),
        ("path;filling\nx;1\n", 1, 'with commas instead of ";"'),
        ("path\tfilling\nx\t1\n", 1, "with commas instead of"),
        ("path,path\nx,y\n", 1, 'the column "path" twice'),
        ("path,Filing\nx,1\n", 1, "expected filling, or a name unlike it"),
        ("path,FILLING\nx,1\n", 1, "expected filling, or a name unlike it"),
        ("path,fermi\nx,1\n", 1, "expected fermi_eV, or a name unlike it"),
        ("path\n\n", None, "no row below"),
        ("path,filling\nx\n", 2, "found 1 cell, expected 2"),
        ("path,filling\nx,1,2\n", 2, "found 3 cells, expected 2"),
        ("path,filling\n,1\n", 2, "an empty path"),
        ("path,filling\nx,=2+3\n", 2, 'filling "=2+3", expected a whole number'),
        ("path,filling\nx,18.0\n", 2, 'filling "18.0"'),
        ("path,filling\nx,0\n", 2, "at least 1"),
        ("path,filling\nx,1_8\n", 2, 'filling "1_8"'),
        ("path,filling\nx,٣\n", 2, 'filling "٣"'),
        ("path,fermi_eV\nx,nan\n", 2, 'fermi_eV "nan"'),
        ("path,fermi_eV\nx,1e999\n", 2, 'fermi_eV "1e999"'),
        ('path,fermi_eV\nx,"6,31"\n', 2, 'fermi_eV "6,31"'),
        ("path,filling,fermi_eV\nx,1,2\n", 2, "both a filling and a fermi_eV"),
        ("path,dimension\nx,1\n", 2, "expected 2 or 3"),
        ("path,surface\nx,0 0 0\n", 2, "three whole Miller indices"),
        ("path,inversion_centre\nx,0 0\n", 2, "three fractional coordinates"),
        ('path,name\nx,"a\nb"\n', 2, "printable characters"),
        ("path,name\nx,\x1b[31m\n", 2, "printable characters"),
        ("path,name\nx,a\ny,b\nz,a\n", 4, '"a" again, as on line 2'),
        ("path\nx\n\nx\n", 4, '"x" again, as on line 2'),
        ('path\n"x\n', 2, "no row of comma-separated values"),
        ('path\n"x"y\n', 2, "no row of comma-separated values"),
        ("path\nx\0y\n", 2, "found "),
    ],
)
def test_slips_are_errors_that_name_the_line(
    tmp_path: Path, text: str, line: int | None, message: str
) -> None:
    with pytest.raises(InputError) as error:
        _read(tmp_path, text)
    assert message in str(error.value)
    assert error.value.line == line
    assert "\n" not in str(error.value)
    assert "\x1b" not in str(error.value)


def test_a_line_break_in_a_cell_does_not_shift_the_line_numbers(tmp_path: Path) -> None:
    with pytest.raises(InputError) as error:
        _read(tmp_path, 'path,note,filling\nx,"two\nlines",1\ny,z,none\n')
    assert error.value.line == 4


@given(st.text(alphabet='path,name\n"x1;\0\r é', max_size=60))
@settings(max_examples=150, deadline=None)
def test_any_text_is_read_or_refused_in_one_line(
    tmp_path_factory: pytest.TempPathFactory, text: str
) -> None:
    path = tmp_path_factory.getbasetemp() / "any.csv"
    path.write_text("path,name\n" + text, newline="")
    try:
        said = str(read_case_list(path))
    except InputError as error:
        said = str(error)
    assert "\n" not in said
