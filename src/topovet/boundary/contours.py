"""Constant-energy contours of a cone: Fermi momentum, velocity, area, cyclotron mass, spin."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.interpolate import CubicSpline

from topovet.arrays import FloatArray
from topovet.boundary.cone import Branches, k_around
from topovet.boundary.cone_results import Contour, KramersPair
from topovet.boundary.layers import LayerStack, principal_blocks
from topovet.boundary.levels import NEGLIGIBLE_EV
from topovet.boundary.many_energies import FaceDensity, face_densities
from topovet.boundary.recut import Recut
from topovet.spectrum.eigen import map_threads
from topovet.units import HBAR2_OVER_ELECTRON_MASS

SPIN_BROADENING_EV = 2e-3
"""Imaginary part of the energy at which the spin of a state is taken."""

REVERSED = np.array([1.0, 1.0, -1.0])
"""At -k the state is the time-reversed one: its spin is opposite, and so are k and the turn."""

SLOPE_STEP_EV = 2e-3
"""Half of the energy difference that the cyclotron mass is taken from."""


class BandCurves:
    """The two bands of a cone as smooth curves along each azimuth."""

    def __init__(self, branches: Branches, pair: KramersPair) -> None:
        self._start = pair.energy_ev
        self._upper = [_Curve.through(branches.k_ang, e, self._start) for e in branches.upper_ev]
        self._lower = [_Curve.through(branches.k_ang, e, self._start) for e in branches.lower_ev]

    def contour_at(self, energy_ev: float) -> Contour | None:
        """The contour of the band that has this energy, without spin.

        None where it is not closed within the part that was followed: along some azimuth the band
        is among bulk states by then, or it turned back before.
        """
        found = self._radii(energy_ev)
        nearby = [self._radii(energy_ev + s * SLOPE_STEP_EV) for s in (-1, 1)]
        if found is None or nearby[0] is None or nearby[1] is None:
            return None
        k, slope = found
        below, above = (_area(radii) for radii, _ in (nearby[0], nearby[1]))
        per_ev = (above - below) / (2 * SLOPE_STEP_EV)
        return Contour(
            energy_ev=float(energy_ev),
            k_ang=np.concatenate([k, k]),
            velocity_ev_ang=np.concatenate([slope, slope]),
            area_ang2=_area(k),
            mass_m_e=HBAR2_OVER_ELECTRON_MASS * per_ev / (2 * np.pi),
            spin=None,
        )

    def _radii(self, energy_ev: float) -> tuple[FloatArray, FloatArray] | None:
        """(n_theta,) where the band has the energy first, and its slopes there."""
        upper = energy_ev > self._start
        curves = self._upper if upper else self._lower
        found = [c.first_passage(energy_ev - self._start) for c in curves if c is not None]
        known = [f for f in found if f is not None]
        if len(known) < len(curves):
            return None
        return np.array([k for k, _ in known]), np.array([slope for _, slope in known])


def _area(k: FloatArray) -> float:
    """Trapezoidal rule over the turn, 1/angstrom^2: exact up to as many harmonics as azimuths."""
    return float(np.pi * np.mean(k**2))


@dataclass(frozen=True, slots=True, eq=False)
class _Curve:
    """Energy from the pair against distance: k, E at the points, and the spline through them."""

    k: FloatArray
    energy: FloatArray
    spline: CubicSpline

    @classmethod
    def through(cls, k_ang: FloatArray, band: FloatArray, start: float) -> _Curve | None:
        known = np.isfinite(band)
        k = np.concatenate([[0.0], k_ang[known]])
        energy = np.concatenate([[0.0], band[known] - start])
        return None if len(k) < 3 else cls(k, energy, CubicSpline(k, energy))

    def first_passage(self, energy: float) -> tuple[float, float] | None:
        """Where the curve first has the energy, and its slope there."""
        passed = np.flatnonzero(np.sign(energy) * (self.energy - energy) >= 0)
        if not len(passed) or passed[0] == 0:
            return None
        low, high = self.k[passed[0] - 1], self.k[passed[0]]
        inside = [k for k in self.spline.solve(energy, extrapolate=False) if low <= k <= high]
        return (float(inside[0]), float(self.spline(inside[0], 1))) if inside else None


def with_spin(
    stack: LayerStack,
    cut: Recut,
    branches: Branches,
    pair: KramersPair,
    contours: Sequence[Contour],
) -> tuple[Contour, ...]:
    """The contours with the spin of their states; the second half of a turn by time reversal."""
    if not stack.spinful:
        return tuple(contours)
    half = len(branches.azimuth_rad)
    spots = [
        (
            k_around(cut, pair, branches.azimuth_rad[i : i + 1], c.k_ang[i : i + 1])[0, 0],
            c.energy_ev,
        )
        for c in contours
        for i in range(half)
    ]

    def solve(spot: tuple[FloatArray, float]) -> FaceDensity:
        k, energy = spot
        inside, across = principal_blocks(stack.planes_at(k[None]))
        at = np.array([energy + 1j * SPIN_BROADENING_EV])
        both = face_densities(inside[0], across[0], at, stack.n_orb, negligible_ev=NEGLIGIBLE_EV)
        return both[pair.side]

    faces = map_threads(solve, spots)
    cartesian = np.array([spin_density(f)[0] / f.same.sum() for f in faces])
    cartesian = cartesian.reshape(len(contours), half, 3)
    frame = polar_frame(cut, pair, branches.azimuth_rad)
    local = np.einsum("cai,aji->caj", cartesian, frame)
    flipped = local * REVERSED
    return tuple(
        Contour(
            c.energy_ev,
            c.k_ang,
            c.velocity_ev_ang,
            c.area_ang2,
            c.mass_m_e,
            np.concatenate([a, b]),
        )
        for c, a, b in zip(contours, local, flipped, strict=True)
    )


def polar_frame(cut: Recut, pair: KramersPair, azimuth_rad: FloatArray) -> FloatArray:
    """(n_theta, 3, 3): outwards in k, along the turn, along the surface's normal; crystal's frame.

    The turn is counter-clockwise as seen from outside.
    """
    outward = np.asarray(cut.normal_cart) * (-1.0 if pair.side == 0 else 1.0)
    k = k_around(cut, pair, azimuth_rad, np.array([0.1]))[:, 0]
    k = k - np.array([*pair.k_par, 0.0][:2])
    if len(cut.axes) == 1:
        along = k[:, :1] * cut.cell[:1]
    else:
        along = k @ np.linalg.inv(cut.cell).T[:2]
        along = along - np.outer(along @ outward, outward)
    radial = along / np.linalg.norm(along, axis=1)[:, None]
    return np.stack(
        [radial, np.cross(outward, radial), np.broadcast_to(outward, radial.shape)], axis=1
    )


def spin_density(face: FaceDensity) -> FloatArray:
    """(n_e, 3) expectation of sigma times the density, 1/eV."""
    flip = face.flip.sum(axis=1)
    z = (face.same[:, 0::2] - face.same[:, 1::2]).sum(axis=1)
    return np.stack([2 * flip.real, 2 * flip.imag, z], axis=1)
