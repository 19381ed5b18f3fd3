"""Wilson loops do not depend on how a crystal is described, and agree with other witnesses.

Random Hamiltonians with time reversal alone, gaps of all sizes, are compared with plain loops on a
fixed mesh; those with inversion besides, with parities.
"""

from __future__ import annotations

from itertools import count

import numpy as np
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from chern_models import (
    chiral_wilson_dirac,
    haldane,
    qi_wu_zhang,
    random_model,
    staggered,
)
from lattice_models import LatticeModel, bhz, fu_kane_mele, kane_mele
from model_changes import (
    parity_of,
    with_atomic_pair,
    with_cell,
    with_home_cells,
    with_mixed_orbitals,
    with_order,
    with_origin,
)
from plain_wilson import plain_plane_z2
from topovet.arrays import FloatArray, IntArray
from topovet.invariants.chern import compute_chern
from topovet.invariants.results import WilsonWitness
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.fourier import build_bloch_sum

WORKABLE_GAP_EV = 0.02


def wilson_of(model: LatticeModel, *, positions_frac: FloatArray | None = None) -> WilsonWitness:
    return compute_wilson(
        build_bloch_sum(model.tight_binding()),
        model.filling,
        model.crystal.periodic,
        time_reversal=True,
        spinful=True,
        positions_frac=positions_frac,
    )


def indexed(model: LatticeModel) -> tuple[int, ...]:
    """The indices, after passing over models too close to a transition on some plane."""
    witness = workable(model)
    assert witness.status == "ok", witness.reason
    assert witness.z2 is not None
    return witness.z2


def by_plane(model: LatticeModel) -> tuple[int | None, ...]:
    """Z2 of each plane, which exists also where the gap closes between planes (Weyl points)."""
    planes = workable(model).planes
    assert all(plane.status == "ok" for plane in planes)
    return tuple(plane.z2 for plane in planes)


def workable(model: LatticeModel) -> WilsonWitness:
    witness = wilson_of(model)
    assume(min(plane.smallest_direct_gap_ev for plane in witness.planes) > WORKABLE_GAP_EV)
    return witness


def _away(values: tuple[float, ...], low: float, high: float) -> st.SearchStrategy[float]:
    allowed = st.floats(low, high, allow_nan=False)
    return allowed.filter(lambda x: min(abs(x - v) for v in values) > 0.05)


seeds = st.integers(0, 2**20)
without_inversion = st.one_of(
    seeds.map(lambda seed: random_model(seed, inversion=False)),
    st.tuples(st.lists(_away((0,), -0.8, 0.8), min_size=4, max_size=4), st.floats(-0.5, 0.5)).map(
        lambda x: staggered(fu_kane_mele(dt=x[0]), x[1])
    ),
)
gapped_3d = st.one_of(
    seeds.map(lambda seed: random_model(seed, inversion=True)),
    st.lists(_away((0,), -0.8, 0.8), min_size=4, max_size=4).map(lambda dt: fu_kane_mele(dt=dt)),
    _away((-3, -1, 1, 3), -4, 4).map(lambda m: chiral_wilson_dirac(m=m, u=0.4)),
)
models_2d = st.one_of(
    seeds.map(lambda seed: random_model(seed, inversion=False, in_plane=True)),
    _away((0, 4, 8), -2, 10).map(lambda m: bhz(m=m)),
    st.tuples(_away((0,), -0.2, 0.2), st.floats(-0.1, 0.1), st.floats(-0.2, 0.2)).map(
        lambda x: kane_mele(lambda_so=x[0], lambda_r=x[1], lambda_v=x[2])
    ),
)
any_model = st.one_of(models_2d, gapped_3d, without_inversion)
vectors = st.tuples(*(st.floats(-2, 2, allow_nan=False) for _ in range(3))).map(np.array)


@st.composite
def unimodular(draw: st.DrawFn, size: int) -> IntArray:
    """Integer matrix of determinant +-1 that acts on the first `size` vectors."""
    matrix = np.eye(size, dtype=np.int64)[list(draw(st.permutations(range(size))))]
    matrix *= np.array(draw(st.lists(st.sampled_from([1, -1]), min_size=size, max_size=size)))
    for _ in range(draw(st.integers(0, 2))):
        i, j = draw(st.permutations(range(size)))[:2]
        matrix[i] += draw(st.sampled_from([-1, 1])) * matrix[j]
    full = np.eye(3, dtype=np.int64)
    full[:size, :size] = matrix
    return full


@settings(max_examples=15, deadline=None)
@given(seeds)
def test_agreement_with_parities(seed: int) -> None:
    """Inversion and time reversal: both witnesses must say the same."""
    model = random_model(seed, inversion=True)
    found, parity = indexed(model), parity_of(model)
    assert parity.status == "ok"
    assert found == parity.z2


def test_random_models_have_many_indices() -> None:
    """Guards the generator: the properties here must not pass on nothing but zeros."""
    found = {wilson_of(random_model(seed, inversion=True)).z2 for seed in range(15)}
    assert len(found - {None}) >= 6
    flat = [wilson_of(random_model(seed, inversion=False, in_plane=True)).z2 for seed in range(15)]
    assert {(0,), (1,)} <= set(flat)


def widely_gapped(seed: int) -> tuple[LatticeModel, WilsonWitness]:
    """The first planar model from a seed on whose gap exceeds 0.4 eV (about one in eight)."""
    models = (random_model(other, inversion=False, in_plane=True) for other in count(seed))
    tried = ((model, wilson_of(model)) for model in models)
    return next(pair for pair in tried if pair[1].planes[0].smallest_direct_gap_ev > 0.4)


@settings(max_examples=6, deadline=None)
@given(seeds)
def test_plain_loops_on_a_fixed_mesh(seed: int) -> None:
    """Time reversal alone, gap open enough for 50 lines of 50 points."""
    model, witness = widely_gapped(seed)
    plain = plain_plane_z2(
        model.hamiltonian_at, (0, 1), (0, 0, 0), model.filling, n_lines=50, n_points=50
    )
    assert witness.z2 == (plain,)


def test_where_a_coarse_mesh_is_silently_wrong() -> None:
    """A centre darts across the largest gap between two of 60 even lines; between 120 it does not.

    The plain rule cannot notice, and the closest match of centres cannot either.
    """
    model = random_model(24, inversion=False, in_plane=True)

    def plain(n_lines: int, n_points: int) -> int:
        return plain_plane_z2(
            model.hamiltonian_at, (0, 1), (0, 0, 0), 4, n_lines=n_lines, n_points=n_points
        )

    witness = wilson_of(model)
    assert witness.n_solves < 60 * 50 / 2
    assert witness.z2 == (plain(120, 80),)
    assert witness.z2 != (plain(60, 50),)


@settings(max_examples=6, deadline=None)
@given(gapped_3d, unimodular(3))
def test_cell_choice(model: LatticeModel, matrix: IntArray) -> None:
    """The strong index stays, the weak vector turns by the matrix modulo 2."""
    nu0, *weak = indexed(model)
    nu0_new, *weak_new = indexed(with_cell(model, matrix))
    assert nu0_new == nu0
    assert weak_new == ((matrix @ np.array(weak)) % 2).tolist()


@settings(max_examples=6, deadline=None)
@given(models_2d, unimodular(2))
def test_cell_choice_in_the_plane(model: LatticeModel, matrix: IntArray) -> None:
    assert indexed(with_cell(model, matrix)) == indexed(model)


@settings(max_examples=6, deadline=None)
@given(any_model, vectors)
def test_origin_and_gauge(model: LatticeModel, shift: FloatArray) -> None:
    """Any positions of the orbitals, in the atomic gauge: the index of the periodic gauge."""
    expected = by_plane(model)
    moved = with_origin(model, shift)
    found = wilson_of(moved, positions_frac=moved.basis.positions_frac)
    assert tuple(plane.z2 for plane in found.planes) == expected


@settings(max_examples=6, deadline=None)
@given(any_model, seeds)
def test_order_of_pairs(model: LatticeModel, seed: int) -> None:
    pairs = np.random.default_rng(seed).permutation(model.n_orb // 2)
    order = np.stack([2 * pairs, 2 * pairs + 1], axis=1).reshape(-1)
    assert by_plane(with_order(model, order)) == by_plane(model)


@settings(max_examples=6, deadline=None)
@given(any_model, seeds)
def test_home_cells(model: LatticeModel, seed: int) -> None:
    """Orbitals counted from other cells, both spins of each together."""
    reach = np.array(model.crystal.periodic) * 1
    moves = np.random.default_rng(seed).integers(-reach, reach + 1, size=(model.n_orb // 2, 3))
    assert by_plane(with_home_cells(model, np.repeat(moves, 2, axis=0))) == by_plane(model)


@settings(max_examples=6, deadline=None)
@given(any_model, seeds)
def test_orbital_frames(model: LatticeModel, seed: int) -> None:
    """Hybrids and a spin axis of its own on each site: time reversal stays i sigma_y K."""
    mixed = with_mixed_orbitals(model, np.random.default_rng(seed))
    assert by_plane(mixed) == by_plane(model)


@settings(max_examples=6, deadline=None)
@given(any_model, st.integers(0, 15), st.sampled_from([-60.0, 60.0]))
def test_added_atomic_pair(model: LatticeModel, harmonic: int, energy: float) -> None:
    """Filled far below or empty far above: nothing changes."""
    grown = with_atomic_pair(model, (0.1, 0.2, 0.3), harmonic, energy)
    if energy > 0:
        grown = LatticeModel(
            grown.name, grown.crystal, grown.basis, grown.r_cells, grown.h_r,
            model.filling, grown.spinful, grown.centre,
        )  # fmt: skip
    assert by_plane(grown) == by_plane(model)


@settings(max_examples=10, deadline=None)
@given(
    st.one_of(
        st.tuples(_away((0, np.pi, -np.pi), -3.1, 3.1), st.floats(-0.3, 0.3)).map(
            lambda x: haldane(phi=x[0], m=x[1])
        ),
        _away((-2, 0, 2), -3, 3).map(lambda m: qi_wu_zhang(m=m)),
    ),
    unimodular(2),
    seeds,
)
def test_chern_number(model: LatticeModel, matrix: IntArray, seed: int) -> None:
    """Another cell turns its sign with the orientation; home cells and origin leave it."""
    moves = np.random.default_rng(seed).integers(-1, 2, size=(model.n_orb, 3)) * [1, 1, 0]
    first = compute_chern(build_bloch_sum(model.tight_binding()), 1, model.crystal.periodic)
    assume(first.planes[0].smallest_direct_gap_ev > WORKABLE_GAP_EV)
    changed = with_home_cells(with_cell(model, matrix), moves)
    second = compute_chern(build_bloch_sum(changed.tight_binding()), 1, model.crystal.periodic)
    assert first.chern is not None
    sign = round(np.linalg.det(matrix))
    assert second.chern == (sign * first.chern[0],)
