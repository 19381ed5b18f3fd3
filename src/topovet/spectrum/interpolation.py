"""How well H(k) reproduces the energies that came with it."""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import eigenvalues
from topovet.spectrum.results import InterpolationCheck
from topovet.units import MEV_PER_EV

N_LOW_CONDUCTION = 2


def compare_with_files(
    bloch: BlochSum,
    filling: int,
    *,
    mesh_k: FloatArray | None,
    mesh_energies: FloatArray | None,
    path_k: FloatArray | None,
    path_energies: FloatArray | None,
) -> InterpolationCheck:
    """Largest differences, in meV, to the `.eig` and `_band.dat` energies that are given.

    `.eig` lists more bands than the Wannier manifold has: the offset of the manifold is the one
    that fits the occupied bands best, and is reported.

    Parameters
    ----------
    bloch, filling
        Hamiltonian and number of occupied bands.
    mesh_k, mesh_energies
        (n_k, 3) and (n_k, n_bands) of the first-principles mesh, or None.
    path_k, path_energies
        (n_k, 3) and (n_k, n_orb) of Wannier90's own interpolation, or None.
    """
    mesh_occupied = mesh_conduction = path_occupied = path_all = None
    offset = None
    if mesh_k is not None and mesh_energies is not None:
        ours = eigenvalues(bloch, mesh_k)
        n_low = min(N_LOW_CONDUCTION, bloch.n_orb - filling)
        offset = _manifold_offset(ours[:, :filling], mesh_energies)
        if offset is not None:
            theirs = mesh_energies[:, offset : offset + filling + n_low]
            difference = np.abs(ours[:, : theirs.shape[1]] - theirs)
            mesh_occupied = _largest_mev(difference[:, :filling])
            mesh_conduction = _largest_mev(difference[:, filling:])
    if path_k is not None and path_energies is not None:
        difference = np.abs(eigenvalues(bloch, path_k) - path_energies)
        path_occupied = _largest_mev(difference[:, :filling])
        path_all = _largest_mev(difference)
    return InterpolationCheck(
        mesh_occupied_mev=mesh_occupied,
        mesh_low_conduction_mev=mesh_conduction,
        mesh_points=0 if mesh_occupied is None or mesh_k is None else len(mesh_k),
        path_occupied_mev=path_occupied,
        path_all_mev=path_all,
        path_points=0 if path_all is None or path_k is None else len(path_k),
        excluded_offset=offset,
    )


def _manifold_offset(occupied: FloatArray, energies: FloatArray) -> int | None:
    """Band of the file that is Wannier band 0, by the smallest rms over the occupied bands."""
    filling = occupied.shape[1]
    offsets = range(energies.shape[1] - filling + 1)
    if not offsets:
        return None
    rms = [float(np.mean((occupied - energies[:, o : o + filling]) ** 2)) for o in offsets]
    return int(np.argmin(rms))


def _largest_mev(difference: FloatArray) -> float | None:
    return MEV_PER_EV * float(difference.max()) if difference.size else None
