"""The palette of the pages in the dark: names of `topovet.report.figures.palette`, other values.

Text keeps a contrast of at least 4.5:1 on the sheet and on the paper around it.
"""

from __future__ import annotations

DARK = {
    "white": "#1b2229",
    "paper": "#12171c",
    "ink": "#e7ebee",
    "muted": "#a6b1bb",
    "rule": "#3a4650",
    "filled": "#84bce0",
    "empty": "#dba566",
    "odd": "#f0907a",
    "filled-tint": "#24323d",
    "gap-tint": "#3b331f",
    "face-tint": "#252d35",
    "warning": "#e2b862",
    "error": "#f29388",
    "info": "#98bdd6",
    "good": "#82cba7",
}
"""By the names of the CSS variables."""
