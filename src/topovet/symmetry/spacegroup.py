"""The only gateway to spglib: operations for the input cell, copied and verified."""

from __future__ import annotations

import itertools
import warnings
from collections.abc import Callable
from typing import Any

import numpy as np
import spglib

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.errors import TopovetError
from topovet.model.crystal import Crystal
from topovet.symmetry.results import SpaceGroup

SYMPREC_ANG = 1e-2
"""Distance tolerance in angstrom. Generous on purpose: structures come with few digits, and every
operation is afterwards tested on the Hamiltonian, which is the judge."""


GENERAL_SYMPREC_ANG = 1e-3
"""The same for atoms put at exact general positions of a group."""


class SymmetrySearchError(TopovetError):
    """spglib found no space group, or one that does not map the atoms onto themselves."""


def find_space_group(crystal: Crystal, *, symprec: float = SYMPREC_ANG) -> SpaceGroup:
    """Space group of a crystal, for its own cell.

    Parameters
    ----------
    crystal
        At least one atom.
    symprec
        Distance tolerance, angstrom.

    Raises
    ------
    SymmetrySearchError
        The structure has no atoms, two atoms coincide, or an operation fails verification.
    """
    if not crystal.symbols:
        raise SymmetrySearchError(
            "no space group: the structure has no atoms; give atoms_frac in the .win file or a "
            "structure file."
        )
    kinds = {symbol: i for i, symbol in enumerate(dict.fromkeys(crystal.symbols))}
    numbers = [kinds[symbol] + 1 for symbol in crystal.symbols]
    cell = (crystal.cell, crystal.positions_frac, numbers)
    dataset = _spglib_dataset(cell, symprec)
    if dataset is None:
        raise SymmetrySearchError(
            f"no space group: spglib found none within {symprec} angstrom; check that no two atoms "
            "coincide and that cell and positions belong together."
        )
    rotations = np.array(dataset.rotations, dtype=np.int64)
    translations = np.array(dataset.translations, dtype=np.float64)
    _verify(crystal, np.array(numbers), rotations, translations, symprec)
    return SpaceGroup(
        number=int(dataset.number),
        symbol=str(dataset.international),
        rotations=rotations,
        translations=translations,
        symprec_ang=symprec,
        centres_frac=inversion_centres(rotations, translations),
        wyckoff=tuple(str(w) for w in dataset.wyckoffs),
    )


def _spglib_dataset(cell: Any, symprec: float) -> Any:
    return _answer(lambda: spglib.get_symmetry_dataset(cell, symprec=symprec))


def _answer(ask: Callable[[], Any]) -> Any:
    """spglib reports failure by None or by an exception, depending on its version."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        try:
            return ask()
        except Exception as error:
            if type(error).__module__.startswith("spglib"):
                return None
            raise


def inversion_centres(rotations: IntArray, translations: FloatArray) -> FloatArray:
    """(n, 3) inversion centres in the home cell, the one nearest to the origin first.

    An operation {-1|w} fixes w/2, and, with lattice translations, all points w/2 + t/2.
    """
    is_inversion = np.all(rotations == -np.eye(3, dtype=np.int64), axis=(1, 2))
    halves = np.array(list(itertools.product((0.0, 0.5), repeat=3)))
    centres = (translations[is_inversion][:, None, :] / 2 + halves).reshape(-1, 3) % 1.0
    centres = np.where(np.abs(centres - 1.0) < 1e-6, 0.0, centres)
    centres = np.unique(np.round(centres, 9), axis=0)
    # nearest image of the origin decides; ties go to the lexicographically smaller one
    distance = np.linalg.norm(centres - np.round(centres), axis=1)
    return np.asarray(centres[np.argsort(np.round(distance, 6), kind="stable")])


def nearest_centre_distance(
    point_frac: FloatArray, centres_frac: FloatArray, cell: FloatArray
) -> float:
    """Distance in angstrom from a point to the nearest inversion centre, images included."""
    difference = point_frac - centres_frac
    return float(np.linalg.norm((difference - np.round(difference)) @ cell, axis=1).min())


def _verify(
    crystal: Crystal,
    numbers: IntArray,
    rotations: IntArray,
    translations: FloatArray,
    symprec: float,
) -> None:
    """Every operation keeps lengths and maps each atom onto one of its kind."""
    metric = crystal.cell @ crystal.cell.T
    scale = np.abs(metric).max()
    for rotation, translation in zip(rotations, translations, strict=True):
        # x' = W x on column vectors of fractional coordinates, so lengths need W^T G W = G
        if np.abs(rotation.T @ metric @ rotation - metric).max() > 2 * symprec * np.sqrt(scale):
            raise SymmetrySearchError("a symmetry operation from spglib does not keep lengths.")
        images = crystal.positions_frac @ rotation.T + translation
        difference = images[:, None, :] - crystal.positions_frac[None, :, :]
        difference -= np.round(difference)
        distance = np.linalg.norm(difference @ crystal.cell, axis=2)
        distance[numbers[:, None] != numbers[None, :]] = np.inf
        if distance.min(axis=1).max() > 3 * symprec:
            raise SymmetrySearchError(
                "a symmetry operation from spglib does not map the atoms onto atoms of their kind."
            )


def find_candidate_operations(
    crystal: Crystal, symprec: float, *, one_kind: bool
) -> tuple[IntArray, FloatArray]:
    """Operations that a crystal would have if its atoms were moved by about `symprec`.

    They are a list to be tested on a Hamiltonian, and are not verified on the structure.

    Parameters
    ----------
    crystal
        At least one atom.
    symprec
        Distance tolerance, angstrom.
    one_kind
        Whether all atoms count as one element.

    Returns
    -------
    tuple
        (n, 3, 3) and (n, 3), a group modulo lattice translations; empty where spglib finds none.
    """
    kinds = {symbol: i for i, symbol in enumerate(dict.fromkeys(crystal.symbols))}
    numbers = [1 if one_kind else kinds[symbol] + 1 for symbol in crystal.symbols]
    dataset = None
    if numbers:
        dataset = _spglib_dataset((crystal.cell, crystal.positions_frac, numbers), symprec)
    if dataset is None:
        return np.zeros((0, 3, 3), dtype=np.int64), np.zeros((0, 3))
    return np.array(dataset.rotations, dtype=np.int64), np.array(dataset.translations)


def name_group(
    rotations: IntArray, translations: FloatArray, cell: FloatArray, *, symprec: float = SYMPREC_ANG
) -> tuple[int, str]:
    """International number and short symbol of a group of operations; 0 and "unknown" without one.

    Parameters
    ----------
    rotations, translations
        (n, 3, 3) and (n, 3), closed modulo lattice translations of the cell.
    cell
        (3, 3) angstrom, lattice vectors as rows.
    symprec
        How far translations may be off, angstrom.
    """
    found = _answer(
        lambda: spglib.get_spacegroup_type_from_symmetry(
            rotations, translations, lattice=cell, symprec=symprec
        )
    )
    if found is None:
        return 0, "unknown"
    return int(found.number), str(found.international_short)


GENERAL_PLACES = ((0.113, 0.271), (0.377, 0.139))
GENERAL_HEIGHTS_ANG = (0.61, 1.13)
"""Places in the plane, fractional, and distances from it that no operation of a layer fixes."""


def name_layer_group(
    cell: FloatArray, rotations: IntArray, translations: FloatArray, axis: int
) -> tuple[int, str]:
    """Number and symbol of a layer group; 0 and "unknown" without one.

    spglib names the layer group of a structure: it is given one of two kinds of atoms at general
    positions of the group.

    Parameters
    ----------
    cell
        (3, 3) angstrom, lattice vectors as rows, with the symmetry of the rotations.
    rotations, translations
        (n, 3, 3) and (n, 3), exact, that keep the plane through the origin in which `axis` is not.
    axis
        Which lattice vector leads out of the layer.
    """
    name = getattr(spglib, "get_layergroup", None)
    if name is None:  # versions that know of no layers
        return 0, "unknown"
    others = np.delete(np.arange(3), axis)
    normal = np.cross(*cell[others])
    height = abs(float(cell[axis] @ normal)) / float(np.linalg.norm(normal))
    positions = []
    for place, above in zip(GENERAL_PLACES, GENERAL_HEIGHTS_ANG, strict=True):
        general = np.zeros(3)
        general[others], general[axis] = place, above / height
        positions.append(rotations @ general + translations)
    kinds = np.repeat([1, 2], len(rotations))
    structure = (cell, np.concatenate(positions) % 1.0, kinds)
    found = _answer(lambda: name(structure, aperiodic_dir=axis, symprec=GENERAL_SYMPREC_ANG))
    if found is None or len(found.rotations) != len(rotations):
        return 0, "unknown"
    return int(found.number), str(found.international)


def name_magnetic_group(
    rotations: IntArray,
    translations: FloatArray,
    antiunitary: BoolArray,
    cell: FloatArray,
    *,
    symprec: float = SYMPREC_ANG,
) -> str:
    """BNS number of a magnetic space group, e.g. "166.98"; "" where spglib finds none.

    Parameters
    ----------
    rotations, translations, antiunitary
        (n, 3, 3), (n, 3) and (n,), closed modulo lattice translations of the cell.
    cell, symprec
        As for `name_group`.
    """
    found = _answer(
        lambda: spglib.get_magnetic_spacegroup_type_from_symmetry(
            rotations, translations, antiunitary, lattice=cell, symprec=symprec
        )
    )
    return "" if found is None else str(found.bns_number)


def name_point_group(rotations: IntArray) -> str:
    """Symbol of a point group of rotations (n, 3, 3) in fractional coordinates, e.g. "-43m"."""
    found = _answer(lambda: spglib.get_pointgroup(np.asarray(rotations, dtype=np.intc)))
    return "unknown" if found is None else str(found[0]).strip()
