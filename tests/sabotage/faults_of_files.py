"""Faults of the files of a run: R vectors, Hermiticity, shifts, centres, energies, digits."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
from case_folder import CaseFolder, keep_rows, onsite_row
from clean_cases import CLEAN_CASES, CleanCase
from fault import CHANGED, Fault, flags, in_real

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.intake.records import HamiltonianFile
from topovet.model.ordering import reorder_shifts

SEED = 20261201


def reorder(folder: Path, order: IntArray, *, companions: bool) -> None:
    """Wannier functions in another order, new[i] = old[order[i]], in the files a run writes."""
    case = CaseFolder(folder)
    case.change_blocks(lambda h: replace(h, h_r=h.h_r[:, order[:, None], order]))
    if companions and case.has("_wsvec.dat"):
        case.write_shifts(reorder_shifts(case.shifts(), order))
        case.write_centres(case.centres()[order])


def block_order(folder: Path, size: float) -> None:
    n = CaseFolder(folder).hamiltonian().n_wann
    reorder(folder, np.concatenate([np.arange(0, n, 2), np.arange(1, n, 2)]), companions=True)


def swap_spin_pairs(folder: Path, size: float) -> None:
    """Down before up in a fraction of the orbitals, at least one."""
    n = CaseFolder(folder).hamiltonian().n_wann
    order = np.arange(n).reshape(-1, 2)
    count = max(1, round(size * len(order)))
    order[:count] = order[:count, ::-1]
    reorder(folder, order.reshape(-1), companions=True)


def anti_hermitian(folder: Path, size: float) -> None:
    """Random anti-Hermitian part of H(0), spectral norm `size` meV / 2 on either side."""

    def change(h: HamiltonianFile) -> HamiltonianFile:
        noise = _complex_noise((h.n_wann, h.n_wann))
        odd = noise - noise.conj().T
        h_r = h.h_r.copy()
        row = onsite_row(h)
        h_r[row] += h.degeneracies[row] * 0.5e-3 * size * odd / np.linalg.norm(odd, 2)
        return replace(h, h_r=h_r)

    CaseFolder(folder).change_blocks(change)


def scale_one_block(folder: Path, size: float) -> None:
    """The block of one R, not of its partner, multiplied by 1 + size."""

    def change(h: HamiltonianFile) -> HamiltonianFile:
        norms = np.linalg.norm(h.h_r, axis=(1, 2)) * h.r_cells.any(axis=1)
        h_r = h.h_r.copy()
        h_r[norms.argmax()] *= 1 + size
        return replace(h, h_r=h_r)

    CaseFolder(folder).change_blocks(change)


def _beyond(case: CaseFolder, h: HamiltonianFile, fraction: float) -> BoolArray:
    """Mask of the R that are longer than a fraction of the longest."""
    cell = case.win().cell
    assert cell is not None
    lengths = np.linalg.norm(h.r_cells @ cell, axis=1)
    return np.asarray(lengths > fraction * lengths.max() + 1e-6)


def remove_shells(folder: Path, size: float) -> None:
    """R beyond a fraction of the longest removed, degeneracies kept, wsvec cut to match."""
    case = CaseFolder(folder)
    h = case.hamiltonian()
    cut = keep_rows(h, ~_beyond(case, h, size))
    shifts = case.shifts() if case.has("_wsvec.dat") else None
    case.write_hamiltonian(cut)
    if shifts is not None:
        kept = {tuple(r) for r in cut.r_cells.tolist()}
        rows = [i for i, r in enumerate(shifts.r_cells.tolist()) if tuple(r) in kept]
        ends = np.cumsum(shifts.counts.reshape(len(shifts.r_cells), -1).sum(axis=1))
        parts = np.split(shifts.shifts, ends[:-1])
        case.write_shifts(
            type(shifts)(
                shifts.r_cells[rows], shifts.counts[rows], np.concatenate([parts[i] for i in rows])
            )
        )


def remove_shells_with_weights(folder: Path, size: float) -> None:
    """As `remove_shells`, the degeneracies divided out and written as 1, the wsvec file gone."""
    case = CaseFolder(folder)
    h = case.hamiltonian()
    cut = keep_rows(h, ~_beyond(case, h, size))
    weights = cut.degeneracies
    case.write_hamiltonian(
        replace(cut, h_r=cut.h_r / weights[:, None, None], degeneracies=np.ones_like(weights))
    )
    if case.has("_wsvec.dat"):
        case.remove("_wsvec.dat")


def zero_shells(folder: Path, size: float) -> None:
    """Every R still listed, the blocks beyond a fraction of the longest set to zero."""
    case = CaseFolder(folder)

    def change(h: HamiltonianFile) -> HamiltonianFile:
        return replace(h, h_r=np.where(_beyond(case, h, size)[:, None, None], 0.0, h.h_r))

    case.change_blocks(change)


def forget_degeneracies(folder: Path, size: float) -> None:
    """All degeneracies written as 1, nothing divided."""
    case = CaseFolder(folder)
    case.change_blocks(lambda h: replace(h, degeneracies=np.ones_like(h.degeneracies)))


def duplicate(folder: Path, size: float) -> None:
    """The R of the strongest hopping listed a second time, its block multiplied by 1 + size."""

    def change(h: HamiltonianFile) -> HamiltonianFile:
        norms = np.linalg.norm(h.h_r, axis=(1, 2)) * h.r_cells.any(axis=1)
        again = keep_rows(h, np.array([norms.argmax()]))
        return replace(
            h,
            degeneracies=np.concatenate([h.degeneracies, again.degeneracies]),
            r_cells=np.concatenate([h.r_cells, again.r_cells]),
            h_r=np.concatenate([h.h_r, again.h_r * (1 + size)]),
        )

    CaseFolder(folder).change_blocks(change)


def lose_partners(folder: Path, size: float) -> None:
    """A fraction of the R, at least one, is missing while -R is there."""

    def change(h: HamiltonianFile) -> HamiltonianFile:
        upper = np.flatnonzero([tuple(r) > (0, 0, 0) for r in h.r_cells.tolist()])
        lost = upper[: max(1, round(size * len(upper)))]
        return keep_rows(h, np.setdiff1d(np.arange(len(h.r_cells)), lost))

    CaseFolder(folder).change_blocks(change)


def drop_shifts(folder: Path, size: float) -> None:
    """1: no wsvec; 2: nor centres; 3: nor mp_grid and k-points."""
    case = CaseFolder(folder)
    case.remove("_wsvec.dat")
    if size >= 2:
        case.remove("_centres.xyz")
    if size >= 3:
        case.edit_win(r"^mp_grid.*\n", "")


def foreign_shifts(folder: Path, size: float) -> None:
    """The wsvec of another compound with the same mesh and number of functions."""
    case = CaseFolder(folder)
    other = folder.with_name("other")
    CLEAN_CASES[TWINS[case.seedname]].lay(other)
    shifts = CaseFolder(other).shifts()
    case.write_shifts(shifts)


TWINS = {"Bi2Se3": "Sb2Se3", "Sb2Se3": "Bi2Se3"}


def has_twin(case: CleanCase) -> bool:
    return case.name in TWINS


def permute_shifts(folder: Path, size: float) -> None:
    """Shifts as if the Wannier functions came in the opposite order."""
    case = CaseFolder(folder)
    shifts = case.shifts()
    case.write_shifts(reorder_shifts(shifts, np.arange(shifts.counts.shape[1])[::-1].copy()))


def move_centre(folder: Path, size: float) -> None:
    """Centres of the first orbital moved by `size` angstrom; the wsvec file gone."""
    case = CaseFolder(folder)
    centres = case.centres()
    centres[:2] += size * np.array([0.6, 0.0, 0.8])
    case.write_centres(centres)
    case.remove("_wsvec.dat")


def move_centre_beside_shifts(folder: Path, size: float) -> None:
    """As `move_centre`, but the sound wsvec file is there."""
    case = CaseFolder(folder)
    centres = case.centres()
    centres[:2] += size * np.array([0.6, 0.0, 0.8])
    case.write_centres(centres)


def move_centre_by_supercell(folder: Path, size: float) -> None:
    """Centres of the first orbital printed in another supercell."""
    case = CaseFolder(folder)
    win = case.win()
    assert win.cell is not None
    assert win.mp_grid is not None
    centres = case.centres()
    centres[:2] += size * win.mp_grid[0] * win.cell[0]
    case.write_centres(centres)


def shift_eig(folder: Path, size: float) -> None:
    case = CaseFolder(folder)
    case.write_eig(case.eig() + size)


def stretch_eig(folder: Path, size: float) -> None:
    """Energies of a run with another functional: 1 + size times as wide."""
    case = CaseFolder(folder)
    energies = case.eig()
    case.write_eig(energies.mean() + (1 + size) * (energies - energies.mean()))


def foreign_eig(folder: Path, size: float) -> None:
    case = CaseFolder(folder)
    other = folder.with_name("other")
    CLEAN_CASES[TWINS[case.seedname]].lay(other)
    case.write_eig(CaseFolder(other).eig())


def round_digits(folder: Path, size: float) -> None:
    """H(R) with fewer digits: `size` meV in the last place."""
    decimals = round(3 - np.log10(size))
    case = CaseFolder(folder)
    case.write_hamiltonian(case.hamiltonian(), decimals=decimals)


def round_digits_alone(folder: Path, size: float) -> None:
    """As `round_digits`, and no energies to compare with."""
    round_digits(folder, size)
    case = CaseFolder(folder)
    for suffix in (".eig", "_band.dat", "_band.kpt"):
        case.remove(suffix)


def noise_of_elements(folder: Path, size: float) -> None:
    """Independent noise of `size` meV on every number of the file."""

    def change(h: HamiltonianFile) -> HamiltonianFile:
        return replace(h, h_r=h.h_r + 1e-3 * size * _complex_noise(h.h_r.shape) / np.sqrt(2))

    CaseFolder(folder).change_blocks(change)


def shift_energies(folder: Path, size: float) -> None:
    """The zero of energy of the Hamiltonian moved, not that of the other files."""

    def change(h: HamiltonianFile) -> HamiltonianFile:
        h_r = h.h_r.copy()
        row = onsite_row(h)
        h_r[row] += h.degeneracies[row] * size * np.eye(h.n_wann)
        return replace(h, h_r=h_r)

    CaseFolder(folder).change_blocks(change)


def conjugate(folder: Path, size: float) -> None:
    """H* in place of H: Theta makes one of the other, so nothing is wrong with it."""
    CaseFolder(folder).change_blocks(lambda h: replace(h, h_r=h.h_r.conj()))


def _complex_noise(shape: tuple[int, ...]) -> FloatArray:
    rng = np.random.default_rng(SEED)
    return np.asarray(rng.normal(size=shape) + 1j * rng.normal(size=shape))


MISREAD_SHIFTS = flags("interpolation-poor", "symmetry-broken", "centres-off")
"""Shifts that are not those of the run spoil H(k) between mesh points: bands differ from
Wannier90's own, and symmetries with them; both flags say to give the run's `_wsvec.dat` file."""

FILE_FAULTS = (
    Fault(
        "spin-order-mismatch",
        "block-spin-order",
        (1,),
        "",
        block_order,
        flags("spin-order-mismatch"),
    ),
    Fault(
        "spin-order-mismatch",
        "spin-pairs-swapped",
        (0, 0.5, 1),
        "fraction of pairs, at least one",
        swap_spin_pairs,
        flags("spin-order-mismatch"),
    ),
    Fault(
        "not-hermitian",
        "anti-hermitian-part",
        (0.01, 1, 30, 1000, 10000),
        "meV",
        anti_hermitian,
        flags("not-hermitian"),
    ),
    Fault(
        "not-hermitian",
        "one-block-scaled",
        (1e-6, 1e-3, 0.1, 1),
        "relative",
        scale_one_block,
        flags("not-hermitian"),
    ),
    Fault(
        "range-truncated",
        "shells-removed",
        (0.95, 0.7, 0.4),
        "of the longest R kept",
        remove_shells,
        flags("range-truncated"),
        suits=in_real,
    ),
    Fault(
        "range-truncated",
        "shells-removed-weights-one",
        (0.95, 0.7, 0.4),
        "of the longest R kept",
        remove_shells_with_weights,
        flags("range-truncated"),
        suits=in_real,
    ),
    Fault(
        "range-truncated",
        "shells-zeroed",
        (0.95, 0.7, 0.4, 0.2),
        "of the longest R kept",
        zero_shells,
        flags("range-truncated"),
        suits=in_real,
    ),
    Fault(
        "range-truncated",
        "degeneracies-forgotten",
        (1,),
        "",
        forget_degeneracies,
        flags("range-truncated"),
        suits=in_real,
    ),
    Fault(
        "duplicate-r", "block-twice", (0, 1e-4, 0.1, 1), "relative", duplicate, flags("duplicate-r")
    ),
    Fault(
        "missing-partner-r",
        "partners-lost",
        (0, 0.3, 1),
        "fraction, at least one",
        lose_partners,
        flags("missing-partner-r"),
    ),
    Fault(
        "interpolation-poor",
        "weights-divided-out",
        (1,),
        "of the longest R kept: no R is lost, but the shifts are",
        remove_shells_with_weights,
        MISREAD_SHIFTS,
        suits=in_real,
    ),
    Fault(
        "interpolation-poor",
        "shifts-dropped",
        (1, 2, 3),
        "files",
        drop_shifts,
        MISREAD_SHIFTS,
        suits=in_real,
    ),
    Fault(
        "interpolation-poor",
        "shifts-of-another-compound",
        (1,),
        "",
        foreign_shifts,
        MISREAD_SHIFTS,
        suits=has_twin,
    ),
    Fault(
        "interpolation-poor",
        "shifts-permuted",
        (1,),
        "",
        permute_shifts,
        MISREAD_SHIFTS,
        suits=in_real,
    ),
    Fault(
        "interpolation-poor",
        "centre-scattered",
        (0.001, 0.1, 0.7),
        "angstrom",
        move_centre,
        MISREAD_SHIFTS,
        suits=in_real,
    ),
    Fault(
        "centres-off",
        "centre-moved",
        (2.5,),
        "angstrom",
        move_centre,
        flags("centres-off"),
        suits=in_real,
    ),
    Fault(
        "centres-off",
        "centre-moved-beside-wsvec",
        (0.001, 0.1, 0.7, 2.5),
        "angstrom",
        move_centre_beside_shifts,
        flags("centres-off"),
        suits=in_real,
    ),
    Fault(
        "none",
        "centre-in-another-supercell",
        (1, -3),
        "supercells",
        move_centre_by_supercell,
        flags(),
        suits=in_real,
    ),
    Fault(
        "interpolation-poor",
        "eig-shifted",
        (0.001, 0.05, 0.4),
        "eV",
        shift_eig,
        flags("interpolation-poor"),
        suits=in_real,
    ),
    Fault(
        "interpolation-poor",
        "eig-stretched",
        (1e-4, 0.02, 0.2),
        "relative",
        stretch_eig,
        flags("interpolation-poor"),
        suits=in_real,
    ),
    Fault(
        "interpolation-poor",
        "eig-of-another-compound",
        (1,),
        "",
        foreign_eig,
        flags("interpolation-poor"),
        suits=has_twin,
    ),
    Fault(
        "inside-error-bar",
        "digits-lost",
        (0.01, 1, 10, 100),
        "meV in the last place",
        round_digits,
        flags("inside-error-bar"),
        truth_in_models=CHANGED,
    ),
    Fault(
        "inside-error-bar",
        "digits-lost-alone",
        (0.01, 1, 10, 100),
        "meV in the last place",
        round_digits_alone,
        flags("inside-error-bar"),
        suits=in_real,
    ),
    Fault(
        "noise",
        "noise-of-elements",
        (1e-5, 0.1, 3, 100),
        "meV on each number",
        noise_of_elements,
        # below the size at which it is told as noise, each symmetry that it breaks says so
        flags("noise", "not-hermitian", "time-reversal-broken", "symmetry-broken"),
    ),
    Fault(
        "fermi-outside-gap",
        "energies-shifted",
        (0.001, 0.3, 3),
        "eV",
        shift_energies,
        flags("fermi-outside-gap", "filling-off", "interpolation-poor"),
    ),
    Fault("none", "conjugated", (1,), "", conjugate, flags()),
)
