"""Chern numbers of planes: evidence, agreement of the two counts, refusals; mirror planes."""

from __future__ import annotations

import numpy as np
import pytest

from chern_models import chern_stack, haldane, qi_wu_zhang, snte, snte_mirror
from lattice_models import LatticeModel, kane_mele
from model_changes import with_home_cells
from topovet.arrays import ComplexArray, FloatArray
from topovet.invariants.chern import compute_chern, compute_chern_plane
from topovet.invariants.mirror_chern import compute_mirror_chern, mirror_planes
from topovet.invariants.results import ChernPlane, ChernWitness
from topovet.invariants.wilson_sheet import SheetCriteria
from topovet.model.fourier import build_bloch_sum
from topovet.model.plane import KPlane, coordinate_plane


def chern_of(model: LatticeModel, criteria: SheetCriteria | None = None) -> ChernWitness:
    bloch = build_bloch_sum(model.tight_binding())
    return compute_chern(bloch, model.filling, model.crystal.periodic, criteria)


def plane_of(model: LatticeModel, plane: KPlane) -> ChernPlane:
    return compute_chern_plane(build_bloch_sum(model.tight_binding()), plane, model.filling)


def test_a_plane_carries_its_evidence() -> None:
    plane = plane_of(haldane(m=0.2), coordinate_plane(2, 0.0))
    assert plane.status == "ok"
    assert plane.chern == plane.winding == plane.plaquettes
    assert plane.chern in (1, -1)
    assert 0 < plane.largest_flux < np.pi / 2
    assert plane.flow_across[0] == 0.0
    assert plane.flow_across[-1] == 1.0
    np.testing.assert_array_equal(plane.flow_hwcc[0], plane.flow_hwcc[-1])


def test_turning_the_plane_turns_the_sign() -> None:
    model, where = qi_wu_zhang(m=1.0), coordinate_plane(2, 0.0)
    assert plane_of(model, where).chern == -1
    assert plane_of(model, where.turned()).chern == 1


@pytest.mark.parametrize("gap_ev", [0.1, 1e-2, 1e-3])
def test_narrow_gaps(gap_ev: float) -> None:
    """At m = 2 -+ gap/2 the cone at M decides between -1 and 0."""
    assert chern_of(qi_wu_zhang(m=2 - gap_ev / 2)).chern == (-1,)
    assert chern_of(qi_wu_zhang(m=2 + gap_ev / 2)).chern == (0,)


def test_a_closed_gap_is_unresolved() -> None:
    witness = chern_of(qi_wu_zhang(m=2.0))
    assert (witness.status, witness.chern) == ("unresolved", None)
    assert "the direct gap goes down to" in witness.reason


def test_a_budget_is_unresolved() -> None:
    witness = chern_of(haldane(), SheetCriteria(max_solves=100))
    assert (witness.status, witness.chern) == ("unresolved", None)
    assert "budget" in witness.reason


def test_vector_of_a_stack() -> None:
    witness = chern_of(chern_stack(m=1.0))
    assert witness.chern == (0, 0, -1)
    assert len(witness.by_direction) == 3


def test_weyl_points_between_planes_are_a_failure() -> None:
    """The layers' mass 0.2 + 0.4 cos kz changes sign: C3 = -1 at kz = 0 and +1 at 1/2."""
    witness = chern_of(chern_stack(m=0.2))
    assert (witness.status, witness.chern) == ("failed", None)
    assert "-1 at 0, 1 at 0.5" in witness.reason
    assert "the gap closes between them" in witness.reason


def test_time_reversal_makes_it_vanish() -> None:
    assert chern_of(kane_mele(lambda_r=0.05, lambda_v=0.1)).chern == (0,)


MIRROR_PLANE = KPlane("x=y", (0.0, 0.0, 0.0), (1, 1, 0), (0, 0, 1))
"""k_x = k_y of the face-centred cell: holds Gamma, one X and two L."""


def constant(matrix: ComplexArray) -> object:
    def mirror_at(k_frac: FloatArray) -> ComplexArray:
        return np.broadcast_to(matrix, (len(k_frac), *matrix.shape))

    return mirror_at


@pytest.mark.parametrize(
    ("rotation", "names"),
    [
        (np.diag([1, 1, -1]), ["(0 0 1) at 0", "(0 0 1) at 1/2"]),
        ([[0, 1, 0], [1, 0, 0], [0, 0, 1]], ["(1 -1 0) at 0"]),  # a1 <-> a2, any centred cell
        ([[0, -1, 0], [-1, 0, 0], [0, 0, 1]], ["(1 1 0) at 0"]),  # hexagonal
        ([[1, -1, 0], [0, -1, 0], [0, 0, 1]], ["(0 1 0) at 0"]),  # hexagonal
        ([[-1, 2, 1], [0, 1, 0], [0, 0, 1]], ["(2 -2 -1) at 0"]),  # a skew cell
    ],
)
def test_mirror_planes(rotation: list[list[int]], names: list[str]) -> None:
    """Every point of each plane comes back to itself up to G, and no third plane exists."""
    w = np.array(rotation)
    planes = mirror_planes(w)
    assert [plane.name for plane in planes] == names
    xy = np.random.default_rng(0).random((10, 2))
    for plane in planes:
        k_frac = plane.k_at(xy)
        g = k_frac @ w - k_frac
        np.testing.assert_allclose(g, np.round(g), atol=1e-12)
        assert np.gcd.reduce(np.cross(plane.across, plane.along)) == 1


def test_a_rotation_has_no_mirror_plane() -> None:
    with pytest.raises(ValueError, match="not a reflection"):
        mirror_planes(np.diag([-1, -1, 1]))


class TestMirror:
    BLOCH = build_bloch_sum(snte().tight_binding())

    def test_evidence(self) -> None:
        found = compute_mirror_chern(self.BLOCH, MIRROR_PLANE, constant(snte_mirror()), 6)
        assert found.status == "ok"
        assert found.plus is not None
        assert found.minus is not None
        assert found.plus.chern == -found.minus.chern
        assert (found.n_plus, found.n_minus) == (3, 3)
        assert found.purity == pytest.approx(1.0, abs=1e-9)
        assert found.violation_mev < 1e-9
        assert found.n_solves == found.plus.n_solves + found.minus.n_solves

    def test_opposite_sign_of_the_operator(self) -> None:
        one = compute_mirror_chern(self.BLOCH, MIRROR_PLANE, constant(snte_mirror()), 6)
        other = compute_mirror_chern(self.BLOCH, MIRROR_PLANE, constant(-snte_mirror()), 6)
        assert one.mirror_chern == -other.mirror_chern

    def test_states_of_another_gauge(self) -> None:
        """Orbitals of one site counted from another cell: D(k) then has phases in the plane."""
        home = np.repeat([[0, 0, 0], [1, -2, 1]], 6, axis=0)
        model = with_home_cells(snte(), home)
        mirrored = home[:, [1, 0, 2]]  # x <-> y changes the first two lattice vectors

        def mirror_at(k_frac: FloatArray) -> ComplexArray:
            phase = np.exp(2j * np.pi * k_frac @ (home - mirrored).T)
            return np.asarray(snte_mirror()[None] * phase[:, None, :])

        found = compute_mirror_chern(
            build_bloch_sum(model.tight_binding()), MIRROR_PLANE, mirror_at, 6
        )
        assert found.violation_mev < 1e-9
        assert abs(found.mirror_chern or 0) == 2

    def test_no_mirror_of_spinors(self) -> None:
        found = compute_mirror_chern(self.BLOCH, MIRROR_PLANE, constant(np.eye(12)), 6)
        assert (found.status, found.mirror_chern) == ("not-applicable", None)

    def test_a_plane_the_mirror_does_not_keep(self) -> None:
        found = compute_mirror_chern(
            self.BLOCH, coordinate_plane(0, 0.0), constant(snte_mirror()), 6
        )
        assert (found.status, found.mirror_chern) == ("failed", None)
        assert found.violation_mev > 100

    def test_a_filling_without_a_gap(self) -> None:
        found = compute_mirror_chern(self.BLOCH, MIRROR_PLANE, constant(snte_mirror()), 5)
        assert found.mirror_chern is None
        assert found.status in ("failed", "unresolved")
