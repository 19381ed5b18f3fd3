"""Colours of figures and pages: few, told apart in every kind of colour vision and in grey.

Text colours keep a contrast of at least 4.5:1 on white and on the page's paper tint, marks at
least 3:1. No figure relies on colour alone: weight, filling, shape or words say the same.
"""

from __future__ import annotations

WHITE = "#ffffff"
PAPER = "#f5f3ee"
INK = "#1b2733"
MUTED = "#55606b"
RULE = "#c8cdd2"

FILLED = "#0b4a6f"
"""Filled bands, even parity, the positive sign."""

EMPTY = "#8f5a1c"
"""Empty bands."""

ODD = "#a8321a"
"""Odd parity, the negative sign, errors."""

FILLED_TINT = "#e4edf3"
GAP_TINT = "#f6e9c9"
FACE_TINT = "#eef1f3"

WARNING = "#7a5200"
ERROR = "#a3271b"
INFO = "#33566e"
GOOD = "#1f6045"

TEXT_COLOURS = (INK, MUTED, FILLED, EMPTY, ODD, WARNING, ERROR, INFO, GOOD)
"""Every colour that text is set in; a test holds them to their contrast."""
