"""Keywords, comments and blocks of a `.win` file."""

from __future__ import annotations

import pytest

from topovet.intake.wannier_input.win_grammar import Line, lex_win


@pytest.mark.parametrize(
    "line",
    [
        "num_wann = 8",
        "num_wann=8",
        "num_wann : 8",
        "num_wann:8",
        "num_wann 8",
        "\tnum_wann\t8  ",
        "NUM_WANN = 8",
        "Num_Wann = 8 ! eight",
        "num_wann = 8 # eight ! still",
    ],
)
def test_keyword_separators_case_and_comments(line: str) -> None:
    text = lex_win(["", line], "x.win")
    assert text.keyword("num_wann") == Line(2, "8")


def test_underscores_are_significant() -> None:
    text = lex_win(["numwann = 8", "fermi_energy_min = 1"], "x.win")
    assert text.keyword("num_wann") is None
    assert text.keyword("fermi_energy") is None


def test_value_keeps_its_case_and_inner_separators() -> None:
    assert lex_win(["exclude_bands : 1-4, 7:9"], "x.win").keyword("exclude_bands") == Line(
        1, "1-4, 7:9"
    )


@pytest.mark.parametrize(
    ("begin", "end"),
    [
        ("begin projections", "end projections"),
        ("Begin Projections", "END PROJECTIONS"),
        ("  begin    projections ! four", "\tend\tprojections # four"),
    ],
)
def test_blocks_keep_line_numbers_and_drop_comments(begin: str, end: str) -> None:
    lines = ["! title", begin, "", "Bi:p ! heavy", "  # nothing", "Se:p", end]
    block = lex_win(lines, "x.win").block("projections")
    assert block is not None
    assert block.number == 2
    assert block.lines == (Line(4, "Bi:p"), Line(6, "Se:p"))


def test_block_lines_are_not_keywords() -> None:
    text = lex_win(["begin atoms_frac", "num_wann = 3", "end atoms_frac"], "x.win")
    assert text.keyword("num_wann") is None


def test_repetition_is_no_matter_in_what_nobody_asks_for() -> None:
    text = lex_win(["iprint = 2", "iprint = 3", "num_wann = 1"], "x.win")
    assert text.keyword("num_wann") == Line(3, "1")
