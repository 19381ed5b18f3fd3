"""The dossier as one HTML file: opens offline, runs nothing, prints."""

from __future__ import annotations

import functools
import re
from collections.abc import Mapping
from typing import Any

import jinja2
import numpy as np
from markupsafe import Markup, escape

from topovet import notation
from topovet.report import allowed_words as allowed
from topovet.report import band_path_words as band_path
from topovet.report import band_rep_words as band_reps
from topovet.report import words
from topovet.report.classes import class_words, words_of_class
from topovet.report.diagnosis_words import AGREEMENT, ANSWERS, cause_name, sort_causes
from topovet.report.figures import palette
from topovet.report.figures.canvas import FONTS
from topovet.report.figures.gap_map import middle_text
from topovet.report.gap_words import certificate_lines, error_rows
from topovet.report.handling import handling_cautions
from topovet.report.indicator_words import (
    direction,
    indicator_name,
    indicator_note,
    open_z2,
)
from topovet.report.material import ReportMaterial, TaskEntry
from topovet.report.svg import inline_svg
from topovet.report.tipping_words import NEAR_MEV, companion_line, nearest_mev
from topovet.verdict.advice import advice_sections
from topovet.verdict.document import Verdict
from topovet.verdict.flags import SEVERITIES, Flag
from topovet.verdict.grade import RULES

_UNITS = {"mev": "meV", "ev": "eV", "ang": "Å", "s": "s", "seconds": "s", "bytes": "bytes"}
_MANY_ATOMS = 12


def render_report(material: ReportMaterial, figures: Mapping[str, str]) -> str:
    """The report as HTML text, the same for the same material.

    Parameters
    ----------
    material
        Results to show.
    figures
        SVG text by name, as `topovet.report.figures.build_figures` gives them; a missing figure
        is left out.

    Raises
    ------
    topovet.report.svg.UnsafeSvgError
        A figure holds something other than plain drawing.
    """
    environment = page_environment()
    template = environment.get_template("report.html.j2")
    return template.render(
        m=material,
        v=material.verdict,
        figures={name: inline_svg(name, svg) for name, svg in figures.items()},
        words=class_words(material.verdict),
        predicate=words.predicate(material.verdict),
        grounds=words.grounds(material),
        untested=words.untested(material),
        radius_note=words.radius_note(material.verdict),
        certificate=certificate_lines(material),
        error_rows=error_rows(material.verdict),
        grade_rules=RULES,
        node_count=words.node_count(material.verdict),
        node_names=words.NODE_NAMES,
        causes=sort_causes(material.verdict.diagnosis.causes),
        answer_words=ANSWERS,
        agreement_words=AGREEMENT,
        nouns=_mended_nouns(material.verdict),
        flags=sorted(material.verdict.flags, key=_worst_first),
        cautions=handling_cautions(material.crystal.symbols),
        cell=_cell(material),
        many_atoms=len(material.crystal.symbols) > _MANY_ATOMS,
        slowest=_slowest(material.tasks),
        nearest_tipping_mev=nearest_mev(material.verdict),
        companion=companion_line(material.verdict),
        near_mev=NEAR_MEV,
        colours=page_colours(),
        fonts=FONTS,
    )


@functools.cache  # to compile the templates takes longer than to fill them
def page_environment() -> jinja2.Environment:
    """Templates with everything escaped, and the filters that pages share."""
    environment = jinja2.Environment(
        loader=jinja2.PackageLoader("topovet.report"),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        finalize=_finalize,
    )
    environment.filters |= {
        "ev": notation.ev,
        "ev_number": notation.ev_number,
        "mev": notation.mev,
        "mev_number": notation.mev_number,
        "angstrom": notation.angstrom,
        "sig": notation.significant,
        "seconds": notation.seconds,
        "k": notation.k_text,
        "z2": notation.z2_text,
        "signed": notation.signed,
        "sentence": _capitalised,
        "formula": formula_markup,
        "prose": prose_markup,
        "evidence_name": evidence_name,
        "evidence_value": evidence_value,
        "status_words": words.status_words,
        "indicator_name": indicator_name,
        "indicator_note": indicator_note,
        "open_z2": open_z2,
        "indicator_group_name": band_reps.indicator_group_name,
        "indicator_value": band_reps.indicator_value,
        "limit_text": band_reps.limit_text,
        "set_words": band_reps.set_words,
        "band_rep_reading": band_reps.reading,
        "band_rep_note": band_reps.witness_note,
        "crossing_sentences": band_path.crossing_sentences,
        "plain_segments": band_path.plain_segments,
        "tabled_segments": band_path.tabled_segments,
        "connection_rows": band_path.connection_rows,
        "kinds_text": band_path.kinds_text,
        "end_level": band_path.end_text,
        "allowed_rows": allowed.allowed_rows,
        "combination_table": allowed.combination_table,
        "counted_any": allowed.counted_any,
        "n_m": _mirror_symbol,
        "direction": direction,
        "cause_name": cause_name,
        "map_middle": middle_text,
    }
    environment.globals["advice"] = advice_sections
    environment.globals["allowed_cannot_say"] = allowed.CANNOT_SAY
    return environment


def _finalize(value: Any) -> Any:
    """Last step before escaping: strings of a case lose their unprintable characters."""
    return (
        value
        if isinstance(value, Markup) or not isinstance(value, str)
        else notation.printable(value)
    )


def formula_markup(formula: str) -> Markup:
    """A chemical formula with its numbers as subscripts."""
    pieces = re.split(r"(\d+)", notation.one_line(formula))
    return Markup("").join(
        Markup("<sub>{}</sub>").format(piece) if piece.isdigit() else escape(piece)
        for piece in pieces
    )


def prose_markup(text: str) -> Markup:
    """Plain paragraphs, dashed lists and `code` of an advice page, everything else escaped."""
    blocks = re.split(r"\n\s*\n|\n(?=- )", text.strip())
    html, in_list = [], False
    for block in blocks:
        item = block.startswith("- ")
        if item != in_list:
            html.append(Markup("<ul>") if item else Markup("</ul>"))
            in_list = item
        body = _inline(block.removeprefix("- "))
        html.append(Markup("<li>{}</li>" if item else "<p>{}</p>").format(body))
    if in_list:
        html.append(Markup("</ul>"))
    return Markup("").join(html)


def _inline(text: str) -> Markup:
    pieces = re.split(r"[`*]([^`*]+)[`*]", " ".join(text.split()))
    return Markup("").join(
        Markup("<code>{}</code>").format(piece) if i % 2 else escape(piece)
        for i, piece in enumerate(pieces)
    )


def evidence_name(key: str) -> str:
    """A name of evidence for people: the unit at its end set off, underscores as blanks."""
    stem, _, last = key.rpartition("_")
    unit = _UNITS.get(last.lower())
    if not stem or unit is None:
        return key.replace("_", " ")
    return f"{stem.replace('_', ' ')} ({unit})"


def evidence_value(value: Any) -> str:
    """A value of evidence: numbers to four significant digits, lists with commas."""
    if value is None:
        return "not known"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        number = notation.significant(value, 4)
        return number.rstrip("0").rstrip(".") if "." in number and "e" not in number else number
    if isinstance(value, list | tuple):
        return ", ".join(evidence_value(v) for v in value) or "none"
    return str(value).replace("-", "−") if isinstance(value, int) else str(value)


def _mirror_symbol(text: str) -> Markup:
    """n_M with its index set low."""
    return Markup("n<sub>M</sub>").join(escape(part) for part in text.split("n_M"))


def _capitalised(text: str) -> str:
    return text[:1].upper() + text[1:]


def _worst_first(flag: Flag) -> int:
    return -SEVERITIES.index(flag.severity)


def _cell(material: ReportMaterial) -> dict[str, Any]:
    """Lengths (angstrom), angles (degrees) and volume (or area) of the cell."""
    cell = material.crystal.cell
    lengths = np.linalg.norm(cell, axis=1)
    cosines = [cell[i] @ cell[j] / lengths[i] / lengths[j] for i, j in ((1, 2), (0, 2), (0, 1))]
    periodic = [cell[i] for i in range(3) if material.crystal.periodic[i]]
    flat = material.crystal.dimension == 2
    measure = np.linalg.norm(np.cross(*periodic)) if flat else abs(np.linalg.det(cell))
    return {
        "lengths": [float(x) for x in lengths],
        "angles": [float(np.degrees(np.arccos(np.clip(c, -1, 1)))) for c in cosines],
        "measure": float(measure),
        "measure_name": "area" if flat else "volume",
        "measure_unit": "Å²" if flat else "Å³",
    }


def _mended_nouns(verdict: Verdict) -> dict[str, str]:
    """What each class is called that the verdict would have with a cause mended."""
    mended = [cause.if_mended for cause in verdict.diagnosis.causes if cause.if_mended is not None]
    dimension = verdict.case.dimension
    return {m.class_: words_of_class(m.class_, "insulator", dimension).noun for m in mended}


def _slowest(tasks: tuple[TaskEntry, ...]) -> float:
    return max((t.seconds for t in tasks if t.seconds is not None), default=0.0) or 1.0


def page_colours() -> dict[str, str]:
    """The palette as CSS variables, so that pages and figures share one list."""
    return {
        name.lower().replace("_", "-"): value
        for name, value in vars(palette).items()
        if name.isupper() and isinstance(value, str)
    }
