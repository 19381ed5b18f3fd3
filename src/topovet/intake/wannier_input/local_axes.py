"""Local axes of a projection: unit vectors at right angles, or none where they are not.

Wannier90 refuses a z and an x axis further than 1e-2 (cosine) from a right angle, turns x into the
plane across z where they are nearer, and lets functions that are round about z (s, pz, dz2, fz3)
have any z axis (`param_get_projections`, from memory).
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray

Vector = tuple[float, float, float]

MAX_COSINE = 1e-2
"""Largest cosine between the z and x axes that counts as a rounded right angle."""


def unit_vector(vector: Vector) -> Vector | None:
    """The vector over its length; None for a vector without direction."""
    values = np.array(vector)
    largest = float(np.abs(values).max())
    if not largest > 0:
        return None
    values = values / largest  # first, so that squares neither overflow nor vanish
    return _as_tuple(values / np.linalg.norm(values))


def axes_of(z: Vector, x: Vector, *, about_z: bool) -> tuple[Vector, Vector] | None:
    """z and x axes of a projection, orthonormal.

    Parameters
    ----------
    z, x
        Unit vectors as declared.
    about_z
        The function is round about z, so that x does not matter. Where the declared x is of no
        use, the Cartesian axis furthest from z, turned across z, takes its place.

    Returns
    -------
    tuple or None
        None where the axes are not at right angles and x matters.
    """
    along, across = np.array(z), np.array(x)
    if abs(float(along @ across)) > MAX_COSINE:
        if not about_z:
            return None
        across = np.eye(3)[int(np.abs(along).argmin())]
    across = across - (along @ across) * along
    return z, _as_tuple(across / np.linalg.norm(across))


def _as_tuple(values: FloatArray) -> Vector:
    x, y, z = (float(value) for value in values)
    return (x, y, z)
