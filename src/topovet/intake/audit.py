"""The intake audit: what can be said about H(R) from the file alone, before it is mended."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from topovet.intake.audit_results import HamiltonianAudit
from topovet.intake.lattice_keys import check_lattice_vectors, first_rows_of
from topovet.intake.records import HamiltonianFile
from topovet.units import MEV_PER_EV

MOST_LISTED = 10
"""Offending R vectors named in the audit; their number is always given."""


def audit_hamiltonian(
    hamiltonian: HamiltonianFile,
    *,
    mp_grid: tuple[int, int, int] | None,
    shift_source: str,
    shift_note: str,
    centre_offsets: FloatArray | None = None,
) -> HamiltonianAudit:
    """Measure the soundness of H(R) as the file gives it.

    Beside the Hamiltonian itself only a few n_wann x n_wann blocks are held at a time.

    Parameters
    ----------
    hamiltonian
        As read.
    mp_grid
        The mesh, None where unknown.
    shift_source, shift_note
        See `HamiltonianAudit`.
    centre_offsets
        (n_wann,) angstrom from `topovet.intake.shifts.centre_branches.centre_offsets`, if known.

    Returns
    -------
    HamiltonianAudit

    Raises
    ------
    InputError
        A lattice vector that no Hamiltonian reaches to.
    """
    check_lattice_vectors(hamiltonian.r_cells, hamiltonian.file)
    r_cells = np.asarray(hamiltonian.r_cells, dtype=np.int64)
    partner = first_rows_of(r_cells, -r_cells)
    missing = partner < 0
    largest = _largest_elements(hamiltonian.h_r)
    repeats = first_rows_of(r_cells, r_cells) != np.arange(len(r_cells))
    offsets = () if centre_offsets is None else tuple(np.asarray(centre_offsets).tolist())
    return HamiltonianAudit(
        file=Path(hamiltonian.file).name,
        header=hamiltonian.header,
        reader=hamiltonian.reader,
        n_wann=hamiltonian.n_wann,
        n_r=len(r_cells),
        hermiticity_mev=MEV_PER_EV * _hermiticity(hamiltonian, partner, repeats),
        duplicate_r=_listed(np.unique(r_cells[repeats], axis=0)),
        duplicates_identical=_all_identical(hamiltonian, repeats),
        missing_partner_r=_listed(r_cells[missing]),
        n_missing_partner=int(missing.sum()),
        missing_partner_mev=MEV_PER_EV * float(largest[missing].max(initial=0.0)),
        degeneracy_sum=_degeneracy_sum(hamiltonian, repeats, missing),
        all_degeneracies_one=bool(np.all(hamiltonian.degeneracies == 1)),
        mesh_points=None if mp_grid is None else int(np.prod(mp_grid)),
        onsite_scale_ev=_onsite_scale(hamiltonian),
        rounding_mev=MEV_PER_EV * _rounding(hamiltonian),
        shift_source=shift_source,
        shift_note=shift_note,
        centre_offsets_ang=offsets,
        n_zero_r=int((largest == 0).sum()),
        weakest_block_mev=MEV_PER_EV * _smallest_not_zero(largest),
        last_digit_mev=0.0
        if hamiltonian.decimals is None
        else MEV_PER_EV * 10.0**-hamiltonian.decimals,
    )


def _degeneracy_sum(hamiltonian: HamiltonianFile, repeats: BoolArray, missing: BoolArray) -> float:
    """Sum of 1/ndegen over distinct R, each -R that is not listed counted with its partner."""
    weights = 1.0 / hamiltonian.degeneracies
    return float(weights[~repeats].sum() + weights[missing & ~repeats].sum())


def _listed(vectors: IntArray) -> tuple[tuple[int, int, int], ...]:
    return tuple((int(x), int(y), int(z)) for x, y, z in vectors[:MOST_LISTED])


def _largest_elements(h_r: ComplexArray) -> FloatArray:
    """(n_r,) largest |H_mn(R)| of each R, eV; one block at a time."""
    return np.array([np.abs(block).max(initial=0.0) for block in h_r], dtype=float)


def _smallest_not_zero(values: FloatArray) -> float:
    return float(values[values > 0].min()) if values.any() else 0.0


def _hermiticity(hamiltonian: HamiltonianFile, partner: IntArray, repeats: BoolArray) -> float:
    """Largest spectral norm of H(R) - H(-R)† d(R)/d(-R), eV.

    The ratio of degeneracies is 1 in a sound file; where it is not, it breaks Hermiticity of the
    weighted sum as a wrong element would. Of repeated R the first listing counts.
    """
    h_r, degeneracies = hamiltonian.h_r, hamiltonian.degeneracies
    rows = np.flatnonzero((partner >= 0) & ~repeats)
    ratio = degeneracies[rows] / degeneracies[partner[rows]]

    def difference(i: int) -> ComplexArray:
        return np.asarray(h_r[rows[i]] - ratio[i] * h_r[partner[rows[i]]].conj().T)

    frobenius = np.array([np.linalg.norm(difference(i)) for i in range(len(rows))])
    worst = 0.0
    for i in np.argsort(-frobenius):
        if frobenius[i] <= worst:  # spectral norm <= Frobenius norm: no later one can win
            break
        worst = max(worst, float(np.linalg.norm(difference(i), 2)))
    return worst


def _all_identical(hamiltonian: HamiltonianFile, repeats: BoolArray) -> bool:
    """Whether each repeated R carries the block and the degeneracy of its first listing."""
    first = first_rows_of(hamiltonian.r_cells, hamiltonian.r_cells)
    h_r, degeneracies = hamiltonian.h_r, hamiltonian.degeneracies
    return all(
        degeneracies[row] == degeneracies[first[row]] and np.array_equal(h_r[row], h_r[first[row]])
        for row in np.flatnonzero(repeats)
    )


def _onsite_scale(hamiltonian: HamiltonianFile) -> float:
    """Spectral norm of H(0) minus its mean energy, eV; 0 where R = 0 is not listed."""
    row = int(first_rows_of(hamiltonian.r_cells, np.zeros((1, 3), dtype=np.int64))[0])
    if row < 0:
        return 0.0
    onsite = hamiltonian.h_r[row] / hamiltonian.degeneracies[row]
    mean = np.trace(onsite) / hamiltonian.n_wann
    return float(np.linalg.norm(onsite - mean * np.eye(hamiltonian.n_wann), 2))


def _rounding(hamiltonian: HamiltonianFile) -> float:
    """Error of H(k) that rounding to the printed decimals allows, eV.

    Half a unit of the last digit in real and imaginary part gives a block of Frobenius norm, and
    hence of spectral norm, at most n 10^-d / sqrt(2). R and -R carry the same rounding, so a pair
    contributes up to twice that; different pairs are independent and add up as the root of the
    sum of their squares, weights 1/ndegen included.
    """
    if hamiltonian.decimals is None:
        return 0.0
    block = hamiltonian.n_wann * 10.0**-hamiltonian.decimals
    return float(block * np.sqrt((1.0 / hamiltonian.degeneracies**2.0).sum()))
