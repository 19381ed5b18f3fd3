"""Declared Wannier functions -> orbital basis in the crystal's Cartesian frame."""

from __future__ import annotations

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.intake.records import DeclaredOrbital
from topovet.intake.wannier_input.angular import ANGULAR_NAMES
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.hybrids import harmonic_coefficients
from topovet.model.real_harmonics import N_HARMONICS, harmonic_rotation

SAME_SITE_ANG = 0.05
"""Distance up to which two sites get one name; files give positions with few digits."""

_SPIN_NAMES = {1: " up", -1: " down", 0: ""}


def build_basis(orbitals: tuple[DeclaredOrbital, ...], crystal: Crystal) -> OrbitalBasis:
    """The orbital basis that the projections declare.

    Parameters
    ----------
    orbitals
        In the order of the Hamiltonian's rows.
    crystal
        Gives the names of the sites; its cell is the one the sites are fractional in.

    Returns
    -------
    OrbitalBasis
        Harmonics after the local axes, spinors after the quantisation axis, names such as
        "Bi1 pz up" (atoms counted from 1 within their element; sites off every atom are "site1",
        …; a radial number above 1 is named, "Bi1 pz r2 up").
    """
    if not orbitals:
        empty = np.zeros(0, dtype=np.int64)
        return OrbitalBasis(
            np.zeros((0, 3)), np.zeros((0, N_HARMONICS)), np.zeros((0, 2), complex), (), empty
        )
    positions = np.array([orbital.position_frac for orbital in orbitals], dtype=float)
    sites = name_sites(positions, crystal)
    return OrbitalBasis(
        positions_frac=positions,
        harmonics=_harmonics(orbitals),
        spinors=np.array([spinor(orbital.spin, orbital.spin_axis) for orbital in orbitals]),
        labels=tuple(f"{site} {_name(o)}" for site, o in zip(sites, orbitals, strict=True)),
        shells=np.array([orbital.radial for orbital in orbitals], dtype=np.int64),
    )


def spinor(spin: int, axis: tuple[float, float, float]) -> ComplexArray:
    """Spin state (up, down along z), an eigenvector of axis.sigma.

    With the axis at polar angles theta and phi: up = (cos theta/2, e^{i phi} sin theta/2) and
    down = (-e^{-i phi} sin theta/2, cos theta/2). Time reversal i sigma_y K turns up into -down
    and down into up, whatever the axis. The phases are a choice; a program that fixes
    those of its trial spinors otherwise agrees with it where the axis is +z.

    Parameters
    ----------
    spin
        +1, -1, or 0 for a spinless function, which is (1, 0).
    axis
        Cartesian unit vector.
    """
    if spin == 0:
        return np.array([1.0, 0.0], dtype=np.complex128)
    x, y, z = axis
    across = float(np.hypot(x, y))
    phase = complex(x, y) / across if across > 0 else 1.0
    # the larger half angle from a square root, the other from it: exact at both poles
    larger = np.sqrt((1 + abs(z)) / 2)
    smaller = across / (2 * larger)
    cosine, sine = (larger, smaller) if z >= 0 else (smaller, larger)
    if spin > 0:
        return np.array([cosine, phase * sine], dtype=np.complex128)
    return np.array([-np.conj(phase) * sine, cosine], dtype=np.complex128)


def name_sites(positions_frac: FloatArray, crystal: Crystal) -> tuple[str, ...]:
    """Name of the site at each position: that of the atom there, or "site1", "site2", …

    Parameters
    ----------
    positions_frac
        (n, 3) fractional; the same site in another cell has the same name.
    crystal
        Gives atoms and cell.
    """
    found = list(crystal.positions_frac)
    names = _atom_names(crystal.symbols)
    result = []
    for position in positions_frac:
        apart = np.array(found).reshape(-1, 3) - position
        distance = np.linalg.norm((apart - np.round(apart)) @ crystal.cell, axis=1)
        if not len(distance) or distance.min() > SAME_SITE_ANG:
            found.append(position)
            names.append(f"site{len(names) - len(crystal.symbols) + 1}")
            distance = np.append(distance, 0.0)
        result.append(names[int(distance.argmin())])
    return tuple(result)


def _atom_names(symbols: tuple[str, ...]) -> list[str]:
    seen: dict[str, int] = {}
    names = []
    for symbol in symbols:
        seen[symbol] = seen.get(symbol, 0) + 1
        names.append(f"{symbol}{seen[symbol]}")
    return names


def _harmonics(orbitals: tuple[DeclaredOrbital, ...]) -> FloatArray:
    """(n, 16) coefficients in the crystal's frame; one rotation matrix per set of local axes."""
    frames = {(orbital.z_axis, orbital.x_axis) for orbital in orbitals}
    turned = {frame: _frame_matrix(*frame) for frame in frames}
    rows = [
        turned[orbital.z_axis, orbital.x_axis] @ harmonic_coefficients(orbital.l, orbital.mr)
        for orbital in orbitals
    ]
    return np.array(rows)


def _frame_matrix(
    z_axis: tuple[float, float, float], x_axis: tuple[float, float, float]
) -> FloatArray:
    """(16, 16) matrix that takes coefficients in the local axes to the crystal's."""
    x, z = np.array(x_axis), np.array(z_axis)
    rotation = np.stack([x, np.cross(z, x), z], axis=1)  # columns are the local x, y, z
    if np.array_equal(rotation, np.eye(3)):
        return np.eye(N_HARMONICS)  # keeps the coefficients of plain projections exact
    return harmonic_rotation(rotation)


def _name(orbital: DeclaredOrbital) -> str:
    angular = ANGULAR_NAMES[orbital.l][orbital.mr - 1]
    radial = f" r{orbital.radial}" if orbital.radial > 1 else ""
    return f"{angular}{radial}{_SPIN_NAMES[orbital.spin]}"
