"""Occupied subspaces and symmetry operators go in; topological indices of each witness come out."""
