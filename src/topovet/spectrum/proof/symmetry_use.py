"""How much of a broken symmetry a proof may use: residuals that hold at every k, and their price.

Let A(k) be unitary with ||A(k) H(k) A(k)† - H(k')|| <= e for all k, k' the image of k (H(k)* in
place of H(k) for an antiunitary operation). By Weyl's inequality each level at k' is within e of
the same level at k, and a gap within 2 e:

    E_n(k) >= E_n(k') - e,        (E_(N+1) - E_N)(k) >= (E_(N+1) - E_N)(k') - 2 e.

If a quantity is at least b on a part of the zone that holds an image of every k, it is therefore at
least b - 2 e (b - e for an edge) everywhere, with the largest e of the group. For a product of two
operations the residuals add, since A(k) is unitary.

A residual sampled at some k would prove nothing. With X = g H g^-1 - H in real space,
||sum_R X(R) exp(2 pi i k.R)|| <= || sum_R |X(R)| || at every k, element by element in modulus.

References
----------
Weyl's inequality: Horn, Johnson, Matrix Analysis (Cambridge, 2nd ed. 2013), theorem 4.3.1.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.model.hamiltonian import TightBindingModel, r_index
from topovet.spectrum.proof.expansion import NORM_MARGIN
from topovet.symmetry.hopping import transformed_half
from topovet.symmetry.operations import largest_closed_subset
from topovet.symmetry.operators import WannierOperator
from topovet.symmetry.time_reversal import spin_operator


@dataclass(frozen=True, slots=True, eq=False)
class Images:
    """Operations as they act on k.

    Attributes
    ----------
    matrices
        (g, 3, 3) integers, k' = k @ matrix; distinct, and a group.
    residuals_ev
        (g,) levels at k and at its image differ by no more.
    """

    matrices: IntArray
    residuals_ev: FloatArray

    @property
    def worst_ev(self) -> float:
        return float(self.residuals_ev.max())


def no_images() -> Images:
    """The identity alone."""
    return Images(np.eye(3, dtype=np.int64)[None], np.zeros(1))


def images_of(
    model: TightBindingModel,
    operators: Sequence[WannierOperator],
    *,
    time_reversal: bool,
) -> Images:
    """All that operations, time reversal and their products do to k, each with its residual.

    Parameters
    ----------
    model
        H(R); spinors interlaced.
    operators
        Operations of a group, with or without antiunitary ones.
    time_reversal
        Whether time reversal itself, and its products with all of them, may be used.
    """
    found = {tuple(np.eye(3, dtype=np.int64).reshape(-1).tolist()): 0.0}

    def note(matrix: IntArray, residual: float) -> None:
        key = tuple(int(x) for x in matrix.reshape(-1))
        found[key] = min(residual, found.get(key, np.inf))

    reversal = time_reversal_residual(model) if time_reversal else np.inf
    if time_reversal:
        note(-np.eye(3, dtype=np.int64), reversal)
    for operator in operators:
        residual = residual_everywhere(model, operator)
        note(operator.k_rotation, residual)
        if time_reversal:
            note(-operator.k_rotation, residual + reversal)
    matrices = np.array(list(found), dtype=np.int64).reshape(-1, 3, 3)
    return Images(matrices, np.array(list(found.values())))


def affordable_images(images: Images, allowance_ev: float) -> Images:
    """The largest group among the images whose residuals are within an allowance.

    Parameters
    ----------
    images
        Distinct matrices that need not be closed under products.
    allowance_ev
        Largest residual that may be used.
    """
    within = images.residuals_ev <= allowance_ev
    matrices, residuals = images.matrices[within], images.residuals_ev[within]
    group = _generated(images.matrices)
    at = {matrix.tobytes(): i for i, matrix in enumerate(group)}
    index = np.array([at[matrix.tobytes()] for matrix in matrices])
    table = np.array([[at[(a @ b).tobytes()] for b in group] for a in group])
    among, badness = np.zeros(len(group), dtype=bool), np.full(len(group), np.inf)
    among[index], badness[index] = True, residuals
    chosen = largest_closed_subset(table, among, badness)
    return Images(group[chosen], badness[chosen])


def residual_everywhere(model: TightBindingModel, operator: WannierOperator) -> float:
    """Bound of ||g H g^-1 - H|| over all k, eV."""
    r_half, image = transformed_half(model, operator)
    middle = model.n_r // 2
    at = r_index(r_half, model.r_cells[middle:])
    kept = at >= 0
    image[at[kept]] -= model.h_r[middle:][kept]
    size = np.abs(image[1:]).sum(axis=0) + np.abs(model.h_r[middle:][~kept]).sum(axis=0)
    return _norm(np.abs(image[0]) + size + size.T)


def time_reversal_residual(model: TightBindingModel) -> float:
    """Bound of ||U H(k)* U† - H(-k)|| over all k, eV; spinors interlaced."""
    u = spin_operator(model.n_orb, "interlaced" if model.spinful else "none")
    size = np.zeros((model.n_orb, model.n_orb))
    for h in model.h_r:
        size += np.abs(u @ h.conj() @ u.T - h)
    return _norm(size)


def _norm(size: FloatArray) -> float:
    return NORM_MARGIN * float(np.linalg.norm(size, ord=2))


def _generated(matrices: IntArray) -> IntArray:
    """The group that integer matrices of finite order generate, the identity first."""
    found = {np.eye(3, dtype=np.int64).tobytes(): np.eye(3, dtype=np.int64)}
    waiting = list(found.values())
    while waiting:
        a = waiting.pop()
        for b in matrices:
            product = np.ascontiguousarray(a @ b)
            if product.tobytes() not in found:
                if len(found) >= 96:
                    raise ValueError("the matrices generate no point group")
                found[product.tobytes()] = product
                waiting.append(product)
    return np.array(list(found.values()))
