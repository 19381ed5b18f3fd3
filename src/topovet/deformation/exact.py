"""The symmetries that both ends share made exact, by averaging H over them.

Files carry few digits, Wigner-Seitz shifts that miss a tie by a hair break by some meV what holds
on the mesh, and Wannier functions may break operations that the occupied bands have. Where a gap
closes such a residual matters: it opens a crossing that symmetry protects, or smears it over a
range of lambda; a proof can use a symmetry only at the price of its residual. The way is therefore
walked between Hamiltonians that have the symmetries in question exactly, and what that moves is
measured.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from topovet.arrays import largest_spectral_norm
from topovet.deformation.comparison import EndMember
from topovet.deformation.results import Averaging
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model, r_index
from topovet.spectrum.eigen import eigenvalues
from topovet.symmetry.inversion import inverted_hopping
from topovet.symmetry.operators import WannierOperator
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.symmetrise import symmetrise
from topovet.symmetry.time_reversal import sampled_k, spin_operator
from topovet.units import MEV_PER_EV


def with_exact_symmetries(
    end: EndMember,
    operators: Sequence[WannierOperator],
    inversion: InversionOperator | None,
    *,
    time_reversal: bool,
) -> tuple[EndMember, Averaging]:
    """The end averaged over operations, inversion and time reversal, and what that moved.

    Parameters
    ----------
    end
        Spinors interlaced.
    operators
        Unitary operations, a group modulo lattice translations; may be empty.
    inversion
        Its inversion; None to leave it as it is. One of the operations, or the only one.
    time_reversal
        Whether to average over time reversal. It commutes with the operations, so that the average
        over all has all.

    Raises
    ------
    NotClosedError
        The operations are not a group.
    """
    k_frac = sampled_k(end.crystal.periodic)
    before = build_bloch_sum(end.model)
    model = end.model
    if len(operators) > 1:
        model = symmetrise(model, before, operators, k_frac).model
    if inversion is not None:
        r_moved, moved = inverted_hopping(model, inversion)
        model = _mean(model, build_model(r_moved, moved, spinful=model.spinful))
    if time_reversal:
        u = spin_operator(model.n_orb, "interlaced" if model.spinful else "none")
        turned = u @ model.h_r.conj() @ u.T
        model = TightBindingModel(model.r_cells, (model.h_r + turned) / 2, model.spinful)
    after = build_bloch_sum(model)
    beside = slice(end.filling - 1, end.filling + 1)
    levels = [eigenvalues(bloch, k_frac)[:, beside] for bloch in (before, after)]
    return replace(end, model=model), Averaging(
        n_operations=max(1, len(operators)),
        moved_mev=MEV_PER_EV * largest_spectral_norm(after.at(k_frac) - before.at(k_frac)),
        levels_moved_mev=MEV_PER_EV * float(np.abs(levels[1] - levels[0]).max()),
    )


def _mean(one: TightBindingModel, two: TightBindingModel) -> TightBindingModel:
    r_cells = np.concatenate([one.r_cells, two.r_cells])
    h_r = np.concatenate([one.h_r, two.h_r]) / 2
    union = np.unique(r_cells, axis=0)
    total = np.zeros((len(union), one.n_orb, one.n_orb), dtype=np.complex128)
    np.add.at(total, r_index(union, r_cells), h_r)
    return build_model(union, total, spinful=one.spinful, consume=True)
