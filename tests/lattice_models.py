"""The lattice models of the literature under the name that the tests use.

They live in the package, where the demo is made of them. What they are is settled by papers:
`tests/published` compares them with those, `LatticeModel.hamiltonian_at` sums over R in a plain
loop of its own.
"""

from __future__ import annotations

from topovet.demo.crystal_models import atomic_insulator, fu_kane_mele
from topovet.demo.dirac_models import wilson_dirac
from topovet.demo.lattice import (
    HARMONICS,
    SIGMA,
    VACUUM_ANGSTROM,
    LatticeModel,
    Terms,
    bonds,
    build_basis,
    honeycomb_cell,
    two_steps,
)
from topovet.demo.planar_models import bhz, kane_mele

__all__ = [
    "HARMONICS",
    "SIGMA",
    "VACUUM_ANGSTROM",
    "LatticeModel",
    "Terms",
    "atomic_insulator",
    "bhz",
    "bonds",
    "build_basis",
    "fu_kane_mele",
    "honeycomb_cell",
    "kane_mele",
    "two_steps",
    "wilson_dirac",
]
