"""Half-crystals of the lattice models, for the tests of the boundary."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from lattice_models import LatticeModel, Terms, build_basis
from topovet.arrays import ComplexArray
from topovet.boundary.cleavage import Cut
from topovet.boundary.layers import LayerStack
from topovet.boundary.line import LineCriteria
from topovet.boundary.recut import Miller, Recut
from topovet.boundary.results import SurfaceWitness
from topovet.boundary.witness import CRITERIA, compute_surface, prepare_surface
from topovet.demo.lattice import with_hops
from topovet.model.crystal import Crystal


def prepared(
    model: LatticeModel, miller: Miller, *, most_dropped_mev: float = 0.0
) -> tuple[Recut, Cut, LayerStack]:
    """Re-cut cell, cut and planes of a lattice model."""
    return prepare_surface(
        model.tight_binding(),
        model.crystal,
        model.basis.positions_frac,
        miller,
        most_dropped_mev=most_dropped_mev,
    )


def surface_of(
    model: LatticeModel,
    miller: Miller,
    *,
    kramers: bool,
    criteria: LineCriteria = CRITERIA["standard"],
    symmetry_error_ev: float = 0.0,
) -> SurfaceWitness:
    """What the surface of a lattice model says; nothing is left out of H."""
    return compute_surface(
        model.tight_binding(),
        model.crystal,
        model.basis.positions_frac,
        model.filling,
        miller,
        0.0,
        criteria,
        kramers=kramers,
        chosen_by="test",
        symmetry_error_ev=symmetry_error_ev,
    )


def ssh_chain(*, v: float, w: float) -> LatticeModel:
    """Su, Schrieffer and Heeger's chain along a_2, repeated without coupling along a_1.

    H = v sum |A j><B j| + w sum |B j><A j+1| + h.c.: a chain that starts with A and v < w has an
    end state at zero energy with amplitude (-v/w)^j on A in cell j.

    References
    ----------
    Su, Schrieffer, Heeger, PRL 42, 1698 (1979), doi:10.1103/PhysRevLett.42.1698; end state in the
    textbook form, e.g. Asboth, Oroszlany, Palyi (Springer LNP 919, 2016), chapter 1.
    """
    terms, a, b = Terms(2), slice(0, 1), slice(1, 2)
    terms.add((0, 0, 0), a, b, 0.5 * v * np.eye(1))  # added with its partner in the same cell
    terms.add((0, 0, 0), b, a, 0.5 * v * np.eye(1))
    terms.add((0, 1, 0), b, a, w * np.eye(1))
    r_cells, h_r = terms.arrays()
    sites = np.array([[0.0, 0.2, 0.0], [0.0, 0.6, 0.0]])
    basis = build_basis([("C1", sites[0], "s"), ("C2", sites[1], "s")], spinful=False)
    crystal = Crystal(np.diag([4.0, 4.0, 20.0]), ("C", "C"), sites, (True, True, False))
    return LatticeModel("ssh", crystal, basis, r_cells, h_r, 1, False, (0.0, 0.4, 0.0))


def tilted(model: LatticeModel, hops: Mapping[Miller, float]) -> LatticeModel:
    """The model and 2 t cos(k.R) on every orbital: eigenvectors and direct gaps stay, bands
    tilt."""
    eye = np.eye(model.n_orb, dtype=complex)
    blocks: dict[Miller, ComplexArray] = {r: t * eye for r, t in hops.items()}
    return replace(with_hops(model, blocks), name=f"tilted_{model.name}")
