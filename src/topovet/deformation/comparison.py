"""Whether two Hamiltonians are written in the same functions, so that mixing them means something.

H(lambda) = (1 - lambda) H_A + lambda H_B is a Hamiltonian of one crystal only if function n of A
and function n of B are the same orbital with the same sign, on the same site, in the same cell.
That the declarations say so is not enough; the Hamiltonians themselves are asked: for each function

    o_n = Re sum_Rm H_A,nm(R)* H_B,nm(R) / (|H_A,n| |H_B,n|),

the diagonal of R = 0 left out (its size says where the zero of energy lies). A sign turned round,
two functions interchanged or one taken from another cell turn or destroy o_n. A set that couples
weakly to the rest may be turned as a whole and leave every o_n near 1: the signs that make the
overlap of all pairs largest are therefore found as well (leading eigenvector of the signed
overlaps), and must be equal.

Thresholds, from trials on first-principles pairs: strained by up to 8 % every o_n is above 0.96;
with one sign turned some o_n is below -0.9, with two functions interchanged below 0.4.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.linalg import polar
from scipy.sparse.csgraph import connected_components

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.deformation.results import Comparison
from topovet.errors import UndefinedError
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel, r_index
from topovet.symmetry.results import InversionOperator

LEAST_OVERLAP = 0.8
"""Least o_n: halfway between what strain and what a wrong order do to it, on the safe side."""

LEAST_COUNTER_OVERLAP = 0.5
"""Hoppings between two sets that overlap by less than minus this say that one set is turned."""

MOST_STRETCH = 1.2
"""Largest principal stretch of the cell, or its inverse (practice: strains are far below)."""

MOST_ROTATION_DEG = 5.0
"""Largest rotation of the cell: orbitals are declared along Cartesian axes."""

MOST_DISPLACEMENT_ANG = 0.75
"""Largest move of a site against the cell: half of a short bond."""

COUPLING_FLOOR_EV = 1e-6
"""Functions whose off-diagonal row is smaller in either Hamiltonian have nothing to compare."""


class NotComparableError(UndefinedError):
    """Two Hamiltonians that cannot be mixed."""


@dataclass(frozen=True, slots=True, eq=False)
class EndMember:
    """One end of the way.

    Attributes
    ----------
    name
        For messages.
    crystal, basis
        The basis is None where no orbitals are declared.
    model
        H(R), spinors interlaced.
    filling
        Occupied bands, spin counted.
    time_reversal
        Whether H has it.
    inversion
        Operator on the declared orbitals; None where there is none.
    """

    name: str
    crystal: Crystal
    basis: OrbitalBasis | None
    model: TightBindingModel
    filling: int
    time_reversal: bool
    inversion: InversionOperator | None


@dataclass(frozen=True, slots=True, eq=False)
class ComparedPair:
    """Two ends on one list of R, in one set of functions, and the grounds for it."""

    a: EndMember
    b: EndMember
    comparison: Comparison


def compare_ends(a: EndMember, b: EndMember) -> ComparedPair:
    """Bring two ends to one form; a spinless one beside a spinful one is taken for either spin.

    Raises
    ------
    NotComparableError
        They are not written in the same functions; the message says in what they differ.
    """
    spin_added = ""
    if a.model.spinful != b.model.spinful:
        spin_added = "B" if a.model.spinful else "A"
        a, b = (end if end.model.spinful else with_spin(end) for end in (a, b))
    _check_counts(a, b, spin_added)
    stretches, rotation = _check_cells(a, b)
    functions, displacement = _check_functions(a, b)
    a, b = on_one_list(a, b)
    common = int(np.sum(np.any(a.model.h_r, axis=(1, 2)) & np.any(b.model.h_r, axis=(1, 2))))
    overlap, by_function = _check_overlap(a, b)
    x, y, z = (float(s) for s in stretches)
    known = np.where(np.isnan(by_function), np.inf, by_function)
    comparison = Comparison(
        overlap=overlap,
        function_overlaps=tuple(float(o) for o in by_function),
        least_function=int(np.argmin(known)),
        functions=functions,
        n_common=common,
        n_union=a.model.n_r,
        stretches=(x, y, z),
        rotation_deg=rotation,
        displacement_ang=displacement,
        substitutions=_substitutions(a.crystal, b.crystal),
        spin_added=spin_added,
    )
    return ComparedPair(a, b, comparison)


def with_spin(end: EndMember) -> EndMember:
    """A spinless Hamiltonian for spin up and down alike, interlaced."""
    model = end.model
    h_r = np.asarray(np.kron(model.h_r, np.eye(2)), dtype=np.complex128)
    inversion = end.inversion
    if inversion is not None:
        inversion = replace(
            inversion,
            matrix=np.asarray(np.kron(inversion.matrix, np.eye(2)), dtype=np.complex128),
            shifts=np.repeat(inversion.shifts, 2, axis=0),
            homes=np.repeat(inversion.homes, 2, axis=0),
        )
    return replace(
        end,
        model=TightBindingModel(model.r_cells, h_r, True),
        basis=None if end.basis is None else _spin_basis(end.basis),
        filling=2 * end.filling,
        inversion=inversion,
    )


def _spin_basis(basis: OrbitalBasis) -> OrbitalBasis:
    twice = np.repeat(np.arange(basis.n_orb), 2)
    return OrbitalBasis(
        basis.positions_frac[twice],
        basis.harmonics[twice],
        np.tile(np.eye(2, dtype=complex), (basis.n_orb, 1)),
        tuple(f"{label} {spin}" for label in basis.labels for spin in ("up", "down")),
        basis.shells[twice],
    )


def _check_counts(a: EndMember, b: EndMember, spin_added: str) -> None:
    twice = " (the spinless one counted twice)" if spin_added else ""
    if a.model.n_orb != b.model.n_orb:
        raise NotComparableError(
            f"{a.name} has {a.model.n_orb} Wannier functions and {b.name} has {b.model.n_orb}"
            f"{twice}: the two cannot be mixed; use runs with the same "
            "projections and windows."
        )
    if a.crystal.periodic != b.crystal.periodic:
        raise NotComparableError(
            f"{a.name} is {a.crystal.dimension}-dimensional and {b.name} "
            f"{b.crystal.dimension}-dimensional: the two cannot be mixed; set dimension in "
            "case.toml if one of them was guessed wrong."
        )
    if a.filling != b.filling:
        raise NotComparableError(
            f"{a.name} has {a.filling} filled bands and {b.name} has {b.filling}"
            f"{twice}: no gap leads from one to the other; give one --filling "
            "for both, or mend the electron count of one."
        )


def _check_cells(a: EndMember, b: EndMember) -> tuple[FloatArray, float]:
    """Principal stretches and rotation of the map that takes the cell of A to that of B."""
    rotation, stretch = polar(np.linalg.solve(a.crystal.cell, b.crystal.cell))
    stretches = np.linalg.eigvalsh(stretch)
    angle = float(np.degrees(np.arccos(np.clip((np.trace(rotation) - 1) / 2, -1, 1))))
    if max(stretches.max(), 1 / stretches.min()) > MOST_STRETCH:
        raise NotComparableError(
            f"the cell of {b.name} is that of {a.name} stretched by factors from "
            f"{stretches.min():.3f} to {stretches.max():.3f}, at most {MOST_STRETCH:g} is taken "
            "for a strain: write both in the same setting of the cell."
        )
    if angle > MOST_ROTATION_DEG or np.linalg.det(rotation) < 0:
        raise NotComparableError(
            f"the cell of {b.name} is turned by {angle:.1f} degrees against that of {a.name}, and "
            f"orbitals are declared along Cartesian axes; at most {MOST_ROTATION_DEG:g} degrees "
            "are accepted: write both in the same setting of the cell."
        )
    return stretches, angle


def _check_functions(a: EndMember, b: EndMember) -> tuple[str, float | None]:
    """Declared orbitals one by one: site, harmonic, spin, shell."""
    if a.basis is None or b.basis is None:
        silent = " and ".join(end.name for end in (a, b) if end.basis is None)
        return f"{silent} declares no orbitals: only the overlap of H(R) speaks for them", None
    one, two = a.basis, b.basis
    differs = (
        (np.abs(one.harmonics - two.harmonics).max(axis=1) > 1e-6)
        | (np.abs(one.spinors - two.spinors).max(axis=1) > 1e-6)
        | (one.shells != two.shells)
    )
    if differs.any():
        n = int(differs.argmax())
        raise NotComparableError(
            f"Wannier function {n + 1} is declared as {one.labels[n]} in {a.name} and as "
            f"{two.labels[n]} in {b.name}: list the projections of both in the same order and "
            "along the same axes."
        )
    moved = (two.positions_frac - one.positions_frac) @ ((a.crystal.cell + b.crystal.cell) / 2)
    moved -= moved.mean(axis=0)  # the origin is free
    lengths = np.linalg.norm(moved, axis=1)
    if lengths.max() > MOST_DISPLACEMENT_ANG:
        n = int(lengths.argmax())
        raise NotComparableError(
            f"the site of Wannier function {n + 1} ({one.labels[n]}) moves by {lengths[n]:.2f} "
            f"angstrom from {a.name} to {b.name}, at most {MOST_DISPLACEMENT_ANG:g} are taken for "
            "a strain: list sites in the same order and in the same cell."
        )
    return "declared", float(lengths.max())


def on_one_list(a: EndMember, b: EndMember) -> tuple[EndMember, EndMember]:
    """Both with the R vectors that either has."""
    union = np.unique(np.concatenate([a.model.r_cells, b.model.r_cells]), axis=0)
    return (
        replace(a, model=_spread(a.model, union)),
        replace(b, model=_spread(b.model, union)),
    )


def _spread(model: TightBindingModel, r_cells: IntArray) -> TightBindingModel:
    h_r = np.zeros((len(r_cells), model.n_orb, model.n_orb), dtype=np.complex128)
    h_r[r_index(r_cells, model.r_cells)] = model.h_r
    return TightBindingModel(r_cells, h_r, model.spinful)


def _check_overlap(a: EndMember, b: EndMember) -> tuple[float, FloatArray]:
    """The overlap of the two, and of each function's row."""
    one, two = _without_levels(a.model), _without_levels(b.model)
    by_pair = np.einsum("rmn,rmn->mn", one.conj(), two).real
    sizes = [np.sqrt(np.einsum("rmn,rmn->m", h.conj(), h).real) for h in (one, two)]
    coupled = np.minimum(*sizes) > COUPLING_FLOOR_EV
    with np.errstate(invalid="ignore", divide="ignore"):
        by_function = np.where(coupled, by_pair.sum(axis=1) / (sizes[0] * sizes[1]), np.nan)
    scale = np.linalg.norm(one) * np.linalg.norm(two)
    overlap = float(by_pair.sum() / scale) if scale > 0 else 1.0
    turned = _turned_functions(one, two, by_pair)
    if len(turned):
        raise NotComparableError(
            f"{a.name} and {b.name} differ in the signs of Wannier function"
            f"{'s' if len(turned) > 1 else ''} {_numbers(turned)} (the overlap of their H(R) is "
            f"{overlap:.3f}, and largest with these turned round): turn them in one of the two."
        )
    worst = int(np.argmin(np.where(coupled, by_function, np.inf)))
    if coupled[worst] and by_function[worst] < LEAST_OVERLAP:
        raise NotComparableError(
            f"the hoppings of Wannier function {worst + 1}{_label(a.basis, worst)} in {a.name} and "
            f"{b.name} overlap by {by_function[worst]:.3f}, at least {LEAST_OVERLAP:g} needed: "
            "another order, phase, home cell or shape of the functions; make both with the same "
            "projections, without a minimisation that mixes them."
        )
    return overlap, by_function


def _without_levels(model: TightBindingModel) -> ComplexArray:
    h_r = np.array(model.h_r)
    home = model.n_r // 2  # R = 0, by the sort order; a closed list without it has even length
    if model.n_r % 2:
        h_r[home] -= np.diag(np.diag(h_r[home]))
    return h_r


def _turned_functions(one: ComplexArray, two: ComplexArray, by_pair: FloatArray) -> IntArray:
    """Functions whose sign is to be turned for the overlap to be largest, set by coupled set."""
    overlap = 0.5 * (by_pair + by_pair.T)
    coupled = np.abs(overlap) > 1e-9 * np.abs(overlap).max(initial=0.0)
    n_sets, member = connected_components(coupled)
    turned = np.zeros(len(overlap), dtype=bool)
    for i in range(n_sets):
        rows = np.flatnonzero(member == i)
        odd, even = rows[(signs := _best_signs(overlap[np.ix_(rows, rows)])) < 0], rows[signs > 0]
        across = [np.linalg.norm(h[:, odd][:, :, even]) for h in (one, two)]
        if min(across) > COUPLING_FLOOR_EV:
            between = by_pair[np.ix_(odd, even)].sum() / (across[0] * across[1])
            turned[odd] = between < -LEAST_COUNTER_OVERLAP
    return np.flatnonzero(turned)


def _best_signs(overlap: FloatArray) -> FloatArray:
    """Signs s, mostly +1, for which s.overlap.s is large: those of the leading eigenvector."""
    leading = np.linalg.eigh(overlap - np.diag(np.diag(overlap)))[1][:, -1]
    signs = np.where(leading < 0, -1.0, 1.0)
    return signs if signs.sum() >= 0 else -signs


def _substitutions(a: Crystal, b: Crystal) -> tuple[str, ...]:
    if len(a.symbols) != len(b.symbols):
        return ()
    pairs = zip(a.symbols, b.symbols, strict=True)
    return tuple(sorted({f"{old} -> {new}" for old, new in pairs if old != new}))


def _label(basis: OrbitalBasis | None, n: int) -> str:
    return "" if basis is None else f" ({basis.labels[n]})"


def _numbers(functions: IntArray) -> str:
    shown = ", ".join(str(n + 1) for n in functions[:8])
    return shown + (f" and {len(functions) - 8} more" if len(functions) > 8 else "")
