"""Bands along the lattice's path of special points."""

from __future__ import annotations

import itertools

import numpy as np
from ase.cell import Cell
from ase.dft.kpoints import parse_path_string

from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import eigenvalues
from topovet.spectrum.results import BandPath

POINT_SPACING = 0.02
"""Distance of neighbouring k on the path, 1/angstrom."""


def compute_bands(bloch: BlochSum, crystal: Crystal, *, spacing: float = POINT_SPACING) -> BandPath:
    """Energies along ASE's special-point path of the lattice, in the crystal's own cell.

    ASE recognises the lattice, takes its conventional path and maps it back to the cell that is
    given; nothing is standardised here.

    Parameters
    ----------
    bloch, crystal
        Hamiltonian and its cell.
    spacing
        Distance of neighbouring points, 1/angstrom (2 pi included).
    """
    path = Cell(np.array(crystal.cell)).bandpath(pbc=crystal.periodic, npoints=0)
    segments, names = _segments(path.path, path.special_points)
    k_parts: list[FloatArray] = []
    distance_parts: list[FloatArray] = []
    label_index: list[int] = []
    labels: list[str] = []
    start, count = 0.0, 0
    for (name_a, name_b), (k_a, k_b) in zip(names, segments, strict=True):
        length = float(np.linalg.norm((k_b - k_a) @ crystal.reciprocal))
        n = max(2, int(np.ceil(length / spacing)) + 1)
        k_parts.append(k_a + np.linspace(0, 1, n)[:, None] * (k_b - k_a))
        distance_parts.append(start + np.linspace(0, length, n))
        label_index += [count, count + n - 1]
        labels += [name_a, name_b]
        start, count = start + length, count + n
    k_frac = np.concatenate(k_parts)
    return BandPath(
        k_frac=k_frac,
        distance=np.concatenate(distance_parts),
        energies_ev=eigenvalues(bloch, k_frac),
        label_index=tuple(label_index),
        labels=tuple(labels),
        lattice=str(path.cell.get_bravais_lattice(pbc=crystal.periodic).longname),
    )


def _segments(
    path: str, special: dict[str, FloatArray]
) -> tuple[list[tuple[FloatArray, FloatArray]], list[tuple[str, str]]]:
    """Straight pieces of a path like "GXWK,UX" with their end points' names."""
    names = [(a, b) for piece in parse_path_string(path) for a, b in itertools.pairwise(piece)]
    return [(np.asarray(special[a]), np.asarray(special[b])) for a, b in names], names
