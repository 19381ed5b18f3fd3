"""Groups of bands below lower gaps: which are looked at, and what is said of each."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from chern_models import hofstadter, layered_bhz
from lattice_models import LatticeModel, bhz, wilson_dirac
from topovet.invariants.lower_groups import (
    Ground,
    LowerGroups,
    compute_lower_groups,
    open_fillings,
)
from topovet.model.fourier import build_bloch_sum
from topovet.spectrum.eigen import mesh_eigenvalues
from topovet.symmetry.inversion import build_inversion


def groups_of(
    model: LatticeModel,
    filling: int,
    asked: tuple[int, ...] | None = None,
    *,
    reversal: bool = True,
) -> LowerGroups:
    bloch = build_bloch_sum(model.tight_binding())
    flat = [8 if p else 1 for p in model.crystal.periodic]
    mesh = mesh_eigenvalues(bloch, (flat[0], flat[1], flat[2]), even=reversal)
    inversion = None
    if reversal:
        inversion = build_inversion(model.basis, model.crystal, np.array(model.centre))
    ground = Ground(bloch, model.crystal.periodic, reversal and model.spinful, reversal, inversion)
    return compute_lower_groups(ground, mesh, filling, asked)


def test_a_lower_gap_has_the_indices_of_the_model_below_it() -> None:
    """All bands but the flat ones filled: the strong phase sits below the lower of two gaps."""
    found = groups_of(wilson_dirac(m=-2.0), 4)
    (group,) = found.groups
    assert (group.filling, group.status) == (2, "ok")
    assert group.parity_z2 == group.wilson_z2 == (1, 0, 0, 0)
    assert group.z4 in (1, 3)
    assert group.direct_gap_ev == pytest.approx(2.0, abs=0.01)  # 2 (3 - |m|) at Gamma
    assert found.n_closed == 2  # 1 and 3: half a Kramers pair


@pytest.mark.parametrize(("m", "nu"), [(2.0, 1), (9.0, 0)])
def test_in_two_dimensions(m: float, nu: int) -> None:
    (group,) = groups_of(bhz(m=m), 4).groups
    assert group.parity_z2 == group.wilson_z2 == (nu,)
    assert group.z4 is None


@pytest.mark.parametrize(("p", "q"), [(1, 5), (2, 7)])
def test_chern_numbers_of_all_lower_hofstadter_gaps(p: int, q: int) -> None:
    """Thouless et al. 1982: r = q s + p t for the lowest r bands."""
    found = groups_of(hofstadter(p=p, q=q, filling=q - 1), q, reversal=False)
    for group in found.groups:
        (t,) = (t for t in range(-(q // 2), q // 2 + 1) if (group.filling - p * t) % q == 0)
        assert (group.status, group.chern) == ("ok", (t,))
    assert [group.filling for group in found.groups] == list(range(1, q))


def test_named_numbers_may_be_closed() -> None:
    """p of j = 3/2 is four-fold degenerate: no gap above six of eight bands."""
    found = groups_of(wilson_dirac(m=-2.0), 8, (6, 2, 2))
    assert [g.filling for g in found.groups] == [2, 6]
    closed = found.groups[1]
    assert closed.status == "closed"
    assert "comes down to" in closed.reason
    assert closed.wilson_z2 is closed.parity_z2 is None


def test_numbers_without_a_gap_to_ask_about() -> None:
    with pytest.raises(ValueError, match="no gap above 8 of 8"):
        groups_of(wilson_dirac(m=-2.0), 8, (8,))


def test_witnesses_that_differ_are_said_to() -> None:
    """With an inversion that calls every state even the Wilson loops do not agree."""
    model = layered_bhz(m=1.5)
    true = build_inversion(model.basis, model.crystal, np.array([0.0, 0.0, 0.0]))
    all_even = replace(true, matrix=np.eye(6))
    bloch = build_bloch_sum(model.tight_binding())
    mesh = mesh_eigenvalues(bloch, (8, 8, 8), even=True)
    ground = Ground(bloch, (True, True, True), True, True, all_even)
    (group,) = compute_lower_groups(ground, mesh, 4, (2,)).groups
    assert group.status == "disagree"
    assert (group.parity_z2, group.wilson_z2) == ((0, 0, 0, 0), (0, 0, 0, 1))


def test_the_widest_gaps_come_first() -> None:
    energies = np.zeros((1, 1, 1, 8)) + np.array([0, 0, 1.0, 1.0, 5.0, 5.0, 5.0, 5.0])
    assert open_fillings(energies, 8, kramers=True) == (4, 2)
    assert open_fillings(energies, 4, kramers=True) == (2,)
    assert open_fillings(energies, 2, kramers=True) == ()
