"""Parity exchanges at the TRIM, against roots that are known and against plain sampling."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from deformation_ends import end_of
from lattice_models import wilson_dirac
from topovet.arrays import ComplexArray, FloatArray
from topovet.deformation.comparison import compare_ends
from topovet.deformation.exchange import Sectors, find_exchanges, levels_along, split_by_parity
from topovet.deformation.path import Path, build_path
from topovet.invariants.exchange import MOST_SOLVES, ParityBlocks

SEEDS = (10, 12, 16, 29, 51, 56)
"""Of the first sixty those with two exchanges."""


def _sectors(m_a: float, m_b: float) -> tuple[Sectors, ...]:
    pair = compare_ends(end_of(wilson_dirac(m=m_a)), end_of(wilson_dirac(m=m_b)))
    assert pair.a.inversion is not None
    return split_by_parity(build_path(pair), pair.a.inversion, 2, (True, True, True))


def test_every_critical_mass_of_wilson_dirac_is_found() -> None:
    """Masses at a TRIM with n components at pi change sign at m = -3 + 2n (see `wilson_dirac`)."""
    found = [e for s in _sectors(-3.7, 3.3) for e in find_exchanges(s)]
    by_k = {e.k: e.lam for e in found}
    assert len(found) == len(by_k) == 8
    for k, lam in by_k.items():
        n_pi = sum(c == 0.5 for c in k)
        assert lam == pytest.approx((-3 + 2 * n_pi + 3.7) / 7.0, abs=1e-9)
    assert {(e.n_minus_before, e.n_minus_after) for e in found} == {(0, 2)}


def test_a_path_within_one_phase_has_none() -> None:
    assert all(not find_exchanges(s) for s in _sectors(-2.7, -1.3))


def _random_sectors(seed: int, size: int) -> Sectors:
    """Levels that wind past one another: two random blocks with large changes."""
    rng = np.random.default_rng(seed)

    def hermitian() -> ComplexArray:
        x = rng.normal(size=(size, size)) + 1j * rng.normal(size=(size, size))
        return (x + x.conj().T) / 2

    even, odd = ((hermitian(), hermitian() * 2) for _ in range(2))
    blocks = ParityBlocks((even[0], odd[0]), (even[1], odd[1]), kramers=False)
    return Sectors((0.0, 0.0, 0.0), size, blocks)


def _n_odd(sectors: Sectors, lams: FloatArray) -> np.ndarray:
    """Odd states among the lowest, counted plainly."""
    even, odd = sectors.blocks.levels(lams)
    order = np.argsort(np.concatenate([even, odd], axis=1), axis=1)[:, : sectors.filling]
    return (order >= even.shape[1]).sum(axis=1)


@pytest.mark.parametrize("seed", SEEDS)
def test_no_crossing_slips_through(seed: int) -> None:
    """Every change of the number of odd states on a fine grid lies at an exchange."""
    sectors = _random_sectors(seed, 5)
    grid = np.linspace(0, 1, 8_001)
    n_minus = _n_odd(sectors, grid)
    jumps = np.flatnonzero(np.diff(n_minus))
    found = find_exchanges(sectors)
    inside = [e for e in found if np.any(np.abs(grid[jumps] + 6.25e-5 - e.lam) < 6.3e-5)]
    assert len(inside) == len(jumps)
    assert sum(e.n_minus_after - e.n_minus_before for e in found) == n_minus[-1] - n_minus[0]
    for e in found:
        assert sectors.at(np.array([e.lam]))[0][0] < 1e-8


def test_the_sample_of_random_levels_has_many_crossings() -> None:
    assert sum(len(find_exchanges(_random_sectors(seed, 5))) for seed in SEEDS) >= 10


def test_levels_for_display_cross_where_the_exchange_is() -> None:
    sectors = _sectors(-3.6, -2.2)[0]
    levels = levels_along(sectors)
    (exchange,) = find_exchanges(sectors)
    at = np.searchsorted(levels.lams, exchange.lam)
    before, after = levels.even_ev - levels.odd_ev[:, :1], levels.edges_ev
    assert before[at - 1].min() * before[at].min() < 0
    np.testing.assert_array_less(-1e-12, after[:, 1] - after[:, 0])


def test_sectors_hold_all_levels() -> None:
    pair = compare_ends(end_of(wilson_dirac(m=-3.6)), end_of(wilson_dirac(m=-2.2)))
    path: Path = build_path(pair)
    assert pair.a.inversion is not None
    for sectors in split_by_parity(path, replace(pair.a.inversion), 2, (True, True, True))[:3]:
        whole = np.linalg.eigvalsh(path.bloch_at(0.3).at(np.array([sectors.k])))[0]
        parts = np.concatenate(sectors.blocks.levels(np.array([0.3])), axis=1)[0]
        np.testing.assert_allclose(np.sort(parts), whole, atol=1e-12)


def _diagonal(*energies: float) -> ComplexArray:
    return np.diag(energies).astype(complex)


def test_a_quartet_that_is_half_filled_all_the_way_ends_nothing() -> None:
    """Its levels are of one parity: the gap is 0, and no states of opposite parity are near."""
    h, v = (_diagonal(0, 0, 0, 0), _diagonal(5, 5)), (_diagonal(0, 0, 0, 0), _diagonal(-1, -1))
    sectors = Sectors((0.0, 0.0, 0.0), 2, ParityBlocks(h, v, kramers=False))
    assert sectors.at(np.array([0.5]))[0] == 0
    assert find_exchanges(sectors) == ()


def test_levels_of_opposite_parity_that_stay_together_are_bounded_in_cost(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Nobody can tell whether they change places."""
    solved: list[int] = []
    levels = ParityBlocks.levels

    def counted(blocks: ParityBlocks, t: FloatArray) -> tuple[FloatArray, FloatArray]:
        solved.append(len(t))
        return levels(blocks, t)

    monkeypatch.setattr(ParityBlocks, "levels", counted)
    h, v = (_diagonal(0, 9), _diagonal(0, 9)), (_diagonal(0, 0), _diagonal(0, 0))
    assert find_exchanges(Sectors((0.0, 0.0, 0.0), 1, ParityBlocks(h, v, kramers=False))) == ()
    assert sum(solved) <= MOST_SOLVES + 2
