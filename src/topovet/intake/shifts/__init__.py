"""Wannier centres and `_wsvec.dat` go in; Wigner-Seitz shifts and H(R) with them come out."""
