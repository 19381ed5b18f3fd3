"""The declared inversion against the one the Hamiltonian has, and what would explain a difference.

Everything here is evidence: residuals of either operator, the functions on which they disagree, and
other readings of the declaration (`declaration_trials`) with the residual before and after. Two
readings that fit equally well are both listed; nothing is adopted.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, largest_spectral_norm
from topovet.errors import NoInversionError
from topovet.model.assemble import LatticeHamiltonian
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.model.nearest_image import nearest_images
from topovet.model.origin import common_shift
from topovet.symmetry.centre_search import candidate_centres, search_centres
from topovet.symmetry.declaration_results import (
    Correction,
    DeclarationCheck,
    FunctionAgreement,
    OperatorFit,
)
from topovet.symmetry.declaration_trials import (
    Reading,
    group_parity_readings,
    order_readings,
    parity_readings,
    site_reading,
    sites_of_positions,
)
from topovet.symmetry.inference import infer_inversion
from topovet.symmetry.inversion import build_inversion, inversion_at
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.sites import SiteAssignment, declared_sites
from topovet.symmetry.trim import sample_points, trim_points
from topovet.units import MEV_PER_EV

N_GENERIC = 8
"""Generic k-points on which readings are compared, besides the TRIM."""

EXPLAINS = 0.1
"""A reading is listed if it lowers the residual to this share of the declared one's, or of half the
band width where none can be built."""

SOUND_MEV = 0.5
"""A declared operator that fits this well needs no other reading."""

MAX_CORRECTIONS = 8
"""Readings listed, the best first."""


def compare_declaration(
    lattice: LatticeHamiltonian,
    crystal: Crystal,
    basis: OrbitalBasis,
    sites: SiteAssignment,
    centre_frac: FloatArray,
    structure_centres: FloatArray,
    *,
    spinful: bool,
) -> DeclarationCheck:
    """Test the declared orbitals on the Hamiltonian, and look for what mends them.

    Parameters
    ----------
    lattice
        The Hamiltonian, spin interlaced.
    crystal, basis
        As declared, `basis` in the order of the Hamiltonian's rows.
    sites
        Where the functions are: from the centres if there are any, else from `declared_sites`.
    centre_frac
        (3,) inversion centre in question, fractional.
    structure_centres
        (n, 3) all inversion centres of the structure.
    spinful
        As in `infer_inversion`.

    Returns
    -------
    DeclarationCheck
        Evidence, no verdict.
    """
    sample = _sample(lattice.bloch, crystal)
    centre = np.asarray(centre_frac, dtype=float)
    declared = _declared_operator(crystal, basis, centre)
    inferred = infer_inversion(lattice.model, crystal, sites, centre, spinful=spinful)
    trials = search_centres(lattice.model, crystal, sites, structure_centres, spinful=spinful)
    known = inferred.operator if inferred.reliability != "refused" else None
    guide = known or next(
        (t.inferred.operator for t in trials if t.inferred.reliability != "refused"), None
    )
    declared_fit = _fit_or_reason(sample, declared)
    readings = _readings(basis, sites, crystal, guide, spinful)
    return DeclarationCheck(
        centre_frac=centre,
        declared=declared_fit,
        inferred_fit=_fit_or_reason(sample, known or inferred.reason),
        inferred=inferred,
        functions=_functions(basis, sites, crystal, declared, known),
        corrections=_corrections(sample, basis, centre, readings, declared_fit),
        centres=trials,
        shift_frac=common_shift(sites.function_positions, basis.positions_frac, crystal),
        rehomed=sites.rehomed,
    )


def corrected_inversion(
    basis: OrbitalBasis, crystal: Crystal, correction: Correction
) -> InversionOperator:
    """Inversion as it is with a correction of the declaration.

    Parameters
    ----------
    basis, crystal
        As given to `compare_declaration`.
    correction
        One of those it found.

    Raises
    ------
    NoInversionError
        The correction is not one of this basis.
    """
    reading = correction.reading
    order = np.arange(basis.n_orb) if reading.order is None else np.array(reading.order)
    centre = np.array(correction.centre_frac)
    operator = _declared_operator(crystal, basis.reordered(order), centre, reading.flipped)
    if isinstance(operator, str):
        raise NoInversionError(operator)
    return operator


def _readings(
    basis: OrbitalBasis,
    sites: SiteAssignment,
    crystal: Crystal,
    inferred: InversionOperator | None,
    spinful: bool,
) -> list[Reading]:
    """All readings to be tried, each distinct one once."""
    found = []
    by_site = site_reading(basis, sites, crystal)
    placed = basis
    if by_site is not None and by_site.order is not None:
        found.append(by_site)
        placed = basis.reordered(np.array(by_site.order))
    found.extend(order_readings(basis, spinful=spinful))
    if inferred is not None:
        for reading in parity_readings(placed, sites, inferred, spinful=spinful):
            found.append(_after(by_site, reading))
    found.extend(group_parity_readings(basis))
    distinct: dict[tuple[tuple[int, ...] | None, tuple[int, ...]], Reading] = {}
    for reading in found:
        reduced = _reduced(reading, basis.n_orb)
        if reduced.order is not None or reduced.flipped:
            distinct.setdefault((reduced.order, reduced.flipped), reduced)
    return list(distinct.values())


def _reduced(reading: Reading, n_orb: int) -> Reading:
    """No order where nothing moves; the smaller half flipped, as the overall sign is open."""
    flipped = reading.flipped
    if 2 * len(flipped) > n_orb:
        flipped = tuple(sorted(set(range(n_orb)) - set(flipped)))
    order = None if reading.order == tuple(range(n_orb)) else reading.order
    return replace(reading, order=order, flipped=flipped)


def _after(first: Reading | None, second: Reading) -> Reading:
    """Both changes, the first one applied first."""
    if first is None or first.order is None:
        return second
    if second.order is None:
        return Reading(second.kind, first.order, second.flipped)
    return Reading(second.kind, tuple(first.order[i] for i in second.order), second.flipped)


@dataclass(frozen=True, slots=True, eq=False)
class _Sample:
    """H(k) and H(-k) at the compared k-points, the TRIM first; once for all operators."""

    crystal: Crystal
    n_trim: int
    k_frac: FloatArray
    h: ComplexArray
    h_minus: ComplexArray


def _sample(bloch: BlochSum, crystal: Crystal) -> _Sample:
    trim = trim_points(crystal.periodic)
    k = np.concatenate([trim, sample_points(crystal.periodic, N_GENERIC)])
    return _Sample(crystal, len(trim), k, bloch.at(k), bloch.at(-k))


def _fit(sample: _Sample, operator: InversionOperator) -> OperatorFit:
    d = inversion_at(operator, sample.k_frac)
    residual = d @ sample.h @ d.conj().transpose(0, 2, 1) - sample.h_minus
    trim, generic = residual[: sample.n_trim], residual[sample.n_trim :]
    return OperatorFit(
        MEV_PER_EV * largest_spectral_norm(trim), MEV_PER_EV * largest_spectral_norm(generic)
    )


def _half_width_mev(sample: _Sample) -> float:
    """Half of the energy range at the compared k-points: the size of a residual of nonsense."""
    energies = np.linalg.eigvalsh(sample.h)
    return MEV_PER_EV * float(energies.max() - energies.min()) / 2


def _fit_or_reason(sample: _Sample, operator: InversionOperator | str) -> OperatorFit:
    if isinstance(operator, str):
        return OperatorFit(None, None, operator)
    return _fit(sample, operator)


def _declared_operator(
    crystal: Crystal, basis: OrbitalBasis, centre: FloatArray, flipped: tuple[int, ...] = ()
) -> InversionOperator | str:
    """Inversion in a declared basis, some functions with parity reversed; or why there is none."""
    try:
        operator = build_inversion(basis, crystal, centre)
    except NoInversionError as error:
        return str(error)
    sign = np.ones(basis.n_orb)
    sign[list(flipped)] = -1.0
    return replace(operator, matrix=operator.matrix * sign)


def _corrections(
    sample: _Sample,
    basis: OrbitalBasis,
    centre: FloatArray,
    readings: list[Reading],
    declared: OperatorFit,
) -> tuple[Correction, ...]:
    """Readings, at the centre in question, and other centres, that mend the residual."""
    if declared.worst_mev <= SOUND_MEV:
        return ()
    sites = declared_sites(basis.positions_frac, sample.crystal)
    trials = [(reading, centre) for reading in readings]
    trials += [
        (Reading("centre", None), other)
        for other in candidate_centres(sites, sample.crystal)
        if not _same_centre(other, centre)
    ]
    limit = EXPLAINS * min(declared.worst_mev, _half_width_mev(sample))
    fits: dict[bytes, OperatorFit] = {}  # most readings differ by nothing that inversion can see
    found = []
    for reading, point in trials:
        order = np.arange(basis.n_orb) if reading.order is None else np.array(reading.order)
        changed = basis.reordered(order)
        operator = _declared_operator(sample.crystal, changed, point, reading.flipped)
        if isinstance(operator, str):
            continue
        key = _fingerprint(operator)
        if key not in fits:
            fits[key] = _fit(sample, operator)
        if fits[key].worst_mev < limit:
            n_changed = _n_changed(basis, order) + len(reading.flipped)
            found.append(Correction(reading, _triple(point), fits[key], n_changed))
    found.sort(key=lambda c: _plausibility(c, basis))
    return tuple(found[:MAX_CORRECTIONS])


def _plausibility(correction: Correction, basis: OrbitalBasis) -> tuple[float, int, bool, int]:
    """Equally good readings agree to rounding; then whole spin pairs, names kept, few changes."""
    reading = correction.reading
    order = np.arange(basis.n_orb) if reading.order is None else np.array(reading.order)
    split = 0
    if basis.n_orb % 2 == 0 and np.abs(basis.spinors[:, 1]).any():
        up, down = order[::2], order[1::2]
        same = np.isclose(basis.harmonics[up], basis.harmonics[down]).all(axis=1)
        split = int((~same).sum())
    size = round(math.log10(correction.fit.worst_mev + 1e-3), 1)
    return size, split, bool(reading.flipped), correction.n_changed


def _fingerprint(operator: InversionOperator) -> bytes:
    parts = (np.round(operator.matrix, 9) + 0.0, operator.shifts, operator.homes)
    return b"".join(part.tobytes() for part in parts)


def _n_changed(basis: OrbitalBasis, order: IntArray) -> int:
    return sum(basis.labels[i] != basis.labels[n] for n, i in enumerate(order))


def _functions(
    basis: OrbitalBasis,
    sites: SiteAssignment,
    crystal: Crystal,
    declared: InversionOperator | str,
    inferred: InversionOperator | None,
) -> tuple[FunctionAgreement, ...]:
    overlaps: list[float | None] = [None] * basis.n_orb
    if not isinstance(declared, str) and inferred is not None:
        overlaps = list(_overlaps(declared, inferred, crystal))
    offset = nearest_images(basis.positions_frac - sites.function_positions, crystal.cell)[1]
    on_site = sites_of_positions(basis.positions_frac, sites, crystal) == sites.site_of
    return tuple(
        FunctionAgreement(n, label, overlap, float(offset[n]), bool(on_site[n]))
        for n, (label, overlap) in enumerate(zip(basis.labels, overlaps, strict=True))
    )


def _overlaps(
    declared: InversionOperator, inferred: InversionOperator, crystal: Crystal
) -> list[float]:
    """Signed overlap of the images of each function; images in other cells do not overlap."""
    periodic = np.array(crystal.periodic)
    cell = [
        (op.shifts[None, :, :] - op.homes[:, None, :])[..., periodic] for op in (declared, inferred)
    ]
    same_cell = (cell[0] == cell[1]).all(axis=2)  # [m, n]
    overlap = np.where(same_cell, declared.matrix.conj() * inferred.matrix, 0).sum(axis=0).real
    sign = 1.0 if overlap.sum() >= 0 else -1.0
    return [float(x) for x in sign * overlap]


def _same_centre(first: FloatArray, second: FloatArray) -> bool:
    apart = 2 * (first - second)
    return bool(np.abs(apart - np.round(apart)).max() < 1e-3)


def _triple(vector: FloatArray) -> tuple[float, float, float]:
    x, y, z = (float(c) for c in vector)
    return x, y, z
