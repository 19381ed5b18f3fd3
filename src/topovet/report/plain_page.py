"""What stands in for a report that could not be made: the verdict as text on a page."""

from __future__ import annotations

from markupsafe import escape

from topovet.report.text import verdict_lines
from topovet.verdict.document import Verdict


def plain_page(verdict: Verdict) -> str:
    """A page that holds the lines of the terminal, and says that the report is missing."""
    name = escape(verdict.case.name)
    return (
        '<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">'
        f"<title>{name}: topovet dossier without its report</title></head><body>\n"
        f"<h1>{name}</h1>\n<p>The report could not be made; log.txt says why. The verdict is whole "
        "and stands in verdict.json. This is a fault of topovet, not of the case.</p>\n"
        f"<pre>{escape(verdict_lines(verdict))}</pre>\n</body></html>\n"
    )
