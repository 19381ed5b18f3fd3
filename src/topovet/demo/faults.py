"""What happens to files between a run and a folder: each fault takes a draft and spoils it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.demo.draft import Draft, rounded


def block_spin_order(draft: Draft) -> Draft:
    """All up, then all down, as some interfaces write; the projections know nothing of it."""
    order = np.concatenate([np.arange(0, draft.n_orb, 2), np.arange(1, draft.n_orb, 2)])
    return replace(draft, h_r=draft.h_r[:, order[:, None], order])


def projections_reversed(draft: Draft) -> Draft:
    """The projection lines in another order than that of the run."""
    return replace(draft, projections=draft.projections[::-1])


def centre_declared(draft: Draft, centre: tuple[float, float, float]) -> Draft:
    """A line in `case.toml` that names an inversion centre."""
    return with_settings(draft, inversion_centre=str(list(centre)))


def with_settings(draft: Draft, **settings: str | None) -> Draft:
    """Keys of `case.toml` set; None removes one."""
    merged: dict[str, str | None] = {**draft.settings, **settings}
    return replace(draft, settings={k: v for k, v in merged.items() if v is not None})


def electrons_unsaid(draft: Draft) -> Draft:
    """Neither a filling nor a Fermi energy anywhere."""
    return replace(with_settings(draft, filling=None), fermi_ev=None)


def structure_of_another_run(draft: Draft, factor: float) -> Draft:
    """A POSCAR that is not relaxed as the run was: lengths differ by a factor."""
    return replace(draft, poscar_cell=draft.cell * factor)


def fermi_moved(draft: Draft, by_ev: float) -> Draft:
    """The Fermi energy of a doped or badly converged run."""
    assert draft.fermi_ev is not None
    return replace(draft, fermi_ev=draft.fermi_ev + by_ev)


def edited_by_hand(draft: Draft, by_ev: float) -> Draft:
    """One element of the strongest hopping changed, not that of its partner."""
    row = _strongest_hopping(draft)
    h_r = draft.h_r.copy()
    m, n = np.unravel_index(np.abs(h_r[row]).argmax(), h_r[row].shape)
    h_r[row, m, n] += by_ev
    return replace(draft, h_r=rounded(h_r, draft.decimals))


def shells_cut(draft: Draft, share: float) -> Draft:
    """Lattice vectors beyond a share of the longest left out, to save space."""
    lengths = np.linalg.norm(draft.r_cells @ draft.cell, axis=1)
    return _keep(draft, np.flatnonzero(lengths <= share * lengths.max() + 1e-6))


def block_listed_twice(draft: Draft, factor: float) -> Draft:
    """The strongest hopping a second time, from a run with other values."""
    row = _strongest_hopping(draft)
    again = draft.h_r[row : row + 1] * factor
    return replace(
        draft,
        r_cells=np.concatenate([draft.r_cells, draft.r_cells[row : row + 1]]),
        degeneracies=np.append(draft.degeneracies, draft.degeneracies[row]),
        h_r=rounded(np.concatenate([draft.h_r, again]), draft.decimals),
    )


def upper_half_lost(draft: Draft) -> Draft:
    """Every R after the origin missing: a file that kept one of R and -R to save space."""
    return _keep(draft, np.arange(int(np.flatnonzero(~draft.r_cells.any(axis=1))[0]) + 1))


def centre_on_wrong_branch(draft: Draft, orbital: int, by_frac: FloatArray) -> Draft:
    """Both spins of an orbital have their printed centre elsewhere, and no shifts came with it."""
    assert draft.centres_cart is not None
    centres = draft.centres_cart.copy()
    centres[2 * orbital : 2 * orbital + 2] += by_frac @ draft.cell
    return replace(draft, centres_cart=centres)


def energies_of_another_run(draft: Draft, factor: float) -> Draft:
    """An `.eig` of a run with another potential: bands wider by a factor."""
    energies = draft.energies_ev
    assert energies is not None
    middle = round(float(energies.mean()), 6)
    return replace(draft, energies_ev=(middle + factor * (energies - middle)).round(8) + 0.0)


def digits_lost(draft: Draft, decimals: int) -> Draft:
    """H(R) printed with fewer digits."""
    return replace(draft, h_r=rounded(draft.h_r, decimals), decimals=decimals)


def cut_short(draft: Draft, share: float) -> Draft:
    """A copy that broke off: only so much of `_hr.dat` is there."""
    return replace(draft, kept_share=share, packed=False)


def _strongest_hopping(draft: Draft) -> int:
    norms = np.linalg.norm(draft.h_r, axis=(1, 2)) * draft.r_cells.any(axis=1)
    # equal but for the last bit: the first of them, whatever the processor
    return int(np.flatnonzero(norms > norms.max() - 1e-9)[0])


def _keep(draft: Draft, rows: IntArray) -> Draft:
    return replace(
        draft,
        r_cells=draft.r_cells[rows],
        degeneracies=draft.degeneracies[rows],
        h_r=draft.h_r[rows],
    )
