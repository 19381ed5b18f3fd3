"""Closings of the gap go in; nodes and nodal lines with charges and what protects them come out."""
