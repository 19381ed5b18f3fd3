"""Irreps of the bands at high-symmetry k: levels, labels and purity; parity is one case of it.

Which bands form a level is decided on H averaged over the little group, time reversal included:
there degeneracies are exact and no tolerance on energies has to absorb a broken symmetry. What the
level is, is measured on the states of H itself: the eigenvalues of the projector onto each irrep,
restricted to the level, are 0 or 1 for an exact symmetry, and their distance from that is reported.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, largest_spectral_norm
from topovet.invariants.irrep_results import IrrepContent, LevelIrreps, PointIrreps
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.irrep_names import IrrepName, name_irreps
from topovet.symmetry.irreps import compute_irreps, isotypic_projectors
from topovet.symmetry.little_group import LittleGroup, find_little_group, list_operations
from topovet.symmetry.operators import WannierOperator, operator_at
from topovet.symmetry.special_points import SpecialPoint, find_special_points
from topovet.units import MEV_PER_EV

DEGENERACY_EV = 1e-6
"""Eigenvalues of the averaged H within this belong to one level; symmetry makes them equal to
rounding, and levels that meet by accident this closely cannot be told apart in any file."""

MIN_PURITY = 0.8
"""Least purity with which irreps are read, as for parities."""


def compute_band_irreps(
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    crystal: Crystal,
    *,
    spinful: bool,
    filling: int | None = None,
    centre_frac: FloatArray | None = None,
) -> tuple[PointIrreps, ...]:
    """Irreps of all bands at the special points of the band path and at the TRIM.

    Parameters
    ----------
    bloch
        The Hamiltonian.
    operators
        Its group: all unitary operations modulo lattice translations and, where time reversal or
        its products are symmetries, the antiunitary ones.
    crystal
        Gives the cell and the names of the points.
    spinful
        Double-valued representations, Theta^2 = -1.
    filling
        Occupied bands, spin counted, where they are wanted separately.
    centre_frac
        (3,) inversion centre of the parities; that of the operation {-1|w} if None.

    Raises
    ------
    NotAGroupError, NoInversionError
        The operations are no group, or have no inversion about the centre.
    """
    operations = list_operations(operators, crystal.cell, spinful=spinful)
    with one_blas_thread():
        return tuple(
            compute_point_irreps(
                bloch,
                operators,
                find_little_group(operations, point.k_frac),
                point,
                filling=filling,
                centre_frac=centre_frac,
            )
            for point in find_special_points(crystal, operations)
        )


def compute_point_irreps(
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    group: LittleGroup,
    point: SpecialPoint,
    *,
    filling: int | None = None,
    centre_frac: FloatArray | None = None,
) -> PointIrreps:
    """Irreps of all bands at one k; parameters as for `compute_band_irreps`.

    Parameters
    ----------
    group
        The little group of the point, from the same operators in the same order.
    """
    k = group.k_frac[None]
    h = bloch.at(k)[0]
    d = np.array([operator_at(operators[i], k)[0] for i in group.members])
    a = np.array([operator_at(operators[i], k)[0] for i in group.reversing])
    irreps = compute_irreps(group)
    names = name_irreps(group, irreps, point.name, centre_frac)
    projectors = isotypic_projectors(irreps, d)
    energies, states = np.linalg.eigh(h)
    images = _images(h, d, a.reshape(-1, *h.shape))
    average = images.mean(axis=0)
    levels = tuple(
        _level(energies, states, projectors, names, part) for part in level_slices(average)
    )
    occupied = None
    if filling is not None:
        occupied = measure_content(states[:, :filling], projectors, names)
    n_plus, n_minus = _parity_totals(occupied, names)
    return PointIrreps(
        point=point.name,
        k_frac=point.k_frac,
        star=point.star,
        is_trim=point.is_trim,
        group_order=len(d),
        n_antiunitary=len(a),
        irreps=names,
        levels=levels,
        occupied=occupied,
        gap_ev=_gap(energies, filling),
        n_plus=n_plus,
        n_minus=n_minus,
        residual_mev=MEV_PER_EV * largest_spectral_norm(images - h),
        moved_mev=MEV_PER_EV * float(np.linalg.norm(average - h, ord=2)),
    )


def _images(h: ComplexArray, d: ComplexArray, a: ComplexArray) -> ComplexArray:
    """(n, n_orb, n_orb) D H D† of the unitary operations and A H* A† of the antiunitary ones."""
    turned = d @ h @ d.conj().transpose(0, 2, 1)
    reversed_ = a @ h.conj() @ a.conj().transpose(0, 2, 1)
    return np.concatenate([turned, reversed_])


def level_slices(h_average: ComplexArray) -> list[slice]:
    """Bands of each level of an H that commutes with the little group."""
    energies = np.linalg.eigvalsh(h_average)
    edges = [0, *(np.flatnonzero(np.diff(energies) > DEGENERACY_EV) + 1).tolist(), len(energies)]
    return [slice(a, b) for a, b in itertools.pairwise(edges)]


def measure_content(
    states: ComplexArray, projectors: ComplexArray, names: Sequence[IrrepName]
) -> IrrepContent:
    """How often each irrep occurs among some states, and how purely.

    Parameters
    ----------
    states
        (n_orb, n) orthonormal.
    projectors
        (n_irrep, n_orb, n_orb) onto the states of each irrep.
    names
        The irreps.
    """
    if not states.shape[1]:
        return IrrepContent((0.0,) * len(names), (0,) * len(names), 1.0, True)
    inside = np.linalg.eigvalsh(states.conj().T @ projectors @ states)
    dimensions = np.array([name.dimension for name in names])
    found = (inside > 0.5).sum(axis=1)
    counts = found // dimensions
    purity = float(np.abs(2 * inside - 1).min())
    whole = np.all(found % dimensions == 0) and found.sum() == states.shape[1]
    return IrrepContent(
        multiplicities=tuple((inside.sum(axis=1) / dimensions).tolist()),
        counts=tuple(counts.tolist()),
        purity=min(purity, 1.0),
        resolved=bool(whole and purity >= MIN_PURITY),
    )


def _level(
    energies: FloatArray,
    states: ComplexArray,
    projectors: ComplexArray,
    names: Sequence[IrrepName],
    bands: slice,
) -> LevelIrreps:
    content = measure_content(states[:, bands], projectors, names)
    label, textbook = level_label(content, names)
    return LevelIrreps(
        first_band=int(bands.start),
        n_bands=int(bands.stop - bands.start),
        energy_ev=float(energies[bands].mean()),
        spread_mev=MEV_PER_EV * float(np.ptp(energies[bands])),
        label=label,
        textbook=textbook,
        content=content,
    )


def level_label(content: IrrepContent, names: Sequence[IrrepName]) -> tuple[str, str | None]:
    """Own and textbook label of a level, e.g. ("L1ab−", "L4,5−"); ("?", None) if not resolved."""
    if not content.resolved:
        return "?", None
    own: list[str] = []
    textbook: list[str | None] = []
    for i, (name, count) in enumerate(zip(names, content.counts, strict=True)):
        j = name.partner
        pairs = 0 if j == i else min(count, content.counts[j])
        shared = name.textbook == names[j].textbook  # "4,5" stands for either of the pair
        if pairs and i < j:
            own.append(_times(pairs, name.level_label))
            for once in (name.textbook,) if shared else (name.textbook, names[j].textbook):
                textbook.append(once and _times(pairs, once))
        if count > pairs:
            own.append(_times(count - pairs, name.label))
            kramers = 2 if name.time_reversal == "doubled" else 1
            once = name.textbook
            textbook.append(once and _times((count - pairs) // kramers, once))
    known = [name for name in textbook if name is not None]
    return " ⊕ ".join(own), " ⊕ ".join(known) if len(known) == len(textbook) else None


def _times(count: int, label: str) -> str:
    return label if count == 1 else f"{count} {label}"


def _parity_totals(
    content: IrrepContent | None, names: Sequence[IrrepName]
) -> tuple[int | None, int | None]:
    """Even and odd states; an irrep of parity 0 holds as many of either."""
    parities = [name.parity for name in names]
    if content is None or not content.resolved or any(p is None for p in parities):
        return None, None
    balance = states = 0
    for name, count in zip(names, content.counts, strict=True):
        balance += count * name.dimension * (name.parity or 0)
        states += count * name.dimension
    return (states + balance) // 2, (states - balance) // 2


def _gap(energies: FloatArray, filling: int | None) -> float | None:
    if filling is None or not 0 < filling < len(energies):
        return None
    return float(energies[filling] - energies[filling - 1])
