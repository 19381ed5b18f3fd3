"""Band representations of the first-principles cases against the plane-wave side and textbooks."""

from __future__ import annotations

import numpy as np
import pytest

from real_cases import reference
from real_operators import operated
from topovet.invariants.band_reps.results import ATOMIC, STABLE, BandRepWitness
from topovet.invariants.band_reps.witness import GroupInUse, compute_band_rep_witness
from topovet.symmetry.bandreps.layers import find_layer

pytestmark = pytest.mark.real_data


def _witness(case: str) -> BandRepWitness:
    of_case = operated(case)
    unitary = tuple(o for o in of_case.operators if not o.antiunitary)
    layer = find_layer(of_case.crystal)
    group = GroupInUse(unitary, case, len(unitary), time_reversal=True, spinful=True, layer=layer)
    return compute_band_rep_witness(of_case.bloch, group, of_case.crystal, of_case.filling)


@pytest.mark.parametrize(
    "case", ["PbTe", "Sb2Se3", "Sb2Se3_compressed", "Bi2Se3_mlwf", "Bi111_bilayer"]
)
def test_indices_are_those_of_plane_wave_parities(case: str) -> None:
    """nu of the Wannier bands from <psi|P|psi> of the first-principles spinors."""
    expected = reference(case, "dft_parity.json")["indices_wannier_occupied"]
    found = _witness(case)
    assert found.status == "ok", found.reason
    assert list(found.occupied.z2) == expected
    assert found.occupied.classification == (STABLE if any(expected) else ATOMIC)
    assert found.occupied.obstructed is (None if any(expected) else False)


def test_silicon_is_bonds_between_atoms() -> None:
    """Charge on the bond centres, where no atom sits: the textbook's covalent bond, and an
    obstructed atomic limit (Bradlyn et al., Nature 547, 298 (2017), from memory)."""
    found = _witness("Si")
    assert found.occupied.classification == ATOMIC
    assert found.occupied.obstructed is True
    # Gamma6+, Gamma7+ and Gamma8+ run into Lambda6 three times and Lambda4,5 once (Elliott, Phys.
    # Rev. 96, 280 (1954), from memory), and into either kind of Delta twice
    lines = {(x.start, x.end, x.symmetry): sorted(x.counts) for x in found.lines}
    assert lines["Γ", "L", "3m"] == [1, 3]
    assert lines["Γ", "X", "4mm"] == [2, 2]
    (bonds,) = found.occupied.atomic_limits
    assert (bonds.n_sites, bonds.site_symmetry, bonds.n_bands) == (4, "-3m", 8)
    crystal = operated("Si").crystal
    halves = 2 * (crystal.positions_frac.mean(axis=0) - bonds.site)
    assert np.abs(halves - np.round(halves)).max() < 1e-6


def test_cadmium_telluride_has_the_p_shell_of_tellurium() -> None:
    """F-43m has no inversion; S4 says nu0 = 0, as an ionic semiconductor should have it."""
    found = _witness("CdTe")
    assert found.indicator_group == (2,)
    assert found.occupied.z2 == (0, None, None, None)
    assert found.occupied.obstructed is False
    sites = {limit.site for limit in found.occupied.atomic_limits}
    assert sites == {(0.25, 0.25, 0.25)}  # j = 1/2 and 3/2 of the p shell of tellurium


def test_antimony_bilayer_is_three_bonds() -> None:
    """Free-standing Sb (111) is an ordinary insulator by the plane-wave parities; its charge is in
    the three covalent bonds of each atom, at whose centres no atom sits."""
    expected = reference("Sb111_bilayer", "dft_parity.json")["indices_wannier_occupied"]
    found = _witness("Sb111_bilayer")
    assert found.indicator_group == (2,)
    assert list(found.occupied.z2) == expected
    assert found.occupied.obstructed is True
    (bonds,) = found.occupied.atomic_limits
    assert (bonds.n_sites, bonds.site_symmetry, bonds.on_atoms) == (3, "2/m", False)
