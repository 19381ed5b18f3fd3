"""Lattice models of the literature enter, an invented campaign of case folders leaves."""
