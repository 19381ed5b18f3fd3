"""Hexagonal warping: found again where Fu's form holds, refused with a reason where it does not."""

from __future__ import annotations

import numpy as np
import pytest

from boundary_models import prepared
from lattice_models import SIGMA, LatticeModel, Terms, build_basis
from topovet.arrays import FloatArray
from topovet.boundary.cone import Branches, follow_cone
from topovet.boundary.cone_results import KramersPair
from topovet.boundary.warping import fit_warping, mirrors_of_surface
from topovet.model.crystal import Crystal

CENTRE = KramersPair(0, (0.0, 0.0), 0.0, 0.0, -1.0, 1.0)
THETA = np.pi * np.arange(6) / 6
K = np.linspace(0.02, 0.12, 6)
A, V, LAMBDA = 4.0, 2.0, 100.0
"""Lattice constant, angstrom; eV angstrom; eV angstrom^3."""


def _bands(*, across: bool = False, squeeze: float = 0.0, shape: int = 3) -> Branches:
    """Fu, PRL 103, 266801 (2009), doi:10.1103/PhysRevLett.103.266801, lambda = 128.

    The mirrors contain b'_1, theta = 0, unless they are to lie across.
    """
    wave = np.cos if across else np.sin
    half = np.sqrt((2.5 * K) ** 2 + 128.0**2 * K ** (2 * shape) * wave(3 * THETA[:, None]) ** 2)
    half = half * (1 + squeeze * np.cos(2 * THETA[:, None]))
    mean = 5.0 * K**2 - 90.0 * K**4
    return Branches(THETA, K, mean + half, mean - half)


def test_lambda_is_found_again_from_both_bands_and_from_one() -> None:
    for mirrors in ("along", "across"):
        made = _bands(across=mirrors == "across")
        both = fit_warping(made, CENTRE, mirrors, "")
        # v is read off at the first radius, where lambda adds little to it
        assert both.lambda_ev_ang3 == pytest.approx(128, rel=2e-3)
        assert (both.band, both.reason) == ("both", "")
        assert both.misfit_ev < 1e-4
    lost = np.where(K > 0.03, np.nan, made.lower_ev)
    one = fit_warping(Branches(THETA, K, made.upper_ev, lost), CENTRE, "across", "")
    assert one.band == "upper"
    assert one.lambda_ev_ang3 == pytest.approx(128, rel=2e-3)
    lost = np.where(K > 0.03, np.nan, made.upper_ev)
    one = fit_warping(Branches(THETA, K, lost, made.lower_ev), CENTRE, "across", "")
    assert one.band == "lower"
    assert one.lambda_ev_ang3 == pytest.approx(128, rel=2e-3)


@pytest.mark.parametrize(
    ("bands", "pair", "mirrors", "said"),
    [
        (_bands(squeeze=0.3), CENTRE, "along", "axis is broken"),
        (_bands(), CENTRE, "across", "farther apart in the mirror planes"),
        (_bands(shape=2), CENTRE, "along", "misses the bands"),
        (Branches(THETA, K, np.tile(K, (6, 1)), -np.tile(K, (6, 1))), CENTRE, "along", "round to"),
        (
            _bands(),
            KramersPair(0, (0.5, 0.0), 0.0, 0.0, -1.0, 1.0),
            "along",
            "centre of the surface",
        ),
        (_bands(), CENTRE, "", "no mirror"),
    ],
)
def test_what_is_not_of_this_form_is_refused(bands, pair, mirrors, said) -> None:
    found = fit_warping(bands, pair, mirrors, "no mirror")
    assert found.lambda_ev_ang3 is None
    assert said in found.reason


def test_a_band_that_is_lost_at_once_gives_nothing() -> None:
    made = _bands()
    lost = [np.where(K > 0.05, np.nan, e) for e in (made.upper_ev, made.lower_ev)]
    found = fit_warping(Branches(THETA, K, *lost), CENTRE, "along", "")
    assert found.lambda_ev_ang3 is None
    assert "neither band" in found.reason


def _stacked_planes() -> LatticeModel:
    """Triangular planes whose surface has Fu's Hamiltonian on a lattice, exactly.

    H = sin k_z tau_y - cos k_z tau_z + tau_x h(k) + e(k), h = v (s_x sigma_y - s_y sigma_x) / a
    + r f sigma_z, with s = 2/3 sum_j u_j sin(a k.u_j) = a k + ... over three unit vectors at 120
    degrees and f = sum_j sin(a k.u_j) = -(a k)^3 cos(3 theta) / 8 + ...: lambda = r a^3 / 8. The
    zero mode of the chain along z is an eigenstate of tau_x, so that the surface has e ± |h|.
    """
    angles = 2 * np.pi * np.arange(3) / 3
    units = np.stack([np.cos(angles), np.sin(angles)], axis=1)
    tau_x, tau_y, tau_z = SIGMA
    terms, all_ = Terms(4), slice(0, 4)
    r = 8 * LAMBDA / A**3
    for (x, y), cell in zip(units, [(1, 0, 0), (0, 1, 0), (-1, -1, 0)], strict=True):
        h = V / A * 2 / 3 * (x * SIGMA[1] - y * SIGMA[0]) + r * SIGMA[2]
        terms.add(cell, all_, all_, np.kron(tau_x, h) / 2j - 0.1 * np.eye(4))
    terms.add((0, 0, 1), all_, all_, np.kron(tau_y / 2j - tau_z / 2, np.eye(2)))
    terms.add_onsite(all_, 0.6 * np.eye(4))
    r_cells, h_r = terms.arrays()
    cell = np.diag([A, A, 6.0])
    cell[1, :2] = A * units[1]
    crystal = Crystal(cell, ("Bi",), np.zeros((1, 3)))
    basis = build_basis([("Bi1", (0.0, 0.0, 0.0), "s"), ("Bi1", (0.0, 0.0, 0.0), "pz")])
    return LatticeModel("stacked", crystal, basis, r_cells, h_r, 2, True, (0.0, 0.0, 0.0))


def _threefold(*, mirror_normal_deg: float | None) -> FloatArray:
    """Point group of a threefold axis along z, with mirrors normal to an azimuth or without."""
    turns = []
    for t in 2 * np.pi * np.arange(3) / 3:
        turns.append(np.array([[np.cos(t), -np.sin(t), 0], [np.sin(t), np.cos(t), 0], [0, 0, 1]]))
    if mirror_normal_deg is None:
        return np.array(turns)
    m = np.radians(mirror_normal_deg)
    normal = np.array([np.cos(m), np.sin(m), 0.0])
    mirror = np.eye(3) - 2 * np.outer(normal, normal)
    return np.array([*turns, *(turn @ mirror for turn in turns)])


def test_lambda_of_a_lattice_model_with_an_exact_surface() -> None:
    cut, _, stack = prepared(_stacked_planes(), (0, 0, 1))
    found = follow_cone(stack, cut, 2, CENTRE)
    near = found.k_ang < 0.11  # beyond, the sines are no longer their third order
    cut_short = Branches(
        found.azimuth_rad, found.k_ang[near], found.upper_ev[:, near], found.lower_ev[:, near]
    )
    mirrors, reason = mirrors_of_surface(cut, _threefold(mirror_normal_deg=0.0))
    assert (mirrors, reason) == ("along", "")
    fitted = fit_warping(cut_short, CENTRE, mirrors, reason)
    assert fitted.lambda_ev_ang3 == pytest.approx(LAMBDA, rel=0.03)


def test_which_surfaces_have_the_symmetry() -> None:
    cut, _, _ = prepared(_stacked_planes(), (0, 0, 1))
    side, _, _ = prepared(_stacked_planes(), (1, 0, 0))
    mirrored = _threefold(mirror_normal_deg=0.0)
    assert mirrors_of_surface(cut, _threefold(mirror_normal_deg=90.0)) == ("across", "")
    assert "no mirror" in mirrors_of_surface(cut, _threefold(mirror_normal_deg=None))[1]
    sixfold = np.concatenate([mirrored, mirrored @ np.diag([-1.0, -1.0, 1.0])])
    for surface, group in ((side, mirrored), (cut, sixfold), (cut, np.eye(3)[None])):
        assert "no threefold axis" in mirrors_of_surface(surface, group)[1]
    assert "not known" in mirrors_of_surface(cut, None)[1]
