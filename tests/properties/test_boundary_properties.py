"""Surface crossings against Wilson loops where there is no symmetry but time reversal."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import assume, example, given, settings
from hypothesis import strategies as st

from boundary_models import surface_of
from chern_models import random_model
from lattice_models import LatticeModel, wilson_dirac
from topovet.invariants.results import WilsonWitness
from topovet.invariants.wilson_sheet import CRITERIA
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.fourier import build_bloch_sum

masses = st.floats(-4.0, 4.0)
strengths = st.floats(0.0, 0.3)
seeds = st.integers(0, 10**6)


def _disturbed(m: float, strength: float, seed: int, *, in_plane: bool) -> LatticeModel:
    """The Wilson-Dirac model, at k_z = 0 in the plane, and random hopping without inversion."""
    clean = wilson_dirac(m=m)
    noise = random_model(seed, inversion=False, in_plane=in_plane)
    r_clean = clean.r_cells * [1, 1, 0 if in_plane else 1]
    # duplicates are summed when the model is built
    return replace(
        clean,
        crystal=noise.crystal,
        r_cells=np.concatenate([r_clean, noise.r_cells]),
        h_r=np.concatenate([clean.h_r, strength * noise.h_r]),
    )


def _wilson(model: LatticeModel) -> WilsonWitness:
    return compute_wilson(
        build_bloch_sum(model.tight_binding()),
        model.filling,
        model.crystal.periodic,
        time_reversal=True,
        spinful=True,
        criteria=CRITERIA["standard"],
    )


@settings(max_examples=12, deadline=None)
@example(-0.75, 0.1953125, 1010, (1, -2, 0))  # couplings that overflow
@given(masses, strengths, seeds, st.sampled_from([(0, 1, 0), (1, 0, 0), (1, 1, 0), (1, -2, 0)]))
def test_edges_say_what_wilson_loops_say(m, strength, seed, miller) -> None:
    model = _disturbed(m, strength, seed, in_plane=True)
    found = surface_of(model, miller, kramers=True)
    assert found.status != "failed"
    assume(found.status == "ok")
    wilson = _wilson(model)
    assume(wilson.status == "ok")
    assert found.z2 == wilson.z2


@settings(max_examples=12, deadline=None)
@given(masses, strengths, seeds, st.sampled_from([(0, 0, 1), (1, 0, 0), (1, 1, 0), (1, -1, 1)]))
def test_surfaces_say_what_wilson_loops_say(m, strength, seed, miller) -> None:
    model = _disturbed(m, strength, seed, in_plane=False)
    found = surface_of(model, miller, kramers=True)
    assert found.status != "failed"
    assume(found.status == "ok")
    wilson = _wilson(model)
    assume(wilson.status == "ok")
    assert wilson.z2 is not None
    assert all(a in (None, b) for a, b in zip(found.z2 or (), wilson.z2, strict=True))
