"""Connections and crossings along the path on models with known levels."""

from __future__ import annotations

import numpy as np
import pytest

from lattice_models import LatticeModel, atomic_insulator, kane_mele
from mirror_groups import grouped
from node_models import on_axis_dirac
from topovet.arrays import FloatArray
from topovet.invariants.band_irreps import compute_band_irreps
from topovet.invariants.band_reps import path
from topovet.invariants.band_reps.path import connect_path
from topovet.invariants.band_reps.path_results import PathConnections, PathSegment
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import build_model
from topovet.spectrum.path import compute_bands
from topovet.symmetry.bandreps.double_group import build_double_group
from topovet.symmetry.operators import with_time_reversal


def _connected(
    model: LatticeModel, bloch: BlochSum | None = None, *, named: bool = True
) -> PathConnections:
    """With the operations of the model, on its own Hamiltonian or on another."""
    case = grouped(model)
    group = build_double_group(
        model.crystal.cell,
        np.array([o.rotation for o in case.operators]),
        np.array([o.translation for o in case.operators]),
        spinful=model.spinful,
    )
    grey = (*case.operators, *(with_time_reversal(o, model.basis) for o in case.operators))
    bloch = case.bloch if bloch is None else bloch
    irreps = compute_band_irreps(bloch, grey, model.crystal, spinful=model.spinful) if named else ()
    bands = compute_bands(bloch, model.crystal)
    return connect_path(group, case.operators, bloch, bands, irreps, model.filling)


def _segment(found: PathConnections, start: str, end: str) -> PathSegment:
    return next(s for s in found.segments if {s.start, s.end} == {start, end})


def test_a_dirac_point_on_a_fourfold_axis() -> None:
    """Wang et al., PRB 88, 125427 (2013): j_z = 1/2 and 3/2 cross at a_3 = 2 pi node, E = 0."""
    node = 0.31
    found = _connected(on_axis_dirac(node=node))
    axis = _segment(found, "Γ", "Z")
    (crossing,) = axis.crossings
    assert crossing.place == "across"
    assert np.abs(np.abs(crossing.k_frac) - [0, 0, node]).max() < 1e-7
    assert crossing.splitting_mev < 1e-4
    assert len(set(crossing.kinds)) == 2
    assert axis.symmetry == "4mm"
    lowest = {c.kind: c for c in reversed(axis.connections)}  # the third level lies far above
    at_gamma = {kind: c.start for kind, c in lowest.items()}
    at_z = {kind: c.end for kind, c in lowest.items()}
    for kind in crossing.kinds:  # filled at one end, empty at the other
        sides = [level[kind].first_band < 2 for level in (at_gamma, at_z)]
        assert sides[0] != sides[1]
    assert at_gamma[crossing.kinds[0]].label != at_z[crossing.kinds[1]].label


def test_a_crossing_that_broken_symmetry_opens_is_said_to_be_open() -> None:
    """s with px, 3 meV: by 2 * 3 meV / sqrt(2), since half of px is in the p states that cross."""
    model = on_axis_dirac()
    spinless = np.zeros((3, 3))
    spinless[0, 1] = spinless[1, 0] = 3e-3  # s with px: the fourfold axis is gone
    blocks = model.h_r.copy()
    home = np.flatnonzero(~model.r_cells.any(axis=1))[0]
    blocks[home] += np.kron(spinless, np.eye(2))
    bloch = build_bloch_sum(build_model(model.r_cells, blocks, spinful=True))
    axis = _segment(_connected(model, bloch), "Γ", "Z")
    (crossing,) = axis.crossings
    assert crossing.splitting_mev == pytest.approx(6 / np.sqrt(2), rel=1e-3)
    assert axis.error_mev == pytest.approx(3 / np.sqrt(2), rel=1e-3)


def test_levels_of_one_kind_run_in_order_of_energy() -> None:
    """Kane and Mele's layer: with inversion and time reversal each line has levels of one kind."""
    found = _connected(kane_mele())
    assert not found.crossings
    for segment in found.segments:
        assert len(segment.kinds) == 1
        pairs = [(c.start.first_band, c.end.first_band) for c in segment.connections]
        assert pairs == [(0, 0), (2, 2)]
        assert all(c.settled for c in segment.connections)
    assert {c.start.label[0] for s in found.segments for c in s.connections} <= set("ΓMK")


def test_levels_that_touch_at_an_end_or_everywhere_do_not_cross() -> None:
    """Ions without hopping: p3/2 is of two kinds on the fourfold axis, where it stays together."""
    found = _connected(atomic_insulator(hop=0.0), named=False)
    assert not found.crossings
    axis = _segment(found, "Γ", "X")
    top = max(c.start.energy_ev for c in axis.connections if c.start.first_band < 6)
    kinds = {c.kind for c in axis.connections if abs(c.start.energy_ev - top) < 1e-9}
    assert len(kinds) == 2


def test_near_levels_of_one_kind_are_not_told_apart_where_the_symmetry_is_as_rough() -> None:
    """A gap of 1 meV at K by spin-orbit coupling, and 2 meV of opposite levels on the two sites."""
    model = kane_mele(lambda_so=1e-4)
    rough: FloatArray = np.diag([2e-3, 2e-3, -2e-3, -2e-3])
    blocks = model.h_r.astype(complex)
    home = np.flatnonzero(~model.r_cells.any(axis=1))[0]
    blocks[home] += rough
    bloch = build_bloch_sum(build_model(model.r_cells, blocks, spinful=True))
    found = _connected(model, bloch)
    at_k = [s for s in found.segments if "K" in (s.start, s.end)]
    assert at_k
    assert not any(c.settled for s in at_k for c in s.connections)


class _Straight:
    """Stands for curves: one that is met exactly at the first step, one that takes many."""

    @staticmethod
    def at(s: FloatArray) -> FloatArray:
        return np.stack([s - 0.5, np.zeros_like(s), np.expm1(9.0 * (s - 0.3))], axis=1)


def test_a_root_that_is_met_exactly_stays_while_others_are_sought() -> None:
    ends = np.zeros(2), np.ones(2)
    roots = path._roots(_Straight(), np.array([0, 2]), np.array([1, 1]), *ends)  # type: ignore[arg-type]
    assert roots == pytest.approx([0.5, 0.3], abs=1e-9)
