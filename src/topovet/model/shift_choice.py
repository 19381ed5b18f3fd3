"""Which Wigner-Seitz shifts to read a Hamiltonian with: the file's, rebuilt ones, or none."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from ase.geometry import find_mic

from topovet.arrays import BoolArray, FloatArray
from topovet.intake.records import HamiltonianFile, WsShifts
from topovet.intake.shifts.centre_branches import (
    centre_offsets,
    centres_on_other_sites,
    suspicious_centres,
)
from topovet.intake.shifts.ws_shifts import rebuild_shifts
from topovet.model.declarations import Declarations
from topovet.model.origin import common_shift

SAME_CENTRE_ANG = 1e-2
"""A centre that its nearest supercell image to the site matches this closely is already there."""


@dataclass(frozen=True, slots=True, eq=False)
class ShiftProposal:
    """The shifts as the files give them, and, where centres look wrong, mended ones beside them.

    Attributes
    ----------
    given
        None where the bare R vectors are to be used.
    source
        "wsvec file", "rebuilt from centres", "rebuilt from declared sites", "none needed" or
        "not available".
    note
        One sentence about it.
    mended
        With every centre on its declared site; None where no centre is suspicious.
    suspects
        Indices of the Wannier functions whose centre is suspicious.
    elsewhere
        Those of them whose centre sits on a site that is declared for other functions.
    offsets_ang
        (n_wann,) distance of centre and declared site modulo the supercell; None if unknown.
    centres_cart
        (n_wann, 3) angstrom, as printed; None if unknown.
    origin_shift_frac
        Common shift of all centres against the declared sites; None where there is none. Shifts
        rest on differences of centres and do not notice it.
    sites_declared
        Whether the sites that centres were tested on are declared ones.
    """

    given: WsShifts | None
    source: str
    note: str
    mended: WsShifts | None
    suspects: tuple[int, ...]
    elsewhere: tuple[int, ...]
    offsets_ang: FloatArray | None
    centres_cart: FloatArray | None
    origin_shift_frac: FloatArray | None = None
    sites_declared: bool = True


def propose_shifts(
    hamiltonian: HamiltonianFile,
    declared: Declarations,
    wsvec: WsShifts | None,
    centres_cart: FloatArray | None,
    assumed_frac: FloatArray | None = None,
) -> ShiftProposal:
    """Choose the source of the shifts and test the centres they rest on.

    Parameters
    ----------
    hamiltonian, declared
        The case.
    wsvec
        The `_wsvec.dat` file, where there is one.
    centres_cart
        (n_wann, 3) angstrom from `_centres.xyz` or `_tb.dat`, where there are any.
    assumed_frac
        (n_wann, 3) sites to test the centres on where none are declared.
    """
    stated = None
    if len(declared.orbitals) == hamiltonian.n_wann:
        stated = np.array([o.position_frac for o in declared.orbitals])
    sites = assumed_frac if stated is None else stated
    if centres_cart is None or sites is None or declared.mp_grid is None:
        given, source, note = _as_given(hamiltonian, declared, wsvec, centres_cart, stated)
        return ShiftProposal(given, source, note, None, (), (), None, centres_cart)
    cell = declared.crystal.cell
    centres = centres_cart @ np.linalg.inv(cell)
    shift = common_shift(centres, sites, declared.crystal)
    if shift is not None:
        # known modulo the lattice, but centres are compared modulo the supercell
        sites = sites + shift + np.round(np.median(centres - sites - shift, axis=0))
    offsets = centre_offsets(centres_cart, sites, cell, declared.mp_grid)
    suspects = suspicious_centres(offsets, sites, cell)
    homed = _nearest_to_site(centres_cart, sites, declared)
    n_moved = int((np.linalg.norm(homed - centres_cart, axis=1) > SAME_CENTRE_ANG).sum())
    given, source, note = _as_given(hamiltonian, declared, wsvec, centres_cart, sites)
    elsewhere = centres_on_other_sites(centres_cart, sites, cell, declared.mp_grid, suspects)
    if given is not None and n_moved and not elsewhere.any():
        given = _rebuild(hamiltonian, declared, homed)
        source = "rebuilt from centres"
        note = (
            f"{n_moved} centres are printed whole supercell vectors away from their sites; the "
            "shifts were rebuilt with the image at the site, which leaves the bands as they are."
        )
    mended = None
    if given is not None and suspects.any():
        # all of them, not the suspects alone: equivalent centres must stay equivalent, or ties
        # between images are broken and symmetries with them
        mended = _rebuild(hamiltonian, declared, sites @ cell)
    return ShiftProposal(
        given,
        source,
        note,
        mended,
        _indices(suspects),
        _indices(elsewhere),
        offsets,
        centres_cart,
        shift,
        sites_declared=stated is not None,
    )


def _indices(mask: BoolArray) -> tuple[int, ...]:
    return tuple(np.flatnonzero(mask).tolist())


def _as_given(
    hamiltonian: HamiltonianFile,
    declared: Declarations,
    wsvec: WsShifts | None,
    centres_cart: FloatArray | None,
    sites: FloatArray | None,
) -> tuple[WsShifts | None, str, str]:
    if wsvec is not None:
        return wsvec, "wsvec file", "shifts read from the _wsvec.dat file."
    fits = declared.mp_grid is not None and _fits_mesh(hamiltonian, declared.mp_grid)
    if np.all(hamiltonian.degeneracies == 1) and not fits:
        note = "every R has degeneracy 1 and the list is no Wigner-Seitz set: nothing to shift."
        return None, "none needed", note
    if not declared.use_ws_distance:
        return None, "none needed", "the .win file says use_ws_distance = false."
    if declared.mp_grid is not None and not fits:
        return (
            None,
            "not available",
            f"the degeneracies add up to {(1 / hamiltonian.degeneracies).sum():.3f}, not to the "
            f"{int(np.prod(declared.mp_grid))} points of mp_grid: R vectors are missing, and the "
            "shifts cannot be rebuilt.",
        )
    if declared.mp_grid is not None and centres_cart is not None:
        shifts = _rebuild(hamiltonian, declared, centres_cart)
        return shifts, "rebuilt from centres", "no _wsvec.dat file; rebuilt from the centres."
    if declared.mp_grid is not None and sites is not None:
        shifts = _rebuild(hamiltonian, declared, sites @ declared.crystal.cell)
        return (
            shifts,
            "rebuilt from declared sites",
            "no _wsvec.dat and no _centres.xyz file; rebuilt as if every centre were on its site.",
        )
    return (
        None,
        "not available",
        "no _wsvec.dat file, and without mp_grid and centres it cannot be rebuilt: energies on the "
        "mesh are exact, but between its points symmetries can be broken by tens of meV.",
    )


def _fits_mesh(hamiltonian: HamiltonianFile, mp_grid: tuple[int, int, int]) -> bool:
    return bool(abs((1.0 / hamiltonian.degeneracies).sum() - np.prod(mp_grid)) < 1e-6)


def _rebuild(
    hamiltonian: HamiltonianFile, declared: Declarations, centres_cart: FloatArray
) -> WsShifts:
    assert declared.mp_grid is not None
    cell = declared.crystal.cell
    return rebuild_shifts(
        hamiltonian.r_cells,
        centres_cart @ np.linalg.inv(cell),
        declared.mp_grid,
        cell,
        tol=declared.ws_distance_tol,
        search_size=declared.ws_search_size,
    )


def _nearest_to_site(
    centres_cart: FloatArray, sites: FloatArray, declared: Declarations
) -> FloatArray:
    """Each centre moved by the supercell vector that brings it nearest to its declared site."""
    supercell = declared.crystal.cell * np.asarray(declared.mp_grid)[:, None]
    on_site = sites @ declared.crystal.cell
    return np.asarray(on_site + find_mic(centres_cart - on_site, supercell)[0])
