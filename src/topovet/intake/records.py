"""What each file of a case says, as read: checked for form, not yet interpreted.

Conventions: lattice vectors are rows in angstrom, positions fractional in the Hamiltonian's
own cell, energies in eV, indices 0-based (the files count from 1).
"""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import ComplexArray, FloatArray, IntArray


@dataclass(frozen=True, slots=True, eq=False)
class HamiltonianFile:
    """H_mn(R) exactly as an `_hr.dat` or `_tb.dat` gives it.

    Attributes
    ----------
    file
        Name of the file.
    header
        Its first line, stripped.
    degeneracies
        (n_r,) Wigner-Seitz degeneracy of each R; h_r is NOT yet divided by it.
    r_cells
        (n_r, 3) integer lattice vectors in file order; duplicates are kept.
    h_r
        (n_r, n_wann, n_wann) eV, element [r, m, n] = <m 0|H|n R>.
    decimals
        Digits after the point in the matrix elements; None where numbers are in exponent form
        or have a varying number of digits.
    reader
        "fixed-columns" (fast path) or "tolerant".
    cell
        (3, 3) angstrom, only in `_tb.dat`.
    centres_cart
        (n_wann, 3) angstrom, diagonal of <m 0|r|n 0>, only in `_tb.dat`.
    """

    file: str
    header: str
    degeneracies: IntArray
    r_cells: IntArray
    h_r: ComplexArray
    decimals: int | None
    reader: str
    cell: FloatArray | None = None
    centres_cart: FloatArray | None = None

    @property
    def n_wann(self) -> int:
        return int(self.h_r.shape[1])


@dataclass(frozen=True, slots=True)
class DeclaredOrbital:
    """One Wannier function as the projection block declares it.

    Attributes
    ----------
    position_frac
        Site, fractional, as written (not wrapped into the cell).
    atom
        Index of the atom it sits on, None for a site given by coordinates with no atom there.
    l, mr
        Wannier90's numbers: l = 0..3 for s..f, -1..-5 for sp, sp2, sp3, sp3d, sp3d2; mr from 1.
    z_axis, x_axis
        Local axes, Cartesian unit vectors (z and x of the crystal by default).
    radial
        1, 2 or 3.
    spin
        +1 up, -1 down, 0 for a spinless Wannier function.
    spin_axis
        Cartesian quantisation axis of the spin.
    """

    position_frac: tuple[float, float, float]
    atom: int | None
    l: int
    mr: int
    z_axis: tuple[float, float, float] = (0.0, 0.0, 1.0)
    x_axis: tuple[float, float, float] = (1.0, 0.0, 0.0)
    radial: int = 1
    spin: int = 0
    spin_axis: tuple[float, float, float] = (0.0, 0.0, 1.0)


@dataclass(frozen=True, slots=True, eq=False)
class WinFile:
    """The part of a `.win` file that vetting needs.

    Attributes
    ----------
    cell
        (3, 3) angstrom, rows; None where the block is missing.
    symbols, positions_frac
        Atoms in file order; positions (n_atoms, 3).
    orbitals
        Declared Wannier functions in Wannier90's order, interlaced spin (up, down, up, ...);
        empty where nothing usable is declared, and then `undeclared_reason` says why.
    kpoints_frac
        (n_k, 3) the coarse mesh of the `kpoints` block, None where the block is missing.
    exclude_bands
        First-principles bands left out, counted from 0, rising.
    """

    file: str
    cell: FloatArray | None
    symbols: tuple[str, ...]
    positions_frac: FloatArray
    spinors: bool
    num_wann: int | None
    num_bands: int | None
    mp_grid: tuple[int, int, int] | None
    kpoints_frac: FloatArray | None
    exclude_bands: tuple[int, ...]
    fermi_energy_ev: float | None
    use_ws_distance: bool
    ws_distance_tol: float
    ws_search_size: tuple[int, int, int]
    orbitals: tuple[DeclaredOrbital, ...]
    undeclared_reason: str | None


@dataclass(frozen=True, slots=True, eq=False)
class WsShifts:
    """Shift vectors T of `use_ws_distance`, one list for each (R, m, n).

    Attributes
    ----------
    r_cells
        (n_r, 3) the R vectors, in the order of the Hamiltonian file they belong to.
    counts
        (n_r, n_wann, n_wann) number N_T >= 1 of shifts of each element.
    shifts
        (sum of counts, 3) integer lattice vectors, concatenated in C order of `counts`.
    """

    r_cells: IntArray
    counts: IntArray
    shifts: IntArray


@dataclass(frozen=True, slots=True, eq=False)
class CentresFile:
    """Wannier centres (n_wann, 3) in Cartesian angstrom, as printed."""

    file: str
    centres_cart: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class EigFile:
    """First-principles energies on the coarse mesh, (n_k, n_bands) eV, in `.win` k-point order."""

    file: str
    energies_ev: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class BandFile:
    """Wannier90's own interpolated bands: k_frac (n_k, 3), energies_ev (n_k, n_wann)."""

    file: str
    k_frac: FloatArray
    energies_ev: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class StructureFile:
    """A structure read through ASE: cell (3, 3), symbols, positions_frac (n_atoms, 3).

    `notes` are the warnings the reader gave.
    """

    file: str
    cell: FloatArray
    symbols: tuple[str, ...]
    positions_frac: FloatArray
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class CaseSettings:
    """What `case.toml` says; None where it is silent."""

    name: str | None = None
    filling: int | None = None
    fermi_ev: float | None = None
    dimension: int | None = None
    inversion_centre: tuple[float, float, float] | None = None
    surface: tuple[int, int, int] | None = None
    spinless: str | None = None


@dataclass(frozen=True, slots=True)
class CaseFiles:
    """Paths of the files found in a case folder (None where absent), not yet opened.

    `spinless` holds the files of the same compound without spin-orbit coupling, where that is
    named.
    """

    folder: str
    seedname: str
    hr: str | None = None
    tb: str | None = None
    win: str | None = None
    wsvec: str | None = None
    centres: str | None = None
    eig: str | None = None
    band: str | None = None
    band_kpt: str | None = None
    structure: str | None = None
    settings: str | None = None
    spinless: CaseFiles | None = None
