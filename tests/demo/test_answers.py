"""The right answers of the campaign, found again by plain loops that share nothing with the tool.

`sabotage.truth` follows hybrid Wannier charge centres on the H(R) themselves: no symmetry, no
orbitals, no parities.
"""

from __future__ import annotations

import numpy as np
import pytest

from sabotage.truth import Lattice, true_z2
from topovet.demo.campaign import COMPOUNDS
from topovet.demo.compound import Compound
from topovet.demo.draft import Draft

FILLING_BY_FERMI = {"GX-10": 2}
"""Compounds whose files state no filling: one of the two Kramers pairs of the model."""

NO_HAMILTONIAN_OF_ITS_OWN = ("GX-24", "GX-25")
"""Edited or cut: the answer is that of the compound before, which has been looked at."""

ANSWERED = [c for c in COMPOUNDS if c.z2 is not None and c.code not in NO_HAMILTONIAN_OF_ITS_OWN]


def _lattice(draft: Draft, *, in_blocks: bool) -> Lattice:
    h_r = draft.h_r / draft.degeneracies[:, None, None]
    if in_blocks:
        order = np.arange(draft.n_orb).reshape(2, -1).T.reshape(-1)
        h_r = h_r[:, order[:, None], order]
    x, y, z = (n > 1 for n in draft.mesh)
    return Lattice(draft.r_cells, h_r, (x, y, z))


@pytest.mark.parametrize("compound", ANSWERED, ids=lambda c: c.code)
def test_answer_is_found_again(compound: Compound) -> None:
    draft = compound.draft()
    filling = FILLING_BY_FERMI.get(compound.code) or int(draft.settings["filling"])
    lattice = _lattice(draft, in_blocks="spin-order-mismatch" in compound.flags)
    assert true_z2(lattice, filling) == compound.z2
