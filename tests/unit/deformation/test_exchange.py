"""Parity exchanges at the TRIM, against roots that are known and against plain sampling."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from deformation_ends import end_of
from lattice_models import wilson_dirac
from topovet.arrays import ComplexArray
from topovet.deformation.comparison import compare_ends
from topovet.deformation.exchange import Sectors, find_exchanges, levels_along, split_by_parity
from topovet.deformation.path import Path, build_path

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
    moves = np.concatenate([np.linalg.eigvalsh(even[1]), np.linalg.eigvalsh(odd[1])])
    return Sectors((0.0, 0.0, 0.0), size, even, odd, float(np.ptp(moves)), 1e-12)


@pytest.mark.parametrize("seed", SEEDS)
def test_no_crossing_slips_through(seed: int) -> None:
    """Every change of the number of odd states on a fine grid lies at an exchange."""
    sectors = _random_sectors(seed, 5)
    grid = np.linspace(0, 1, 8_001)
    _, n_minus, _ = sectors.at(grid)
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
        parts = np.concatenate(sectors.levels(np.array([0.3])), axis=1)[0]
        np.testing.assert_allclose(np.sort(parts), whole, atol=1e-12)
