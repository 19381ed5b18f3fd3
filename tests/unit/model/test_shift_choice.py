"""Centres held against their sites: a common shift of origin is no fault of the centres."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from companion_files import hermitian_file, mesh_cells
from invented_findings import SOUND
from topovet.arrays import FloatArray
from topovet.intake.records import DeclaredOrbital
from topovet.model.crystal import Crystal
from topovet.model.declarations import Declarations
from topovet.model.shift_choice import ShiftProposal, propose_shifts

CELL = np.diag([4.0, 4.5, 5.0])
SITES = np.array([[0.0, 0.0, 0.0], [0.4, 0.5, 0.45]])
GRID = (3, 3, 3)
FILE = hermitian_file(mesh_cells(GRID).tolist(), 2)


def declared(sites: FloatArray = SITES) -> Declarations:
    orbitals = tuple(
        DeclaredOrbital((float(x), float(y), float(z)), n, 0, 1)
        for n, (x, y, z) in enumerate(sites)
    )
    crystal = Crystal(CELL, ("A", "B"), sites)
    return replace(SOUND.declared, crystal=crystal, mp_grid=GRID, orbitals=orbitals)


def propose(centres_frac: FloatArray) -> ShiftProposal:
    return propose_shifts(FILE, declared(), None, centres_frac @ CELL)


def test_centres_on_their_sites() -> None:
    found = propose(SITES + 0.01)
    assert found.suspects == ()
    assert found.origin_shift_frac is None
    assert found.mended is None


@pytest.mark.parametrize(
    "shift",
    [
        [0.2, 0.0, -0.1],
        [0.5, 0.0, 0.0],
        [-0.5, 0.0, 0.0],  # +1/2 and -1/2 are one shift of the lattice, not of the supercell
        [1.3, -2.0, 0.25],
    ],
)
def test_common_shift_makes_no_centre_suspicious(shift: list[float]) -> None:
    found = propose(SITES + np.array(shift))
    assert found.suspects == ()
    assert found.mended is None
    assert found.origin_shift_frac is not None
    apart = found.origin_shift_frac - np.array(shift)
    np.testing.assert_allclose(apart, np.round(apart), atol=1e-9)
    assert found.offsets_ang is not None
    np.testing.assert_allclose(found.offsets_ang, 0.0, atol=1e-6)


def test_shifts_do_not_notice_a_common_shift() -> None:
    """They rest on differences of centres."""
    here, there = propose(SITES + 0.01).given, propose(SITES + np.array([0.21, 0.01, 0.01])).given
    assert here is not None
    assert there is not None
    np.testing.assert_array_equal(here.shifts, there.shifts)


def test_one_centre_astray_is_no_common_shift() -> None:
    centres = SITES.copy()
    centres[1] += [0.0, 0.5, 0.0]
    found = propose(centres)
    assert found.origin_shift_frac is None
    assert found.suspects == (1,)
    assert found.mended is not None
