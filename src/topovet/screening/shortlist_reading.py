"""From the dossier of one case to what a shortlist needs of it, strictly."""

from __future__ import annotations

import os
import re
from pathlib import Path
from urllib.parse import quote

from topovet.errors import InputError
from topovet.notation import one_line, printable, z2_text
from topovet.report.classes import words_of_class
from topovet.report.shortlist.records import (
    Candidate,
    Cause,
    Failure,
    FlagNote,
    Gaps,
    WitnessWord,
)
from topovet.screening.shortlist_fields import Fields, encodable, read_document
from topovet.verdict.document import SCHEMA
from topovet.verdict.flags import SEVERITIES

FAILURE_SCHEMA = "topovet.failure/1"

CLASSES = (
    *("strong-ti", "weak-ti", "crystalline-ti", "higher-order", "chern", "axion-candidate"),
    *("trivial", "weyl-semimetal", "dirac-semimetal", "nodal-line", "metal", "undetermined"),
)
GAPLESS = frozenset({"weyl-semimetal", "dirac-semimetal", "nodal-line", "metal"})
"""Classes that rest on nodes of the bands rather than on indices of witnesses."""

AGREEMENTS = ("agree", "disagree", "one-witness", "undetermined")
GRADES = ("A", "B", "C", "D")
_GAP_STATUS = ("insulator", "semimetal-direct-gap", "gapless", "unresolved")
_FORMULA = re.compile(r"(?:[A-Z][a-z]?\d*(?:\.\d+)?)+")
_LONGEST_FORMULA = 200


def read_candidate(folder: Path, root: Path) -> Candidate:
    """The candidate of a dossier folder below `root`.

    Raises
    ------
    InputError
        The verdict is damaged, of another schema, or lacks something; names the file and field.
    """
    verdict = read_document(folder / "verdict.json", SCHEMA)
    case, gap = verdict.object("case"), _gaps(verdict.object("gap"))
    dimension = case.whole("dimension", 2, 3)
    robustness = verdict.object("robustness")
    flags = tuple(_flag(entry) for entry in verdict.objects("flags"))
    obstacle = _obstacle(verdict, flags)
    class_ = "undetermined" if obstacle else verdict.word("class", CLASSES)
    indices = _indices(verdict.object("invariants"), dimension)
    diagnosis = verdict.maybe_object("diagnosis")
    formula = case.text("formula")
    return Candidate(
        folder=folder_text(folder, root),
        link=folder_link(folder, root),
        has_report=(folder / "report.html").is_file(),
        name=one_line(case.text("name")),
        formula=one_line(formula),
        elements=elements_of(formula),
        space_group=_space_group(case),
        dimension=dimension,
        class_=class_,
        title=words_of_class(class_, gap.status, dimension).title,
        indices="" if obstacle else indices,
        agreement=verdict.word("agreement", AGREEMENTS),
        grade=verdict.object("confidence").word("grade", GRADES),
        gaps=gap,
        radius_mev=robustness.maybe_number("radius_meV"),
        error_mev=_error(robustness),
        tipping_mev=_tipping(robustness),
        exposure_mev=_exposure(verdict),
        obstacle=obstacle,
        flags=flags,
        witnesses=_witnesses(verdict),
        asked_because="" if diagnosis is None else one_line(diagnosis.maybe_text("asked_because")),
        causes=() if diagnosis is None else tuple(_cause(c) for c in diagnosis.objects("causes")),
    )


def read_failure(folder: Path, root: Path) -> Failure:
    """The failure that a run recorded in a folder below `root`.

    Raises
    ------
    InputError
        As `read_candidate`.
    """
    record = read_document(folder / "failure.json", FAILURE_SCHEMA)
    case, error = record.object("case"), record.object("error")
    line = error.maybe_number("line")
    return Failure(
        kind="not-vetted",
        name=one_line(case.maybe_text("name")) or folder_text(folder, root),
        folder=folder_text(folder, root),
        message=one_line(error.text("message")),
        file=one_line(error.maybe_text("file")),
        line=None if line is None else int(line),
        when=one_line(record.maybe_text("when")),
    )


def unreadable(folder: Path, root: Path, error: InputError) -> Failure:
    """A dossier that cannot be read, as an entry of the failures."""
    return Failure(
        kind="unreadable",
        name=folder_text(folder, root),
        folder=folder_text(folder, root),
        message=one_line(encodable(str(error).replace(f"{folder}{os.sep}", ""))),
        file=encodable(Path(error.file).name),
        line=error.line,
        when="",
    )


def folder_text(folder: Path, root: Path) -> str:
    """The folder below the root, "/" between its parts, safe to print."""
    return printable(encodable(folder.relative_to(root).as_posix())).replace("\n", "\\n")


def folder_link(folder: Path, root: Path) -> str:
    """The folder below the root as a relative URL, every byte that could mislead encoded."""
    return quote(os.fsencode(folder.relative_to(root).as_posix()))


def elements_of(formula: str) -> tuple[str, ...] | None:
    """Symbols in a formula such as Bi2Se3, sorted; None where it is anything else."""
    if len(formula) > _LONGEST_FORMULA or not _FORMULA.fullmatch(formula):
        return None
    symbols = set(re.findall(r"[A-Z][a-z]?", formula))
    return tuple(sorted(symbols)) if symbols <= known_symbols() else None


def known_symbols() -> frozenset[str]:
    """All chemical symbols."""
    from ase.data import chemical_symbols

    return frozenset(chemical_symbols[1:])


def _gaps(gap: Fields) -> Gaps:
    return Gaps(
        status=gap.word("status", _GAP_STATUS),
        direct_ev=gap.maybe_number("direct_eV"),
        proved_ev=gap.maybe_number("direct_proved_min_eV"),
        indirect_ev=gap.maybe_number("indirect_eV"),
    )


def _space_group(case: Fields) -> tuple[int, str] | None:
    group = case.maybe_object("space_group")
    return (
        None if group is None else (group.whole("number", 0, 230), one_line(group.text("symbol")))
    )


def _indices(invariants: Fields, dimension: int) -> str:
    """What is stood behind, in one line; signs of mirror Chern numbers hang on a convention."""
    mirror = invariants.maybe_object("mirror_chern")
    found = [] if mirror is None else [mirror.maybe_number(name) for name in mirror.names()]
    sizes = sorted({abs(int(value)) for value in found if value})
    mirrors = f"|C_m| = {', '.join(str(size) for size in sizes)}" if sizes else ""
    return ", ".join(part for part in (_z2_or_chern(invariants, dimension), mirrors) if part)


def _z2_or_chern(invariants: Fields, dimension: int) -> str:
    z2 = invariants.maybe_integers("z2", (1,) if dimension == 2 else (4,))
    if z2 is not None:
        return z2_text(z2, plain=True)
    chern = invariants.raw("chern")
    if type(chern) is int:
        return f"C = {chern}"
    vector = invariants.maybe_integers("chern", (3,))
    return "" if vector is None else f"C = ({', '.join(str(c) for c in vector)})"


def _error(robustness: Fields) -> float | None:
    """Sum of the known errors in meV: the bound for errors that may all point one way."""
    errors = robustness.object("errors_meV")
    known = [value for key in errors.names() if (value := errors.maybe_number(key)) is not None]
    return sum(known) if known else None


def _tipping(robustness: Fields) -> float | None:
    """Distance in meV to the nearest tipping point that states one in energy."""
    found = []
    for entry in robustness.objects("tipping"):
        in_ev, in_mev = entry.maybe_number("distance_eV"), entry.maybe_number("distance_meV")
        found += [] if in_ev is None else [abs(in_ev) * 1000.0]
        found += [] if in_mev is None else [abs(in_mev)]
    return min(found, default=None)


def _exposure(verdict: Fields) -> float | None:
    point = verdict.object("measurable").raw("dirac_point")
    if not isinstance(point, dict):
        return None
    return Fields(verdict.file, point, "measurable.dirac_point").maybe_number("exposure_meV")


def _flag(entry: Fields) -> FlagNote:
    return FlagNote(
        code=one_line(entry.text("code")),
        severity=entry.word("severity", SEVERITIES),
        summary=one_line(entry.text("summary")),
        advice=one_line(entry.maybe_text("advice")),
    )


def _obstacle(verdict: Fields, flags: tuple[FlagNote, ...]) -> str:
    """Why the verdict cannot be stood behind; empty where it can.

    A class beside an error flag or a disagreement is not this version's doing; it is not believed.
    """
    class_, agreement = verdict.word("class", CLASSES), verdict.word("agreement", AGREEMENTS)
    why = _contradiction(agreement, flags)
    if not why and class_ == "undetermined":
        return _first_reason(verdict.object("confidence"))
    if not why and agreement == "undetermined" and class_ not in GAPLESS:
        why = "No witness speaks for the class."
    if why and class_ != "undetermined":
        return f"{why} The dossier's own class, {class_}, is not believed."
    return why


def _contradiction(agreement: str, flags: tuple[FlagNote, ...]) -> str:
    if agreement == "disagree":
        said = next((f.summary for f in flags if f.code == "witnesses-disagree"), "")
        return f"Witnesses disagree: {said.rstrip('.')}." if said else "Witnesses disagree."
    error = next((f for f in flags if f.severity == "error"), None)
    return "" if error is None else f"{error.summary.rstrip('.')}."


def _first_reason(confidence: Fields) -> str:
    reasons = confidence.raw("reasons")
    first = reasons[0] if isinstance(reasons, list) and reasons else ""
    words = one_line(encodable(first)).rstrip(".") if isinstance(first, str) else ""
    return f"{words[:1].upper()}{words[1:]}." if words else "No reason is stated."


def _witnesses(verdict: Fields) -> tuple[WitnessWord, ...]:
    witnesses = verdict.object("witnesses")
    named = (
        ("parity", "Parities"),
        ("wilson", "Wilson loops"),
        ("mirror", "Mirror Chern numbers"),
        ("surface", "Surface states"),
    )
    return tuple(
        _witness(witnesses.object(key), name) for key, name in named if key in witnesses.names()
    )


def _witness(entry: Fields, name: str) -> WitnessWord:
    status = one_line(entry.text("status"))
    z2 = entry.maybe_integers("z2", (1, 4))
    strong = entry.raw("z2_strong")
    mirrors = [f"{p.text('plane')}: {n}" for p, n in _mirror_planes(entry)]
    if z2 is not None:
        says = f"Z₂ = {z2_text(z2)}"
    elif mirrors:
        says = one_line(", ".join(mirrors))
    elif type(strong) is int:
        says = f"strong index {strong}"
    else:
        says = one_line(entry.maybe_text("reason")) or "says nothing of Z₂"
    return WitnessWord(name, status, says)


def _mirror_planes(entry: Fields) -> list[tuple[Fields, int]]:
    """Planes that a mirror Chern number was counted on."""
    planes = entry.objects("planes")
    found = [(plane, plane.raw("mirror_chern")) for plane in planes]
    return [(plane, n) for plane, n in found if type(n) is int]


def _cause(entry: Fields) -> Cause:
    return Cause(
        cause=one_line(entry.text("cause")),
        answer=entry.word("answer", ("yes", "no", "open")),
        weight=min(1.0, max(0.0, entry.maybe_number("weight") or 0.0)),
        test=one_line(entry.maybe_text("test")),
        finding=one_line(entry.maybe_text("finding")),
        advice=one_line(entry.maybe_text("advice")),
        if_mended=_mended(entry.maybe_object("if_mended")),
        consequence_of=one_line(entry.maybe_text("consequence_of")),
    )


def _mended(entry: Fields | None) -> str:
    """What the verdict would be, in words."""
    if entry is None:
        return ""
    z2, gap = entry.maybe_integers("z2", (1, 4)), entry.maybe_number("gap_eV")
    said = [
        one_line(entry.maybe_text("class")).replace("-", " "),
        "" if z2 is None else f"Z₂ = {z2_text(z2)}",
        "" if gap is None else f"gap {gap * 1000:.3g} meV",
    ]
    return ", ".join(part for part in said if part)
