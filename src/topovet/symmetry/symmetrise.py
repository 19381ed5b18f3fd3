"""The mean of H over a group, H_sym = (1/|G|) sum_g g H g^-1, and how far it lies from H.

Time reversal and its products with operations enter as any other element. The mean is taken in
real space over all R that any element leads to; only blocks of zeros are left out. By Weyl's
inequality no band moves at k by more than the spectral norm of H_sym(k) - H(k), nor anywhere by
more than the sum over R of the norms of H_sym(R) - H(R).

References
----------
Weyl's inequality: Horn, Johnson, Matrix Analysis (Cambridge, 2nd ed. 2013), theorem 4.3.1.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, largest_spectral_norm
from topovet.intake.hamiltonian.hr_write import write_hr
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model, r_index
from topovet.symmetry.hopping import real_space_residual_mev, transformed_at, transformed_half
from topovet.symmetry.operations import multiplication_table
from topovet.symmetry.operators import NotClosedError, WannierOperator
from topovet.units import MEV_PER_EV

WRITTEN_DECIMALS = 12
"""Digits of a symmetrised `_hr.dat`: with Wannier90's own six its operations would hold to a
micro-eV for each element only."""


@dataclass(frozen=True, slots=True, eq=False)
class Symmetrisation:
    """A symmetrised Hamiltonian and what it took.

    Attributes
    ----------
    model
        H_sym(R).
    n_operations
        Elements of the group, products with time reversal counted.
    distance_mev
        Spectral norm of H_sym(k) - H(k), largest over the given k: the most a band moves there.
    distance_r_mev
        Spectral norm of H_sym(R) - H(R), largest over R.
    distance_bound_mev
        The sum of these norms over R: the most a band moves anywhere.
    before_mev, after_mev
        Violation of each operation, in their order and time reversal last where it is apart:
        largest over the given k and over R, whichever is larger.
    """

    model: TightBindingModel
    n_operations: int
    distance_mev: float
    distance_r_mev: float
    distance_bound_mev: float
    before_mev: tuple[float, ...]
    after_mev: tuple[float, ...]


def symmetrise(
    model: TightBindingModel,
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    k_frac: FloatArray,
    *,
    time_reversal: WannierOperator | None = None,
) -> Symmetrisation:
    """Mean of H over a group of operations.

    Parameters
    ----------
    model, bloch
        The same Hamiltonian in real space and as a Fourier sum.
    operators
        A group modulo lattice translations; for a magnetic one, antiunitary elements among them.
    k_frac
        (n_k, 3) points at which distance and violations are measured.
    time_reversal
        Time reversal itself, where the group is to hold it: all products of it with `operators`,
        none of them antiunitary then, are part of the group.

    Raises
    ------
    NotClosedError
        The operations are not a group: their mean would have none of the symmetries.
    """
    _check_group(operators, time_reversal)
    made = _mean(model, operators)
    elements, n_operations = list(operators), len(operators)
    if time_reversal is not None:
        neutral = next(o for o in operators if _is_neutral(o))
        made = _mean(made, [neutral, time_reversal])
        elements, n_operations = [*elements, time_reversal], 2 * n_operations
    made_bloch = build_bloch_sum(made)
    norms = _norms_of_difference(model, made)
    return Symmetrisation(
        model=made,
        n_operations=n_operations,
        distance_mev=MEV_PER_EV * largest_spectral_norm(made_bloch.at(k_frac) - bloch.at(k_frac)),
        distance_r_mev=MEV_PER_EV * float(norms.max()),
        distance_bound_mev=MEV_PER_EV * float(norms.sum()),
        before_mev=_violations(model, bloch, elements, k_frac),
        after_mev=_violations(made, made_bloch, elements, k_frac),
    )


def write_symmetrised(
    path: str | Path,
    model: TightBindingModel,
    *,
    header: str = "symmetrised by topovet",
    decimals: int = WRITTEN_DECIMALS,
) -> None:
    """Write a model as `_hr.dat`, all degeneracies 1, shifts included: needs no `_wsvec.dat`.

    Parameters
    ----------
    path
        Compressed if its name ends in `.gz`.
    model
        H(R).
    header
        First line.
    decimals
        See `write_hr`; 6 gives Wannier90's own columns.

    Raises
    ------
    ValueError
        Something that the columns cannot hold.
    """
    write_hr(path, model.r_cells, model.h_r, header=header, decimals=decimals)


def _check_group(
    operators: Sequence[WannierOperator], time_reversal: WannierOperator | None
) -> None:
    antiunitary = np.array([o.antiunitary for o in operators])
    rotations = np.array([o.rotation for o in operators])
    translations = np.array([o.translation for o in operators])
    table, _ = multiplication_table(rotations, translations, antiunitary)
    if (table < 0).any():
        raise NotClosedError("the operations to average over are no group")
    if time_reversal is not None and (antiunitary.any() or not _is_neutral(time_reversal)):
        raise NotClosedError("time reversal is to be added to a group without it")


def _is_neutral(operator: WannierOperator) -> bool:
    w = operator.translation
    in_place = np.array_equal(operator.rotation, np.eye(3)) and np.abs(w - np.round(w)).max() < 1e-9
    return bool(in_place)


def _mean(model: TightBindingModel, operators: Sequence[WannierOperator]) -> TightBindingModel:
    """Mean of g H g^-1, made from the half of the R that determines the rest."""
    r_half = np.zeros((0, 3), dtype=np.int64)
    total = np.zeros((0, model.n_orb, model.n_orb), dtype=np.complex128)
    for operator in operators:
        r_half, total = _added(r_half, total, *transformed_half(model, operator))
    filled = np.flatnonzero(total.any(axis=(1, 2)))
    filled = np.union1d([0], filled)  # R = 0 stays
    r_half, total = r_half[filled], total[filled] / len(operators)
    return build_model(
        np.concatenate([-r_half[:0:-1], r_half]),
        np.concatenate([total[:0:-1].conj().transpose(0, 2, 1), total]),
        spinful=model.spinful,
        consume=True,
    )


def _added(
    r_cells: IntArray, total: ComplexArray, r_more: IntArray, more: ComplexArray
) -> tuple[IntArray, ComplexArray]:
    """Sum of two lists of H(R), on the union of their R."""
    at = r_index(r_cells, r_more) if len(r_cells) else np.full(len(r_more), -1)
    if (at < 0).any():
        union = np.unique(np.concatenate([r_cells, r_more]), axis=0)
        grown = np.zeros((len(union), *more.shape[1:]), dtype=np.complex128)
        if len(r_cells):
            grown[r_index(union, r_cells)] = total
        r_cells, total = union, grown
        at = r_index(r_cells, r_more)
    total[at] += more
    return r_cells, total


def _norms_of_difference(model: TightBindingModel, other: TightBindingModel) -> FloatArray:
    """(n,) spectral norm of other - model at each R of either, eV."""
    _, difference = _added(model.r_cells, -model.h_r, other.r_cells, other.h_r)
    return np.asarray(np.linalg.norm(difference, ord=2, axis=(1, 2)))


def _violations(
    model: TightBindingModel,
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    k_frac: FloatArray,
) -> tuple[float, ...]:
    h_k = bloch.at(k_frac)
    found = []
    for operator in operators:
        over_k = transformed_at(h_k, operator, k_frac) - bloch.at(k_frac @ operator.k_rotation)
        over_r = real_space_residual_mev(model, operator)
        found.append(max(MEV_PER_EV * largest_spectral_norm(over_k, hermitian=True), over_r))
    return tuple(found)
