"""What the symmetry step finds, with the evidence."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import ComplexArray, FloatArray, IntArray


@dataclass(frozen=True, slots=True, eq=False)
class SpaceGroup:
    """Space group of the structure, for the input cell.

    Attributes
    ----------
    number, symbol
        International number and short symbol; 0 and "unknown" without a structure.
    rotations, translations
        (n_op, 3, 3) integer and (n_op, 3) fractional, x' = W x + w in the input cell.
    symprec_ang
        Distance tolerance handed to spglib, angstrom.
    centres_frac
        (n, 3) inversion centres in the home cell, fractional; (0, 3) without inversion.
    wyckoff
        Wyckoff letter of each atom.
    """

    number: int
    symbol: str
    rotations: IntArray
    translations: FloatArray
    symprec_ang: float
    centres_frac: FloatArray
    wyckoff: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class TimeReversalTest:
    """Whether H(k) has time reversal, in which spin order.

    Attributes
    ----------
    present
        The smaller violation is within `tolerance_mev`.
    spin_order
        "interlaced", "block" or "none" (spinless): the order that was found and is used.
    violation_mev
        Spectral norm of Theta H Theta^-1 - H, largest over R, for `spin_order`.
    other_order_mev
        The same for the other spin order; None when spinless.
    kramers_splitting_mev
        Largest splitting of a Kramers pair at the TRIM; None when spinless.
    spin_mixing_mev
        Largest |H(R)| between up and down plus largest |H_upup - H_downdown|: zero without
        spin-orbit coupling; None when spinless.
    """

    present: bool
    spin_order: str
    violation_mev: float
    other_order_mev: float | None
    kramers_splitting_mev: float | None
    spin_mixing_mev: float | None
    tolerance_mev: float


@dataclass(frozen=True, slots=True, eq=False)
class InversionOperator:
    """Inversion on the Wannier functions, P|n R> = sum_m |m, L_n - R> matrix[m, n].

    Attributes
    ----------
    centre_frac
        (3,) fixed point, fractional.
    matrix
        (n_orb, n_orb) unitary, connects each site with its image.
    shifts
        (n_orb, 3) integer L_n of the image's cell.
    """

    centre_frac: FloatArray
    matrix: ComplexArray
    shifts: IntArray


@dataclass(frozen=True, slots=True)
class InversionTest:
    """Whether the Hamiltonian has the inversion of its crystal.

    Attributes
    ----------
    present
        The crystal has it, the orbitals are closed under it, and parities can be read.
    reason
        Why not, in one clause; empty when present.
    centre
        Fractional coordinates; None without inversion.
    basis
        "declared" (from the projections) or "none".
    violation_mev
        Spectral norm of P H(k) P^-1 - H(-k), largest over the sampled k.
    violation_r_mev
        Spectral norm of the same difference in real space, largest over R.
    violation_trim_mev
        The same at the TRIM only.
    n_k
        Number of sampled k.
    """

    present: bool
    reason: str
    centre: tuple[float, float, float] | None
    basis: str
    violation_mev: float | None
    violation_r_mev: float | None
    violation_trim_mev: float | None
    n_k: int
