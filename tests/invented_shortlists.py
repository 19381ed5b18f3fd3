"""Made-up candidates and dossiers for the shortlist tests: compounds nobody has made.

Numbers are drawn once from a fixed seed; classes, gaps and flags are spread as a campaign might
spread them, with undetermined cases, overlapping bands and missing numbers among them.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

import invented_dossiers
from topovet.report.json_document import verdict_json
from topovet.report.shortlist.records import (
    Candidate,
    Cause,
    Failure,
    FlagNote,
    Gaps,
    Shortlist,
    WitnessWord,
)
from topovet.screening.merit import rule_table
from topovet.screening.merit_rules import default_rules
from topovet.screening.shortlist_ranking import rank

HOSTILE_NAMES = (
    "</script><script>window.owned=1</script>",
    "<!--<script>",
    '<img src=x onerror="window.owned=1">',
    "\"quoted\" 'twice' & amp; &lt;b&gt;",
    "two\nlines",
    "../../../etc/passwd",
    '=HYPERLINK("http://example.invalid","x")',
    "+1+1",
    "-2+3",
    "@SUM(A1:A9)",
    "\u202eright to left",
    "javascript:window.owned=1",
    "{{ 7*7 }} {% raw %}",
)
"""Names that a file could carry: markup, ends of data blocks, quotes, paths, formulas, URLs."""

_METALS, _ANIONS = (
    ("Bi", "Sb", "Sn", "Ge", "In", "Ga", "Y", "Zr", "Pb", "Tl"),
    ("Te", "Se", "S", "As"),
)
_GROUPS = ((166, "R-3m"), (225, "Fm-3m"), (62, "Pnma"), (164, "P-3m1"), (12, "C2/m"))
_TITLES = {
    "strong-ti": "Strong topological insulator",
    "weak-ti": "Weak topological insulator",
    "trivial": "Trivial",
    "metal": "Metal",
    "undetermined": "Undetermined",
}
_INDICES = {"strong-ti": "1;(000)", "weak-ti": "0;(001)", "trivial": "0;(000)"}

SOUND = Candidate(
    folder="lantern-1",
    link="lantern-1",
    has_report=True,
    name="Lantern-1",
    formula="Bi2Te3",
    elements=("Bi", "Te"),
    space_group=(166, "R-3m"),
    dimension=3,
    class_="strong-ti",
    title="Strong topological insulator",
    indices="1;(000)",
    agreement="agree",
    grade="B",
    gaps=Gaps("insulator", 0.25, None, 0.2),
    radius_mev=125.0,
    error_mev=12.0,
    tipping_mev=None,
    exposure_mev=None,
    obstacle="",
    flags=(),
    witnesses=(
        WitnessWord("Parities", "ok", "Z₂ = 1;(000)"),
        WitnessWord("Wilson loops", "ok", "Z₂ = 1;(000)"),
        WitnessWord("Surface states", "not-applicable", "not part of this version"),
    ),
    asked_because="",
    causes=(),
)
"""A clean strong topological insulator."""

DISPUTED = replace(
    SOUND,
    folder="gravel-2",
    link="gravel-2",
    name="Gravel-2",
    class_="undetermined",
    title="Undetermined",
    indices="",
    agreement="disagree",
    grade="D",
    obstacle="Witnesses disagree: parities say 1;(000), Wilson loops 0;(000).",
    flags=(
        FlagNote(
            "witnesses-disagree",
            "error",
            "Parities say 1;(000), Wilson loops 0;(000).",
            "Read the other flags first.",
        ),
        FlagNote("filling-off", "warning", "Two electrons more fit the Fermi energy better.", ""),
    ),
    witnesses=(
        WitnessWord("Parities", "ok", "Z₂ = 1;(000)"),
        WitnessWord("Wilson loops", "ok", "Z₂ = 0;(000)"),
    ),
    asked_because="Parities and Wilson loops contradict each other at the strong index.",
    causes=(
        Cause(
            "filling-off",
            "yes",
            0.81,
            "Both witnesses were asked again at 16 and 20 filled bands.",
            "At 20 filled bands both give 0;(000) with a gap of 212 meV; at 18 the gap is 3 meV.",
            "Count the electrons of the Wannier manifold again.",
            "trivial, Z₂ = 0;(000), gap 212 meV",
            "fermi-outside-gap",
        ),
        Cause(
            "range-truncated", "open", 0.14, "", "The rim holds 41 meV.", "Use a denser mesh.", ""
        ),
        Cause(
            "inversion-centre-shifted",
            "no",
            0.03,
            "All eight centres were tried.",
            "No other centre lowers the residual of 0.4 meV.",
            "",
            "",
        ),
    ),
)
"""Two witnesses that contradict each other, with a diagnosis."""

FAILURES = (
    Failure(
        "not-vetted",
        "Flint-3",
        "flint-3",
        'flint_hr.dat, line 812: found "*******", expected two numbers; run Wannier90 again.',
        "flint_hr.dat",
        812,
        "2031-04-05T06:07:08Z",
    ),
    Failure(
        "unreadable",
        "ash-4",
        "ash-4",
        "verdict.json: found text that is not JSON, expected a whole document.",
        "verdict.json",
        None,
        "",
    ),
)


def campaign(n: int, seed: int = 5) -> tuple[Candidate, ...]:
    """So many made-up candidates."""
    rng = np.random.default_rng(seed)
    return tuple(_drawn(i, rng) for i in range(n))


def shortlist(candidates: Sequence[Candidate], failures: Sequence[Failure] = ()) -> Shortlist:
    """The list of these candidates under the default rules."""
    rules = default_rules()
    rows = rank(candidates, rules)
    return Shortlist(rows, tuple(failures), len(rows), (), (), rule_table(rules), "0.1.0")


def hostile() -> Shortlist:
    """Every text of a case is hostile, among sound and disputed ones."""
    odd = [
        replace(
            SOUND,
            name=name,
            formula=name,
            elements=None,
            space_group=(2, name),
            folder=f"odd-{i}",
            link=f"odd-{i}",
            flags=(FlagNote("cell-mismatch", "warning", name, name),),
        )
        for i, name in enumerate(HOSTILE_NAMES)
    ]
    disputed = [
        replace(
            DISPUTED,
            name=name,
            obstacle=name,
            asked_because=name,
            witnesses=(WitnessWord(name, name, name),),
            causes=(Cause(name, "yes", 0.5, name, name, name, name),),
        )
        for name in HOSTILE_NAMES
    ]
    failed = [
        replace(FAILURES[0], name=n, folder=n, message=n, file=n, when=n) for n in HOSTILE_NAMES
    ]
    listed = shortlist([SOUND, DISPUTED, *odd, *disputed], failed)
    return replace(listed, filters=HOSTILE_NAMES, notes=HOSTILE_NAMES, version=HOSTILE_NAMES[0])


def write_dossier(folder: Path, changes: dict[str, Any] | None = None) -> Path:
    """A dossier of an invented strong insulator; changes go by dotted names, e.g. "case.name"."""
    document = json.loads(verdict_json(invented_dossiers.strong().verdict))
    for place, value in (changes or {}).items():
        *path, last = place.split(".")
        node = document
        for step in path:
            node = node[step]
        node[last] = value
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "verdict.json").write_text(json.dumps(document), encoding="utf-8")
    (folder / "report.html").write_text(
        f"<!DOCTYPE html><title>dossier {folder.name}</title>", encoding="utf-8"
    )
    return folder


def write_failure(folder: Path, **changes: Any) -> Path:
    """A failure as a run records it."""
    error = {"file": "flint_hr.dat", "line": 812, "message": "flint_hr.dat, line 812: found …"}
    record = {
        "schema": "topovet.failure/1",
        "case": {"name": "Flint-3", "path": "cases/flint-3"},
        "error": error,
        "when": "2031-04-05T06:07:08Z",
    }
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "failure.json").write_text(json.dumps({**record, **changes}), encoding="utf-8")
    return folder


def _drawn(i: int, rng: np.random.Generator) -> Candidate:
    class_ = str(
        rng.choice(
            ["strong-ti", "weak-ti", "trivial", "metal", "undetermined"],
            p=[0.13, 0.06, 0.6, 0.08, 0.13],
        )
    )
    metal, anion = str(rng.choice(_METALS)), str(rng.choice(_ANIONS))
    formula = f"{metal}{rng.choice(['', '2', '4'])}{anion}{rng.choice(['', '2', '3', '5'])}"
    direct = 0.0 if class_ == "metal" else float(rng.lognormal(np.log(0.25), 1.1))
    indirect = direct * float(rng.uniform(0.4, 1.0)) - float(rng.random() < 0.2) * float(
        rng.uniform(0, 0.8)
    )
    agreement = "disagree" if class_ == "undetermined" and rng.random() < 0.3 else "agree"
    flags = tuple(
        FlagNote(code, severity, f"Made-up finding number {i}.", "")
        for code, severity, share in (
            ("gap-closes", "error", 1.0 if class_ == "undetermined" else 0.0),
            ("symmetry-broken", "info", 0.5),
            ("fermi-outside-gap", "warning", 0.25),
            ("inside-error-bar", "warning", 0.1),
        )
        if rng.random() < share
    )
    grade = "D" if class_ == "undetermined" else str(rng.choice(["A", "B", "C"], p=[0.2, 0.5, 0.3]))
    unknown = class_ == "undetermined" and rng.random() < 0.3
    return replace(
        SOUND,
        folder=f"case-{i:05d}",
        link=f"case-{i:05d}",
        name=f"HX-{i:05d}",
        formula=formula,
        elements=tuple(sorted({metal, anion})),
        space_group=_GROUPS[int(rng.integers(len(_GROUPS)))],
        class_=class_,
        title=_TITLES[class_],
        indices=_INDICES.get(class_, ""),
        agreement=agreement if class_ != "metal" else "undetermined",
        grade=grade,
        gaps=Gaps("unresolved", None, None, None)
        if unknown
        else Gaps("insulator", direct, 0.98 * direct if grade == "A" else None, indirect),
        radius_mev=None if unknown else 500 * direct,
        obstacle=flags[0].summary if class_ == "undetermined" else "",
        flags=flags,
        causes=DISPUTED.causes if agreement == "disagree" else (),
        asked_because=DISPUTED.asked_because if agreement == "disagree" else "",
    )
