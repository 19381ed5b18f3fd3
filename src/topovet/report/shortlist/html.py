"""The shortlist as one HTML page: opens offline, asks no network, sorts and filters by itself.

Text of a case reaches the page in two ways only: through the template, escaped, and as JSON in a
data block, whose "<", ">" and "&" are written as escapes of JSON. The script sets text, never
markup, and the page's own policy admits no other script, style or request.
"""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Sequence
from importlib import resources
from typing import Any

import jinja2
from markupsafe import Markup

from topovet.notation import printable
from topovet.report.figures import palette
from topovet.report.figures.canvas import FONTS
from topovet.report.html import formula_markup
from topovet.report.shortlist.colours import DARK
from topovet.report.shortlist.records import TIERS, Candidate, Ranked, Shortlist
from topovet.units import KT_ROOM_MEV, MEV_PER_EV

PAGE_ROWS = (100, 250, 500)
"""Rows on a page of the table that can be chosen: thousands at once would sort slowly."""


def render_shortlist(shortlist: Shortlist, *, base: str = "./") -> str:
    """The page as HTML text, the same for the same list.

    Parameters
    ----------
    shortlist
        What to show.
    base
        URL of the folder that the candidates' folders are relative to, ending in "/".
    """
    style, script = _style(), _resource("shortlist.js")
    return (
        _environment()
        .get_template("shortlist.html.j2")
        .render(
            s=shortlist,
            base=base,
            style=Markup(style),
            script=Markup(script),
            policy=_policy(style, script),
            data=_data_block(page_data(shortlist, base)),
            counted=counted(shortlist),
            open_groups=open_groups(shortlist.rows),
            page_rows=PAGE_ROWS,
        )
    )


def page_data(shortlist: Shortlist, base: str) -> dict[str, Any]:
    """What the script of the page works on; energies in meV."""
    return {
        "kT": KT_ROOM_MEV,
        "pageRows": PAGE_ROWS,
        "rows": [_row(row, base) for row in shortlist.rows],
    }


def report_link(candidate: Candidate, base: str) -> str:
    """URL of the dossier's page; empty where there is none."""
    return f"{base}{candidate.link}/report.html" if candidate.has_report else ""


def counted(shortlist: Shortlist) -> str:
    """How many cases of which kind, in words."""
    words = {
        "nontrivial": "nontrivial",
        "trivial": "trivial by the indices computed",
        "metal": "metallic",
        "undetermined": "undetermined",
    }
    said = [f"{grouped(n)} {words[tier]}" for tier in TIERS if (n := shortlist.count(tier))]
    failed = len(shortlist.failures)
    if failed:
        said.append(f"{grouped(failed)} could not be vetted")
    return ", ".join(said) or "no case passes the filters"


def grouped(number: int) -> str:
    """A count with commas at the thousands."""
    return f"{number:,}"


def open_groups(rows: Sequence[Ranked]) -> tuple[tuple[str, str, tuple[Ranked, ...]], ...]:
    """Cases to look into: (heading, explanation, rows), groups without rows left out."""
    disagree = [r for r in rows if r.candidate.agreement == "disagree"]
    others = [r for r in rows if r.tier == "undetermined" and r not in disagree]
    doubtful = [
        r
        for r in rows
        if r.tier != "undetermined" and any(c.answer != "no" for c in r.candidate.causes)
    ]
    groups = (
        (
            "Witnesses disagree",
            "Independent methods contradict each other. Nothing is asserted about these cases.",
            tuple(disagree),
        ),
        (
            "Undetermined for other reasons",
            "No conclusion is carried by the tests that were made. This says nothing about the "
            "materials themselves.",
            tuple(others),
        ),
        (
            "Verdicts with a diagnosed doubt",
            "The verdict stands; a cause of doubt was looked into and not ruled out.",
            tuple(doubtful),
        ),
    )
    return tuple(group for group in groups if group[2])


def _row(row: Ranked, base: str) -> dict[str, Any]:
    c = row.candidate
    return {
        "rank": row.rank,
        "tier": row.tier,
        "merit": row.merit,
        "parts": [[p.name, p.points, p.weight, p.value is not None] for p in row.parts],
        "reasons": list(row.reasons),
        "name": printable(c.name),
        "link": report_link(c, base),
        "formula": printable(c.formula),
        "elements": None if c.elements is None else list(c.elements),
        "group": None if c.space_group is None else [c.space_group[0], c.space_group[1]],
        "dimension": c.dimension,
        "class": c.class_,
        "title": c.title,
        "indices": c.indices,
        "agreement": c.agreement,
        "grade": c.grade,
        "direct": _in_mev(c.gaps.direct_ev),
        "proved": _in_mev(c.gaps.proved_ev),
        "indirect": _in_mev(c.gaps.indirect_ev),
        "radius": c.radius_mev,
        "flags": [[f.code, f.severity, f.summary] for f in c.flags],
    }


def _in_mev(value: float | None) -> float | None:
    return None if value is None else value * MEV_PER_EV


def _data_block(data: dict[str, Any]) -> Markup:
    """JSON that no HTML parser can be led out of: no "<", ">" or "&", plain ASCII."""
    text = json.dumps(data, allow_nan=False, separators=(",", ":"))
    for character in "<>&":
        text = text.replace(character, f"\\u{ord(character):04x}")
    return Markup(text)


def _environment() -> jinja2.Environment:
    environment = jinja2.Environment(
        loader=jinja2.PackageLoader("topovet.report"),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        finalize=_finalize,
    )
    environment.filters |= {"formula": formula_markup, "grouped": grouped}
    environment.globals["report_link"] = report_link
    return environment


def _finalize(value: Any) -> Any:
    plain = isinstance(value, Markup) or not isinstance(value, str)
    return value if plain else printable(value)


def _policy(style: str, script: str) -> str:
    """Content security policy: this style, this script, nothing else, no request."""
    return (
        f"default-src 'none'; style-src '{_digest(style)}'; script-src '{_digest(script)}'; "
        "base-uri 'none'; form-action 'none'"
    )


def _digest(text: str) -> str:
    return "sha256-" + base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()


def _style() -> str:
    light = {
        name.lower().replace("_", "-"): value
        for name, value in vars(palette).items()
        if name.isupper() and isinstance(value, str)
    }
    return (
        f":root {{ {_variables(light)} --fonts: {FONTS}; }}\n"
        f"@media screen and (prefers-color-scheme: dark) {{ :root {{ {_variables(DARK)} }} }}\n"
        + _resource("shortlist.css")
    )


def _variables(colours: dict[str, str]) -> str:
    return " ".join(f"--{name}: {value};" for name, value in colours.items())


def _resource(name: str) -> str:
    return resources.files("topovet.report").joinpath("templates").joinpath(name).read_text("utf-8")
