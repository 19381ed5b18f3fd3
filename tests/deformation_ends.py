"""Lattice models as the ends of a walk."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from lattice_models import LatticeModel
from topovet.deformation.comparison import EndMember
from topovet.model.hamiltonian import build_model
from topovet.symmetry.inversion import build_inversion


def end_of(
    model: LatticeModel, *, time_reversal: bool = True, inversion: bool = True, name: str = ""
) -> EndMember:
    """A model with its exact symmetries as stated."""
    operator = None
    if inversion:
        operator = build_inversion(model.basis, model.crystal, np.array(model.centre))
    return EndMember(
        name=name or model.name,
        crystal=model.crystal,
        basis=model.basis,
        model=model.tight_binding(),
        filling=model.filling,
        time_reversal=time_reversal,
        inversion=operator,
    )


def turned(end: EndMember, functions: list[int]) -> EndMember:
    """The same with the signs of some functions turned in H, not in the declaration."""
    signs = np.ones(end.model.n_orb)
    signs[functions] = -1
    h_r = signs[:, None] * end.model.h_r * signs
    return replace(end, model=replace(end.model, h_r=h_r))


def interchanged(end: EndMember, first: int, second: int) -> EndMember:
    """The same with two functions interchanged in H, not in the declaration."""
    order = np.arange(end.model.n_orb)
    order[[first, second]] = second, first
    return replace(end, model=replace(end.model, h_r=end.model.h_r[:, order][:, :, order]))


def from_another_cell(end: EndMember, function: int) -> EndMember:
    """The same with one function taken from the next cell along the first vector."""
    r_cells, h_r = [], []
    for r, h in zip(end.model.r_cells, end.model.h_r, strict=True):
        for m, n in np.ndindex(h.shape):
            shift = np.array([int(n == function) - int(m == function), 0, 0])
            block = np.zeros_like(h)
            block[m, n] = h[m, n]
            r_cells.append(r - shift)
            h_r.append(block)
    cells, at = np.unique(np.array(r_cells), axis=0, return_inverse=True)
    total = np.zeros((len(cells), *h_r[0].shape), dtype=complex)
    np.add.at(total, at.reshape(-1), np.array(h_r))
    return replace(end, model=build_model(cells, total, spinful=end.model.spinful))


def without_spin(end: EndMember, *, name: str) -> EndMember:
    """The spin-up half of an end without spin-orbit coupling, as a spinless Hamiltonian."""
    assert end.basis is not None
    assert end.inversion is not None
    up = np.arange(0, end.model.n_orb, 2)
    one_spin = np.tile([1, 0], (len(up), 1)).astype(complex)
    return replace(
        end,
        name=name,
        model=replace(end.model, h_r=end.model.h_r[:, up][:, :, up], spinful=False),
        basis=replace(end.basis.reordered(up), spinors=one_spin),
        filling=end.filling // 2,
        inversion=replace(
            end.inversion,
            matrix=end.inversion.matrix[np.ix_(up, up)],
            shifts=end.inversion.shifts[up],
            homes=end.inversion.homes[up],
        ),
    )
