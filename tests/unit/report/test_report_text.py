"""Words and numbers of the report: notation, sentences, terminal text, cautions."""

from __future__ import annotations

from dataclasses import replace

import pytest

import invented_dossiers as invented
from topovet import notation
from topovet.report.classes import class_words
from topovet.report.handling import DEFERENCE, handling_cautions
from topovet.report.json_document import load_schema
from topovet.report.text import verdict_lines, verdict_table
from topovet.report.words import grounds, radius_note, untested, verdict_sentence
from topovet.verdict.document import (
    GapEntry,
    InvariantsEntry,
    RobustnessEntry,
    Verdict,
    WilsonEntry,
)

CLASSES = tuple(load_schema()["properties"]["class"]["enum"])


@pytest.mark.parametrize(
    ("value", "shown"),
    [
        (0.34088, "0.341 eV"),
        (0.0066, "0.00660 eV"),
        (-0.321, "−0.321 eV"),
        (0.0, "0.000 eV"),
        (2e-5, "0.000020 eV"),
        (1e-9, "< 0.000001 eV"),
        (None, "–"),
        (float("nan"), "–"),
    ],
)
def test_ev(value: float | None, shown: str) -> None:
    assert notation.ev(value) == shown


@pytest.mark.parametrize(
    ("value", "shown"),
    [
        (0.0, "0 meV"),
        (1e-9, "< 0.001 meV"),
        (0.004, "0.004 meV"),
        (0.62, "0.620 meV"),
        (12.34, "12.3 meV"),
        (9334.2, "9334 meV"),
        (None, "–"),
    ],
)
def test_mev(value: float | None, shown: str) -> None:
    assert notation.mev(value) == shown


@pytest.mark.parametrize(
    ("value", "shown"), [(0.0, "0 Å"), (1e-8, "< 0.001 Å"), (0.01, "0.0100 Å"), (12.34, "12.3 Å")]
)
def test_angstrom(value: float, shown: str) -> None:
    assert notation.angstrom(value) == shown


@pytest.mark.parametrize(
    ("k", "shown", "plain"),
    [
        ((0.0, 0.5, 1 / 3), "(0, ½, ⅓)", "(0, 1/2, 1/3)"),
        ((-0.5, 0.12, -0.0), "(−½, 0.12, 0)", "(-1/2, 0.12, 0)"),
        ((0.9517, 0.6667, 1.0), "(0.9517, 0.6667, 1)", "(0.9517, 0.6667, 1)"),
        (None, "–", "-"),
    ],
)
def test_k_text(k: tuple[float, ...] | None, shown: str, plain: str) -> None:
    assert notation.k_text(k) == shown
    assert notation.k_text(k, plain=True) == plain


@pytest.mark.parametrize(
    ("z2", "shown"),
    [((1, 0, 0, 0), "1;(000)"), ((0, 1, 1, 1), "0;(111)"), ((1,), "1"), (None, "–")],
)
def test_z2_text(z2: tuple[int, ...] | None, shown: str) -> None:
    assert notation.z2_text(z2) == shown


@pytest.mark.parametrize(
    ("value", "shown"),
    [(None, "–"), (0.0001, "< 1 ms"), (0.0312, "31 ms"), (2.94, "2.9 s"), (312.4, "312 s")],
)
def test_seconds(value: float | None, shown: str) -> None:
    assert notation.seconds(value) == shown


def test_unprintable_characters_are_escaped() -> None:
    assert notation.printable("a\x1b[0m\u202e\udcff\tb\r\nc") == "a\\x1b[0m\\x202e\\xdcff\tb\nc"
    assert notation.one_line(" a\n\n b ") == "a b"


def _with_class(name: str) -> Verdict:
    return replace(invented.strong().verdict, class_=name, flags=())


@pytest.mark.parametrize("name", CLASSES)
def test_every_class_has_words(name: str) -> None:
    words = class_words(_with_class(name))
    assert words.title
    assert words.meaning.endswith(".")
    sentence = verdict_sentence(_with_class(name))
    assert sentence.count(". ") == 0
    assert sentence.endswith(".")


def test_two_dimensions_have_their_own_words() -> None:
    assert "quantum spin Hall" in verdict_sentence(invented.sheet().verdict)
    assert "Z₂ = 1 on one witness" in verdict_sentence(invented.sheet().verdict)


def test_a_semimetal_is_not_called_an_insulator() -> None:
    verdict = replace(
        _with_class("strong-ti"),
        gap=GapEntry(0.069, None, (0.5, 0.5, 0.5), -0.3, "semimetal-direct-gap"),
    )
    sentence = verdict_sentence(verdict)
    assert "a semimetal whose filled bands carry the strong topological index" in sentence
    assert "bands that overlap in energy" in sentence
    assert "insulator" not in sentence + class_words(verdict).title


def test_a_proved_gap_is_said_to_be_proved() -> None:
    verdict = replace(
        _with_class("strong-ti"), gap=GapEntry(0.7, 0.68, (0, 0, 0), 0.6, "insulator", "proved")
    )
    assert "proved to exceed 0.680 eV" in verdict_sentence(verdict)
    assert "sampled" not in verdict_sentence(verdict)


def test_disagreement_is_not_smoothed_over() -> None:
    verdict = replace(
        _with_class("undetermined"), agreement="disagree", invariants=InvariantsEntry()
    )
    assert "undetermined" in verdict_sentence(verdict)
    assert "Z₂ =" not in verdict_sentence(verdict)


def test_grounds_say_what_was_measured() -> None:
    said = " ".join(grounds(invented.strong()))
    for phrase in (
        *("at 8 time-reversal-invariant momenta", "purity of at least 0.9990"),
        *("At 1 of these momenta", "0.700 eV at k = (0, 0, 0)", "may be smaller"),
        *("inversion is kept to 0.620 meV", "on the mesh to 0.800 meV"),
    ):
        assert phrase in said, phrase


def test_a_witness_that_speaks_is_no_longer_untested() -> None:
    material = invented.strong()
    witnesses = replace(material.verdict.witnesses, wilson=WilsonEntry("ok", "", (1, 0, 0, 0)))
    spoken = replace(material, verdict=replace(material.verdict, witnesses=witnesses))
    assert not any("Wilson" in line for line in untested(spoken))
    assert any("Wilson loops give Z₂ = 1;(000)" in line for line in grounds(spoken))


def test_nothing_to_compare_with_is_untested() -> None:
    material = replace(invented.strong(), interpolation=None)
    assert any("no file to compare with" in line for line in untested(material))


def test_radius_is_set_against_the_largest_error() -> None:
    note = radius_note(invented.strong().verdict)
    assert note.startswith("half of the sampled gap")
    assert "largest known error (interpolation, 0.800 meV)" in note
    nothing = replace(invented.strong().verdict, robustness=RobustnessEntry(None, {}))
    assert radius_note(nothing) == "no gap to take the half of"


def test_lines_are_compact_and_plain() -> None:
    text = verdict_lines(invented.strong().verdict)
    assert len(text.splitlines()) == 11
    assert text.splitlines()[0] == (
        "Lantern-7: CdTe2, space group P-3m1 (164), 3D, 12 Wannier functions with spin"
    )
    for phrase in (
        *("Z2 = 1;(000), Z4 = 1 about the centre (0, 0, 0)", "direct <= 0.700 eV"),
        *("sampled, not proved", "inversion 0.620 meV", "350 meV", "agreement: one-witness"),
        *("warning    centres-off: ", "parity ok, Wilson not-applicable"),
    ):
        assert phrase in text, phrase


def test_lines_of_an_undetermined_case() -> None:
    text = verdict_lines(invented.undetermined().verdict)
    assert "Z2 not given" in text
    assert "error      parity-impure" in text
    assert "space group unknown" in text
    assert "inversion not measured (no projections are declared)" in text


def test_terminal_text_cannot_be_steered() -> None:
    verdict = invented.hostile().verdict
    for text in (verdict_lines(verdict), verdict_table([verdict])):
        assert all(c.isprintable() or c == "\n" for c in text)
    assert len(verdict_table([verdict]).splitlines()) == 3


def test_table_is_aligned() -> None:
    cases = (invented.strong, invented.sheet, invented.undetermined)
    lines = verdict_table(build().verdict for build in cases).splitlines()
    assert len(lines) == 5
    headings = "name formula space group filling z2 z4 class gap purity grade flags"
    assert " ".join(lines[0].split()) == headings
    column = lines[0].index("z2")
    assert [line[column : column + 7].strip() for line in lines[2:]] == ["1;(000)", "1", "-"]
    ends = lines[0].index("gap") + len("gap")
    assert all(line[:ends].endswith(("gap", "-", "eV")) for line in lines)
    assert "none" in lines[3]


def test_table_of_nothing() -> None:
    assert len(verdict_table([]).splitlines()) == 2


@pytest.mark.parametrize(
    "symbol", ["Tl", "Hg", "As", "Cd", "Pb", "Be", "Po", "Os", "Sb", "Te", "Se", "U", "Th", "Pu"]
)
def test_dangerous_elements_are_named(symbol: str) -> None:
    cautions = handling_cautions(["Si", symbol, symbol])
    assert len(cautions) == 2
    assert cautions[0].startswith(symbol)
    assert cautions[-1] == DEFERENCE


def test_order_and_silence() -> None:
    assert [c.split()[0] for c in handling_cautions(["Te", "Cd"])[:-1]] == ["Te", "Cd"]
    assert handling_cautions(["Si", "C"]) == ()
    assert "from memory" in DEFERENCE
    assert "local rules" in DEFERENCE
    assert "trained people" in DEFERENCE
