"""The surface spectral density at constant energy around a Dirac point, bulk states included."""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.cone import k_around
from topovet.boundary.cone_results import Cone, EnergyMap
from topovet.boundary.contours import REVERSED, polar_frame, spin_density
from topovet.boundary.layers import LayerStack, principal_blocks
from topovet.boundary.many_energies import FaceDensity, face_densities
from topovet.boundary.recut import Recut
from topovet.boundary.spectral import NEGLIGIBLE_SHARE
from topovet.spectrum.eigen import map_threads

AZIMUTHS = 9
"""Over half a turn; time reversal gives the other half."""

RADII = 16
"""Besides the Dirac point itself."""

MARGIN = 1.4
"""The map reaches so many times as far as the outermost contour shown."""

SHARPNESS = 1.2
"""Broadening over what a state of the cone's slope disperses between two radii."""


def constant_energy_map(stack: LayerStack, cut: Recut, cone: Cone, energy_ev: float) -> EnergyMap:
    """Density and spin at the Dirac point's energy and at another one.

    Parameters
    ----------
    stack, cut
        The crystal by planes, and their cell.
    cone
        With a contour at `energy_ev`, which sets how far the map reaches.
    energy_ev
        The other energy.
    """
    pair = cone.pair
    outermost = max(float(c.k_ang.max()) for c in cone.contours if c.energy_ev == energy_ev)
    k_ang = MARGIN * outermost * np.arange(RADII + 1) / RADII
    azimuth = np.pi * np.arange(AZIMUTHS) / AZIMUTHS
    # as sharp as the radii allow for
    broadening = float(SHARPNESS * np.mean(cone.velocity_ev_ang) * k_ang[1])
    energies = (pair.energy_ev, float(energy_ev))
    shifted = np.array(energies) + np.complex128(1j * broadening)
    spots = k_around(cut, pair, azimuth, k_ang[1:]).reshape(-1, 2)
    spots = np.concatenate([k_around(cut, pair, azimuth[:1], k_ang[:1])[0], spots])

    def solve(k: FloatArray) -> FaceDensity:
        inside, across = principal_blocks(stack.planes_at(k[None]))
        negligible = 2 * NEGLIGIBLE_SHARE * broadening
        both = face_densities(inside[0], across[0], shifted, stack.n_orb, negligible_ev=negligible)
        return both[pair.side]

    faces = map_threads(solve, list(spots))
    density = _whole_turn(np.array([f.same.sum(axis=1) for f in faces]), np.array(1.0))
    spin = None
    if stack.spinful:
        frame = polar_frame(cut, pair, azimuth)
        cartesian = np.array([spin_density(f) for f in faces])
        turned = np.repeat(frame, RADII, axis=0)
        local = np.einsum("kei,kji->kej", cartesian, np.concatenate([frame[:1], turned]))
        spin = _whole_turn(local, REVERSED)
    return EnergyMap(
        side=pair.side,
        energies_ev=energies,
        azimuth_rad=np.concatenate([azimuth, azimuth + np.pi]),
        k_ang=k_ang,
        density=density,
        spin=spin,
        broadening_ev=broadening,
    )


def _whole_turn(values: FloatArray, reversed_: FloatArray) -> FloatArray:
    """(n_e, n_theta, n_k, ...) from the centre and half a turn, (1 + n n_k, n_e, ...)."""
    rest = values[1:].reshape(AZIMUTHS, RADII, *values.shape[1:])
    centre = np.broadcast_to(values[0], (AZIMUTHS, 1, *values.shape[1:]))
    half = np.concatenate([centre, rest], axis=1)
    whole = np.concatenate([half, half * reversed_])
    return np.asarray(np.moveaxis(whole, 2, 0))
