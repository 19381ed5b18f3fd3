"""Lattice models beside the same ones without spin-orbit coupling, known exactly."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from lattice_models import LatticeModel, Terms, build_basis
from topovet.model.crystal import Crystal

SQUARE = Crystal(
    np.diag([4.0, 4.0, 20.0]), ("Te",), np.array([[0.0, 0.0, 0.5]]), (True, True, False)
)


def without_spin(model: LatticeModel) -> LatticeModel:
    """The spin-up half of a model without spin-orbit coupling, as a spinless case."""
    up = np.arange(0, model.n_orb, 2)
    basis = replace(
        model.basis.reordered(up), spinors=np.tile([1, 0], (len(up), 1)).astype(complex)
    )
    return replace(
        model,
        name=f"{model.name}_spinless",
        basis=basis,
        h_r=model.h_r[:, up][:, :, up],
        filling=model.filling // 2,
        spinful=False,
    )


def square_sp(*, offset: float, coupling: float, hop: float = 0.5) -> LatticeModel:
    """s above px and py on the square lattice with lambda L_z sigma_z on the site; filling 4.

    At Gamma s lies at `offset` and the pairs of p at +-lambda (eigenvalues of L_z sigma_z), of
    opposite parity: the upper one meets s at lambda = offset. At the other TRIM s lies higher and
    p lower by 8 hop and more, so that nothing else meets, and by the product of parities (Fu and
    Kane, PRB 76, 045302 (2007)) nu = 1 beyond.
    """
    terms, s = Terms(6), slice(0, 2)
    terms.add_onsite(s, (offset + 4 * hop) * np.eye(2))
    l_z, sigma_z = np.array([[0, -1j], [1j, 0]]), np.diag([1.0, -1.0])
    terms.add_onsite(slice(2, 6), coupling * np.kron(l_z, sigma_z) - 4 * hop * np.eye(4))
    for axis in (0, 1):
        r_cell, p = np.eye(3, dtype=int)[axis], slice(2 + 2 * axis, 4 + 2 * axis)
        terms.add(r_cell, s, s, -hop * np.eye(2))
        terms.add(r_cell, slice(2, 6), slice(2, 6), hop * np.eye(4))
        terms.add(r_cell, s, p, 0.3 * np.eye(2))
        terms.add(r_cell, p, s, -0.3 * np.eye(2))
    r_cells, h_r = terms.arrays()
    basis = build_basis([("Te1", (0.0, 0.0, 0.5), name) for name in ("s", "px", "py")])
    return LatticeModel("square_sp", SQUARE, basis, r_cells, h_r, 4, True, (0.0, 0.0, 0.5))
