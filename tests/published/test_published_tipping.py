"""Tipping points of lattice models against the transitions that their papers give in closed form.

Sources are in the docstrings of `lattice_models`; each test names the equation it stands on.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from deformation_ends import end_of
from lattice_models import (
    LatticeModel,
    atomic_insulator,
    bhz,
    fu_kane_mele,
    kane_mele,
    wilson_dirac,
)
from spinless_companions import without_spin
from tipping_searches import by_gap, by_parity
from topovet.deformation.companion import compare_companion, coupling_between
from topovet.invariants.tipping.by_gap import BRACKET, GapGround, _at_the_end
from topovet.invariants.tipping.by_parity import trim_stars
from topovet.invariants.tipping.closing import Closing
from topovet.invariants.tipping.results import BY_GAP, SHIFT
from topovet.invariants.tipping.search import Parameter, projector_sum
from topovet.model.fourier import build_bloch_sum
from topovet.model.orbital_groups import OrbitalGroup
from topovet.spectrum.eigen import mesh_eigenvalues
from topovet.spectrum.gap import sample_gap
from topovet.symmetry.trim import trim_points

GAMMA = ((0.0, 0.0, 0.0),)
CORNER = (1 / 3, 1 / 3, 0.0)


@pytest.mark.parametrize("mass", [0.5, 0.8])
def test_bhz_tips_where_the_levels_at_gamma_cross(mass: float) -> None:
    """E1 is at m and H1 at -m at Gamma: they meet if s moves by -2m (Science 314, 1757 (2006))."""
    points = by_parity(bhz(m=mass))
    down, up = points["Hg s", "down"], points["Hg s", "up"]
    assert down.critical == pytest.approx(-2 * mass, abs=2e-6)
    assert (down.k, down.z2_before, down.z2_after) == (GAMMA, (1,), (0,))
    assert up.outcome == "holds"  # the levels at X are 2 (4b - m) = 7 eV apart
    assert up.searched_to == 2.0


@pytest.mark.parametrize(
    ("m", "direction", "critical", "after"),
    [(-2.6, "down", -0.8, (0, 0, 0, 0)), (-1.6, "up", 1.2, (0, 1, 1, 1))],
)
def test_wilson_dirac_tips_where_a_mass_vanishes(
    m: float, direction: str, critical: float, after: tuple[int, ...]
) -> None:
    """Masses m + (3 - 2n) c: s and p meet at Gamma for x = -2 (m + 3c), at X for -2 (m + c)."""
    point = by_parity(wilson_dirac(m=m))["Bi s", direction]
    assert point.critical == pytest.approx(critical, abs=2e-6)
    assert (point.outcome, point.z2_before, point.z2_after) == ("flips", (1, 0, 0, 0), after)


def test_stars_of_the_trim_under_a_threefold_axis() -> None:
    """Gamma, three X, three M and R of the simple cubic zone."""
    cyclic = np.array([np.eye(3), [[0, 1, 0], [0, 0, 1], [1, 0, 0]]], dtype=int)
    star = trim_stars(trim_points((True, True, True)), cyclic)
    sets = [np.flatnonzero(star == s).tolist() for s in dict.fromkeys(star.tolist())]
    assert sets == [[0], [1, 2, 4], [3, 5, 6], [7]]


def test_stars_that_exchange_states_at_one_value_are_told_together() -> None:
    """Flat bands of CsCl: the cation's s meets the anion's p at Gamma and at all M at once, by
    exp(2 pi i k.(1,1,1)) odd where s is even (Fu and Kane 2007, their argument for an origin)."""
    model = atomic_insulator(gap_ev=2.0, hop=0.05)
    point = by_parity(model)["Cs s", "down"]
    m_points = {(0.0, 0.5, 0.5), (0.5, 0.0, 0.5), (0.5, 0.5, 0.0)}
    assert set(point.k) == {*GAMMA, *m_points}
    assert (point.outcome, point.z2_after, point.z4_after) == ("exchange", (0, 0, 0, 0), 0)
    assert point.n_exchanged == -2


def named(model: LatticeModel, *elements: str) -> LatticeModel:
    """The model with other elements on its sites."""
    labels = tuple(
        f"{elements[i // (model.n_orb // len(elements))]}1 {label.partition(' ')[2]}"
        for i, label in enumerate(model.basis.labels)
    )
    crystal = replace(model.crystal, symbols=elements)
    return replace(model, crystal=crystal, basis=replace(model.basis, labels=labels))


def test_kane_mele_tips_at_three_root_three() -> None:
    """nu = 1 for |lambda_v| < 3 sqrt(3) lambda_so (PRL 95, 146802 (2005)); a sublattice that moves
    by x has lambda_v = x/2, and a scale s of lambda_so tips at lambda_v = 3 sqrt(3) s lambda_so."""
    edge, lambda_v = 3 * np.sqrt(3) * 0.06, 0.1
    points = by_gap(named(kane_mele(lambda_v=lambda_v), "B", "N"), (1,), CORNER)
    up, down = points["B pz"[:3], "up"], points["B pz"[:3], "down"]
    assert up.critical == pytest.approx(2 * (edge - lambda_v), abs=1e-4)
    assert down.critical == pytest.approx(-2 * (edge + lambda_v), abs=1e-4)
    assert [p.z2_after for p in (up, down)] == [(0,), (0,)]
    scaled = points["", "down"]
    assert scaled.critical == pytest.approx(lambda_v / edge, abs=1e-4)
    assert scaled.z2_after == (0,)
    assert points["", "up"].outcome == "holds"


def test_a_missed_closing_is_enclosed_by_the_indices() -> None:
    """As if the gap had never been met closed on the way to a shift of 1 eV."""
    model = named(kane_mele(lambda_v=0.1), "B", "N")
    bloch = build_bloch_sum(model.tight_binding())
    ground = GapGround(bloch, 2, model.crystal.periodic, (1,), np.array([CORNER]))
    change = projector_sum(np.array([1.0, 1.0, 0.0, 0.0]))
    start = Parameter(SHIFT, OrbitalGroup("B pz", (0, 1)), "N pz").start("up", BY_GAP)
    missed = Closing(None, CORNER, 1.0, True, 0.02, 0)
    point, _ = _at_the_end(ground, change, missed, 0.0, replace(start, z2_before=(1,)))
    assert point.critical == pytest.approx(2 * (3 * np.sqrt(3) * 0.06 - 0.1), abs=BRACKET)
    assert (point.outcome, point.z2_after) == ("flips", (0,))
    assert "enclosed by indices alone" in point.note


def test_spin_orbit_coupling_leaves_the_parities_of_diamond_alone() -> None:
    """In the Fu-Kane-Mele model it vanishes at the TRIM (PRL 98, 106803 (2007), Eq. 3); without it
    these parities have nodes (PRL 115, 036806 (2015)), which the plain sum over R meets."""
    points = by_parity(fu_kane_mele(lambda_so=0.05, dt=(0.4, 0, 0, 0)))
    assert set(points) == {("", "down"), ("", "up")}
    assert points["", "up"].outcome == "holds"
    down = points["", "down"]
    assert (down.outcome, down.critical, down.z2_after) == ("closes", 0.0, None)
    without = build_bloch_sum(fu_kane_mele(lambda_so=0.0, dt=(0.4, 0, 0, 0)).tight_binding())
    gap = sample_gap(without, mesh_eigenvalues(without, (8, 8, 8), even=True), 2)
    assert gap.direct_ev < 1e-4
    assert {p.z2_before for p in points.values()} == {(1, 1, 1, 1)}


@pytest.mark.parametrize(
    ("d0", "outcome", "critical", "after"),
    [(0.4, "closes", 0.0, None), (-0.2, "flips", 1 / 3, (0, 1, 1, 1))],
)
def test_diamond_beside_its_spinless_companion(
    d0: float, outcome: str, critical: float, after: tuple[int, ...] | None
) -> None:
    """A longer [111] bond makes 1;(111), a shorter one 0;(111), with the three X between (PRL 98,
    106803 (2007)): the bond of H0 x 1 + s (H - H0 x 1) is 1 + d0 + s (d - d0). By the parities of
    the companion with d0 = d the indices last until s = 0, where they have nodes."""
    model = fu_kane_mele(lambda_so=0.05, dt=(0.4, 0, 0, 0))
    companion = end_of(without_spin(fu_kane_mele(lambda_so=0.0, dt=(d0, 0, 0, 0))))
    assert compare_companion(end_of(model), companion, None, smallest_gap_ev=0.1).fits
    down = by_parity(model, coupling_between(end_of(model), companion, None))["", "down"]
    assert down.critical == pytest.approx(critical, abs=2e-6)
    assert (down.outcome, down.z2_before, down.z2_after) == (outcome, (1, 1, 1, 1), after)
