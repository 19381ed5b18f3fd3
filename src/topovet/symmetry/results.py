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
class SpinOrder:
    """How a spinful file orders its Wannier functions.

    Attributes
    ----------
    found
        "interlaced" (up, down, up, …), "block" (all up, then all down), or "none" when spinless.
    interlaced_mev, block_mev
        Violation of time reversal in either order, meV; None for an odd number of functions.
    spinless_mev
        Violation of time reversal without spin, H(-k) = H(k)*, meV.
    swapped_pairs
        Orbitals (0-based, two functions each) whose up and down change places in the reading that
        suits time reversal best; empty where none does, or where an order as such already holds.
    swapped_mev
        Violation of time reversal with these turned round, meV; None where it was not needed.
    """

    found: str
    interlaced_mev: float | None
    block_mev: float | None
    spinless_mev: float
    swapped_pairs: tuple[int, ...] = ()
    swapped_mev: float | None = None


@dataclass(frozen=True, slots=True)
class TimeReversalTest:
    """Whether H(k) has time reversal.

    Attributes
    ----------
    present
        The violation is within `tolerance_mev`; judged on the unshifted reading where there is one.
    violation_mev
        Spectral norm of Theta H(k) Theta^-1 - H(-k), largest over the sampled k.
    violation_r_mev
        The same in real space, Theta H(R) Theta^-1 - H(R), largest over R.
    violation_unshifted_mev
        Like violation_mev for the Hamiltonian read without `use_ws_distance` shifts; None where no
        shifts were applied. The shifts share hoppings between images whose centres tie within a
        tolerance, and can break time reversal by some meV between the mesh points of a
        Hamiltonian that has it.
    kramers_splitting_mev
        Largest splitting of a Kramers pair at the TRIM; None when spinless.
    spin_mixing_mev
        Largest |H(R)| between up and down plus largest |H_upup - H_downdown|: zero without
        spin-orbit coupling; None when spinless.
    """

    present: bool
    violation_mev: float
    violation_r_mev: float
    violation_unshifted_mev: float | None
    kramers_splitting_mev: float | None
    spin_mixing_mev: float | None
    tolerance_mev: float


@dataclass(frozen=True, slots=True, eq=False)
class InversionOperator:
    """Inversion on the Wannier functions, P|n R> = sum_m |m, L_n - C_m - R> matrix[m, n].

    Attributes
    ----------
    centre_frac
        (3,) fixed point, fractional.
    matrix
        (n_orb, n_orb) unitary, connects each site with its image.
    shifts
        (n_orb, 3) integer L_n, cell of the first function on the image's site.
    homes
        (n_orb, 3) integer C_m, cell of a function relative to the first one on its site; zero
        unless functions of one site are listed in different cells.
    """

    centre_frac: FloatArray
    matrix: ComplexArray
    shifts: IntArray
    homes: IntArray


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


@dataclass(frozen=True, slots=True)
class ShiftTest:
    """Wigner-Seitz shifts put to the test where some centres look wrong.

    Attributes
    ----------
    adopted
        "given" or "mended": the shifts that are used.
    suspects
        Wannier functions whose centre is suspicious (0-based).
    elsewhere
        Those of them whose centre sits on a site that is declared for other functions.
    given_mev, mended_mev
        Inversion residual with either; None where there is no inversion to test them on.
    reason
        One sentence on the choice.
    origin_shift_frac
        Common shift of all centres against the declared sites; None where there is none.
    """

    adopted: str
    suspects: tuple[int, ...]
    elsewhere: tuple[int, ...]
    given_mev: float | None
    mended_mev: float | None
    reason: str
    origin_shift_frac: tuple[float, float, float] | None = None
