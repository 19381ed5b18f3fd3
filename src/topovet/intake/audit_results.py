"""What the intake audit measures of the files."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class HamiltonianAudit:
    """Soundness of H(R) as the file gives it, before anything is mended.

    Attributes
    ----------
    file, header, reader
        See `topovet.intake.records.HamiltonianFile`.
    n_wann, n_r
        Wannier functions; R vectors as listed.
    hermiticity_mev
        Spectral norm of H(R) - H(-R)† of the raw file, largest over R that have a partner; where
        the degeneracies of R and -R differ, their ratio is applied to H(-R).
    duplicate_r
        R vectors listed more than once, each named once, at most ten of them.
    duplicates_identical
        Whether all repeated blocks and degeneracies are the same, bit for bit; True without any.
    missing_partner_r
        R whose -R is not listed, at most ten.
    n_missing_partner
        Their number.
    missing_partner_mev
        Largest |H_mn(R)| among them, meV, as printed.
    degeneracy_sum
        Sum of 1/ndegen over distinct R, missing partners supplied; equals the number of mesh
        points for a Wigner-Seitz set.
    all_degeneracies_one
        Whether every listed degeneracy is 1, as in lists that no mesh stands behind.
    mesh_points
        N1 N2 N3 of mp_grid; None without it.
    onsite_scale_ev
        Spectral norm of H(0) minus its mean energy, eV; 0 where R = 0 is missing.
    rounding_mev
        Spectral-norm error of H(k) that rounding to the columns' decimals allows, meV: the bound
        of each pair R, -R, added over pairs as root of the sum of squares; 0 for exponent form.
    shift_source
        "wsvec file", "rebuilt from centres", "rebuilt from declared sites", "none needed",
        "not available".
    shift_note
        One sentence about it.
    centre_offsets_ang
        Distance of each Wannier centre from its declared site modulo the supercell; empty if
        unknown.
    n_zero_r
        R vectors whose blocks are zero to the last digit.
    weakest_block_mev
        Smallest of the largest |H_mn(R)| of all other R, meV, as printed.
    last_digit_mev
        One unit of the last printed digit, meV; 0 for exponent form.
    """

    file: str
    header: str
    reader: str
    n_wann: int
    n_r: int
    hermiticity_mev: float
    duplicate_r: tuple[tuple[int, int, int], ...]
    duplicates_identical: bool
    missing_partner_r: tuple[tuple[int, int, int], ...]
    n_missing_partner: int
    missing_partner_mev: float
    degeneracy_sum: float
    all_degeneracies_one: bool
    mesh_points: int | None
    onsite_scale_ev: float
    rounding_mev: float
    shift_source: str
    shift_note: str
    centre_offsets_ang: tuple[float, ...]
    n_zero_r: int = 0
    weakest_block_mev: float = 0.0
    last_digit_mev: float = 0.0
