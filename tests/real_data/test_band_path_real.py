"""Connections along the path of first-principles silicon, against textbook band structures."""

from __future__ import annotations

import numpy as np
import pytest

from real_operators import operated
from topovet.invariants.band_irreps import compute_band_irreps
from topovet.invariants.band_reps.path import connect_path
from topovet.spectrum.path import compute_bands
from topovet.symmetry.bandreps.double_group import build_double_group

pytestmark = pytest.mark.real_data


def test_silicon_runs_as_in_the_textbook() -> None:
    """Gamma8+ at the top of the valence bands runs into Lambda6 and Lambda4,5, ending at the odd
    levels L6- and L4,5- that L3' splits into, and into both kinds of Delta, ending at X5 (Elliott,
    Phys. Rev. 96, 280 (1954); Chelikowsky and Cohen, PRB 14, 556 (1976), both from memory)."""
    case = operated("Si")
    unitary = [o for o in case.operators if not o.antiunitary]
    group = build_double_group(
        case.crystal.cell,
        np.array([o.rotation for o in unitary]),
        np.array([o.translation for o in unitary]),
        spinful=True,
    )
    irreps = compute_band_irreps(case.bloch, case.operators, case.crystal, spinful=True)
    bands = compute_bands(case.bloch, case.crystal)
    found = connect_path(group, unitary, case.bloch, bands, irreps, case.filling)
    by_ends = {(s.start, s.end): s for s in found.segments}
    assert max(s.error_mev for s in found.segments) < 0.1
    to_l = [c for c in by_ends["Γ", "L"].connections if c.start.first_band == 4]
    assert [c.start.label for c in to_l] == ["Γ4+", "Γ4+"]
    assert [(c.kind, c.end.label) for c in to_l] == [("2", "L2−"), ("1ab", "L1ab−")]
    to_x = [c for c in by_ends["Γ", "X"].connections if c.start.first_band == 4]
    assert {c.kind for c in to_x} == {"2a", "2b"}
    assert {(c.end.label, c.end.n_bands) for c in to_x} == {("X4±", 4)}
    assert all(c.settled for s in found.segments for c in s.connections)
