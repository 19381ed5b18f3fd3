"""Band representations on models of the literature: crystalline, strong, fragile, obstructed."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from chern_models import snte
from d2d_models import D2D_ROTATIONS, wilson_dirac_without_inversion
from mirror_groups import grouped
from plain_wilson import plain_hwcc
from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.invariants.band_reps.results import ATOMIC, FRAGILE, STABLE, BandRepWitness
from topovet.invariants.band_reps.witness import GroupInUse, compute_band_rep_witness
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import build_model
from topovet.symmetry.operators import WannierOperator, build_operator

TAU_X: ComplexArray = np.array([[0, 1], [1, 0]], dtype=complex)
TAU_Y: ComplexArray = np.array([[0, -1j], [1j, 0]])
TAU_Z: ComplexArray = np.diag([1.0 + 0j, -1.0])
ONE: ComplexArray = np.eye(2, dtype=complex)

ATOM = Crystal(np.array([[4.0, 0, 0], [0.6, 5.0, 0], [-0.9, 0.7, 6.0]]), ("X",), np.zeros((1, 3)))
"""Triclinic, one atom: inversion and nothing else."""


def _in_use(operators: tuple[WannierOperator, ...], *, spinful: bool) -> GroupInUse:
    return GroupInUse(operators, "", len(operators), time_reversal=True, spinful=spinful)


@pytest.mark.parametrize(("m", "indicator"), [(None, (4,)), (4.0, (0,))])
def test_tin_telluride(m: float | None, indicator: tuple[int, ...]) -> None:
    """Z8 = 4 is the one element of order 2 (Khalaf et al., PRX 8, 031070 (2018), from memory),
    whichever generator is taken; without band inversion it is a sum of atomic limits."""
    model = snte() if m is None else snte(m=m)
    case = grouped(model)
    found = compute_band_rep_witness(
        case.bloch, _in_use(case.operators, spinful=True), model.crystal, model.filling
    )
    assert found.indicator_group == (8,)
    assert found.occupied.indicator == indicator
    assert found.occupied.z2 == (0, 0, 0, 0)
    assert found.occupied.classification == (STABLE if any(indicator) else ATOMIC)


@pytest.mark.parametrize(("m", "nu_0"), [(-3.5, 0), (-2.0, 1), (0.0, 0), (2.0, 1)])
def test_strong_index_by_s4_is_that_of_wilson_loops(m: float, nu_0: int) -> None:
    """Wilson-Dirac with inversion broken (P-42m): kappa_4 mod 2 (Khalaf et al. 2018) against the
    flow of hybrid Wannier centres, and nu_0 of the model between m = -3, -1, 1, 3."""
    model = wilson_dirac_without_inversion(m, 0.2)
    bloch = build_bloch_sum(build_model(model.r_cells, model.h_r, spinful=True))
    operators = tuple(
        build_operator(model.basis, model.crystal, w, np.zeros(3)) for w in D2D_ROTATIONS
    )
    found = compute_band_rep_witness(bloch, _in_use(operators, spinful=True), model.crystal, 2)
    assert found.indicator_group == (2,)
    assert found.occupied.indicator == (nu_0,)
    assert found.occupied.z2 == (nu_0, None, None, None)
    loops = compute_wilson(bloch, 2, (True, True, True), time_reversal=True, spinful=True)
    assert loops.z2 is not None
    assert loops.z2[0] == nu_0


def _with_inversion(
    blocks: dict[tuple[int, int, int], ComplexArray], parities: str, filling: int
) -> BandRepWitness:
    """A spinless model of s ("+") and px ("-") orbitals at one atom under inversion alone."""
    n = len(parities)
    harmonics = np.zeros((n, 16))
    harmonics[np.arange(n), [0 if p == "+" else 2 for p in parities]] = 1.0
    shells = np.array([parities[: i + 1].count(p) for i, p in enumerate(parities)])
    basis = OrbitalBasis(
        np.zeros((n, 3)),
        harmonics,
        np.tile([1.0 + 0j, 0.0], (n, 1)),
        tuple(f"orbital {i + 1}" for i in range(n)),
        shells,
    )
    cells: IntArray = np.array(list(blocks), dtype=np.int64)
    bloch = build_bloch_sum(build_model(cells, np.array(list(blocks.values())), spinful=False))
    rotations = (np.eye(3, dtype=np.int64), -np.eye(3, dtype=np.int64))
    operators = tuple(build_operator(basis, ATOM, w, np.zeros(3)) for w in rotations)
    k = np.random.default_rng(3).random((300, 3))
    energies = np.linalg.eigvalsh(bloch.at(k))
    assert (energies[:, filling] - energies[:, filling - 1]).min() > 0.1
    return compute_band_rep_witness(bloch, _in_use(operators, spinful=False), ATOM, filling)


def _double_inversion(
    m: float, extra: tuple[float, ...] = ()
) -> dict[tuple[int, int, int], ComplexArray]:
    """Two s and two p levels inverted at k1 = k2 = 0, layers hardly coupled, further s levels.

    H = (m - cos k1 - cos k2 - 0.1 cos k3) tau_z + sin k1 tau_y + sin k2 tau_x sigma_y: two Chern
    insulators of opposite Chern number (Qi, Wu, Zhang, PRB 74, 085308 (2006)), made one by
    inversion and time reversal without spin, which keep H real up to a basis.
    """
    n = 4 + len(extra)

    def block(matrix: ComplexArray) -> ComplexArray:
        full = np.zeros((n, n), dtype=complex)
        full[:4, :4] = matrix
        return full

    mass, x, y = np.kron(TAU_Z, ONE), np.kron(TAU_Y, ONE), np.kron(TAU_X, TAU_Y)
    onsite = block(m * mass) + np.diag([0.0] * 4 + list(extra))
    return {
        (0, 0, 0): onsite,
        (1, 0, 0): block(-mass / 2 + x / 2j),
        (-1, 0, 0): block(-mass / 2 - x / 2j),
        (0, 1, 0): block(-mass / 2 + y / 2j),
        (0, -1, 0): block(-mass / 2 - y / 2j),
        (0, 0, 1): block(-0.05 * mass),
        (0, 0, -1): block(-0.05 * mass),
    }


def _winds(m: float) -> bool:
    """Whether the hybrid Wannier centres of the two lower bands sweep the whole cell along a1."""
    blocks = _double_inversion(m)

    def h(k: FloatArray) -> ComplexArray:
        return np.sum([np.exp(2j * np.pi * k @ r) * b for r, b in blocks.items()], axis=0)

    g = np.array([1.0, 0, 0])
    lines = [plain_hwcc(h, np.array([0, y, 0.0]), g, 60, 2) for y in np.linspace(0, 1, 41)]
    visited = np.sort(np.concatenate(lines))
    return bool(np.diff([*visited, visited[0] + 1]).max() < 0.2)


def test_double_band_inversion_without_spin_is_fragile_until_a_band_is_added() -> None:
    """Two bands of parities -- at one TRIM of a plane and ++ at the other three (or reversed) are
    no sum of atomic limits: Ahn, Park, Yang, PRX 9, 021013 (2019); Wieder, Bernevig,
    arXiv:1810.02373 (from memory). With one more even level at the atom they are the three
    s orbitals of the other inversion centres of the plane."""
    alone = _with_inversion(_double_inversion(1.0), "++--", 2).occupied
    assert alone.classification == FRAGILE
    assert not any(alone.indicator or ())
    joined = _with_inversion(_double_inversion(1.0, (-6.0,)), "++--+", 3).occupied
    assert joined.classification == ATOMIC
    assert joined.obstructed is True
    sites = {limit.site for limit in joined.atomic_limits}
    assert (0.0, 0.0, 0.0) not in sites
    plain = _with_inversion(_double_inversion(3.0), "++--", 2).occupied
    assert _winds(1.0)
    assert not _winds(3.0)
    assert (plain.classification, plain.obstructed) == (ATOMIC, False)


@pytest.mark.parametrize(("m", "obstructed"), [(0.3, True), (1.7, False)])
def test_chain_of_alternating_bonds(m: float, obstructed: bool) -> None:
    """Chains along a1: charge on the bond between atoms or on them (Su, Schrieffer, Heeger, PRL 42,
    1698 (1979); Zak, PRL 62, 2747 (1989)), in the form of s and p levels on one site."""
    hop = (TAU_Z + TAU_Y / 1j) / 2
    blocks = {(0, 0, 0): m * TAU_Z, (1, 0, 0): hop, (-1, 0, 0): hop.conj().T}
    for axis, sign in itertools.product((1, 2), (1, -1)):
        cell = [0, 0, 0]
        cell[axis] = sign
        blocks[(cell[0], cell[1], cell[2])] = 0.05 * TAU_Z
    occupied = _with_inversion(blocks, "+-", 1).occupied
    assert occupied.classification == ATOMIC
    assert occupied.obstructed is obstructed
    (limit,) = occupied.atomic_limits
    assert limit.site == ((0.5, 0.0, 0.0) if obstructed else (0.0, 0.0, 0.0))
    assert limit.on_atoms is not obstructed
