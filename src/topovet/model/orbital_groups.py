"""Groups of orbitals whose on-site energies are moved together: an element and its l."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.model.basis import OrbitalBasis
from topovet.model.real_harmonics import HARMONIC_L

PURE_L = 1e-6
"""A function whose weight outside one l is below this has that l; any other is a hybrid."""

OFF_ATOM = "off-atom"
"""Stands in the place of the element for functions whose site is no atom."""

_LETTERS = "spdf"


@dataclass(frozen=True, slots=True)
class OrbitalGroup:
    """Wannier functions that are shifted together.

    Attributes
    ----------
    name
        "Se p"; "C (all l)" where an element is not split by l.
    members
        Their numbers, from 0, ascending.
    """

    name: str
    members: tuple[int, ...]

    def projector(self, n_orb: int) -> FloatArray:
        """(n_orb,) diagonal of the projector on the group."""
        diagonal = np.zeros(n_orb)
        diagonal[list(self.members)] = 1.0
        return diagonal


def declared_groups(basis: OrbitalBasis) -> tuple[OrbitalGroup, ...]:
    """One group for each element and l of a declared basis, in the order of declaration.

    Hybrids have no l: the functions of an element that has any are one group. Radial functions
    other than the first are groups of their own.
    """
    elements = [_element(label) for label in basis.labels]
    letters = [_letter(l) for l in angular_momenta(basis)]
    mixed = {e for e, letter in zip(elements, letters, strict=True) if not letter}
    names = [
        f"{element} (all l)" if element in mixed else f"{element} {letter}{_radial(shell)}"
        for element, letter, shell in zip(elements, letters, basis.shells.tolist(), strict=True)
    ]
    return _gathered(names)


def element_groups(elements: Sequence[str]) -> tuple[OrbitalGroup, ...]:
    """One group for each element, from the element at the site of each function ("" off atoms)."""
    return _gathered([f"{element or OFF_ATOM} (all l)" for element in elements])


def angular_momenta(basis: OrbitalBasis) -> IntArray:
    """(n_orb,) l of each function, -1 for hybrids."""
    weights = np.asarray(basis.harmonics) ** 2
    by_l = np.stack([weights[:, l == HARMONIC_L].sum(axis=1) for l in range(4)], axis=1)
    pure = by_l.max(axis=1) > (1 - PURE_L) * by_l.sum(axis=1)
    return np.asarray(np.where(pure, by_l.argmax(axis=1), -1), dtype=np.int64)


def _gathered(names: Sequence[str]) -> tuple[OrbitalGroup, ...]:
    members: dict[str, list[int]] = {}
    for i, name in enumerate(names):
        members.setdefault(name, []).append(i)
    return tuple(OrbitalGroup(name, tuple(found)) for name, found in members.items())


def _element(label: str) -> str:
    """The element in a label such as "Bi1 pz up"."""
    stem = re.sub(r"\d+$", "", label.split()[0])
    return OFF_ATOM if stem == "site" else stem


def _letter(l: int) -> str:
    return _LETTERS[l] if l >= 0 else ""


def _radial(shell: int) -> str:
    return f" r{shell}" if shell > 1 else ""
