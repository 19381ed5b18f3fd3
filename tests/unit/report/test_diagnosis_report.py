"""The diagnosis on the page and in the terminal. All cases invented."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from typing import Any

import pytest

import invented_dossiers as invented
from topovet.report.diagnosis_words import (
    ANSWERS,
    NAMES,
    cause_name,
    diagnosis_line,
    sort_causes,
)
from topovet.report.figures import build_figures
from topovet.report.html import render_report
from topovet.report.text import verdict_lines
from topovet.verdict.advice import CODES
from topovet.verdict.document import CauseEntry, DiagnosisEntry, MendedEntry, Verdict

BASE = invented.undetermined()


def cause(**changes: Any) -> CauseEntry:
    sound = CauseEntry(
        cause="orbital-declaration-wrong",
        answer="yes",
        weight=0.97,
        test="other orders are tried.",
        finding="with another order inversion holds to 0.02 meV.",
        evidence={"residual_after_meV": 0.02},
        advice="take the projections of the run.",
        if_mended=MendedEntry((1, 0, 0, 0), 1, "strong-ti", "agree", 0.34),
    )
    return replace(sound, **changes)


RULED_OUT = cause(cause="filling-off", answer="no", weight=0.0, advice="", if_mended=None)


def with_causes(*causes: CauseEntry, because: str = "there are flags of severity error") -> Verdict:
    return replace(BASE.verdict, diagnosis=DiagnosisEntry(because, causes))


def page(verdict: Verdict) -> str:
    return render_report(replace(BASE, verdict=verdict), _figures())


@cache
def _figures() -> dict[str, str]:
    """They show nothing of the diagnosis."""
    return build_figures(BASE)


def section(html: str) -> str:
    start = html.index('<section id="diagnosis"')
    return " ".join(html[start : html.index("</section>", start)].split())


# --- words


def test_every_cause_has_a_name_of_its_own() -> None:
    """Symptoms are no causes: no test of theirs says yes."""
    symptoms = {"parity-impure", "witnesses-disagree"}
    assert set(NAMES) == ({*CODES} - symptoms) | {"noise"}
    assert len(set(NAMES.values())) == len(NAMES)
    assert cause_name("noise") == "Noise on the Hamiltonian"
    assert cause_name("unheard-of") == "unheard-of"


def test_causes_are_split_and_keep_their_order() -> None:
    possible = cause(cause="noise", answer="open")
    found = sort_causes([cause(), RULED_OUT, possible])
    assert [c.cause for c in found.likely] == ["orbital-declaration-wrong", "noise"]
    assert [c.cause for c in found.ruled_out] == ["filling-off"]


def test_line_for_the_terminal() -> None:
    line = diagnosis_line(with_causes(cause(), RULED_OUT))
    assert line == (
        "Declared orbitals (confirmed): with another order inversion holds to 0.02 meV. "
        "Mended, it would be strong-ti 1;(000), direct gap 0.340 eV."
    )
    assert line in verdict_lines(with_causes(cause()))


@pytest.mark.parametrize(
    ("changes", "ending"),
    [
        ({"if_mended": None}, "to 0.02 meV."),
        (
            {"if_mended": MendedEntry(None, None, "undetermined", "disagree", 0.3)},
            "would still be undetermined.",
        ),
        ({"if_mended": MendedEntry(None, None, "chern", "agree", None)}, "it would be chern."),
        ({"if_mended": MendedEntry((0,), None, "trivial", "agree", 0.05)}, "direct gap 50.0 meV."),
    ],
)
def test_line_says_what_would_be(changes: dict[str, Any], ending: str) -> None:
    assert diagnosis_line(with_causes(cause(**changes))).endswith(ending)


def test_nothing_is_said_where_nothing_is_likely() -> None:
    assert diagnosis_line(with_causes()) == ""
    assert diagnosis_line(with_causes(RULED_OUT)) == ""


# --- page


def test_no_section_where_nothing_is_in_doubt() -> None:
    html = page(replace(BASE.verdict, diagnosis=DiagnosisEntry()))
    assert 'id="diagnosis"' not in html
    assert "#diagnosis" not in html


def test_section_tells_test_finding_advice_and_what_would_be() -> None:
    shown = section(page(with_causes(cause(), RULED_OUT)))
    for part in (
        "Asked because there are flags of severity error.",
        "1. Declared orbitals",
        "confirmed, weight 0.97",
        "With another order inversion holds to 0.02 meV.",
        "Take the projections of the run.",
        "Other orders are tried.",
        "1;(000)",
        "0.340",
        "Tested and not the cause (1)",
        "Number of electrons",
    ):
        assert part in shown, part
    assert "Weights put causes in order and are no probabilities" in shown


@pytest.mark.parametrize("answer", ["yes", "open"])
def test_answers_in_words(answer: str) -> None:
    assert ANSWERS[answer] in section(page(with_causes(cause(answer=answer))))


def test_consequence_names_its_cause() -> None:
    shown = section(page(with_causes(cause(cause="symmetry-broken", consequence_of="noise"))))
    assert "explained by: Noise on the Hamiltonian" in shown


def test_nothing_explains_it() -> None:
    shown = section(page(with_causes(RULED_OUT)))
    assert "No cause that was tested explains it." in shown


@pytest.mark.parametrize(
    ("gap_ev", "shown"), [(None, "still undetermined."), (2e-5, "the direct gap closes")]
)
def test_still_undetermined(gap_ev: float | None, shown: str) -> None:
    mended = MendedEntry(None, None, "undetermined", "undetermined", gap_ev)
    assert shown in section(page(with_causes(cause(if_mended=mended))))


def test_hostile_strings_stay_text() -> None:
    hostile = cause(
        cause=invented.HOSTILE,
        test=invented.HOSTILE,
        finding=invented.HOSTILE,
        advice=invented.HOSTILE,
        consequence_of=invented.HOSTILE,
    )
    ruled_out = replace(hostile, answer="no", consequence_of="")
    html = page(with_causes(hostile, ruled_out, because=invented.HOSTILE))
    assert "<script" not in html
    assert "\x1b" not in html
    assert "\u202e" not in html
    assert section(html).count("&lt;script&gt;") >= 8
    assert ">49<" not in html
