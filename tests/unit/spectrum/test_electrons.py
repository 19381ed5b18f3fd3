"""The electron count: who is trusted, how a Fermi energy counts, what is refused."""

from __future__ import annotations

import numpy as np
import pytest

from topovet.spectrum.electrons import FillingError, Statement, choose_statement, count_electrons

INSULATOR = np.array([[-3.0, -3.0, -1.0, -1.0, 2.0, 2.0], [-2.5, -2.5, -0.5, -0.5, 1.5, 1.5]])
SILENT = Statement("case.toml", None, None)


def _fermi(energy: float, source: str = "x.win") -> Statement:
    return Statement(source, None, energy)


def test_first_statement_that_says_anything_is_trusted() -> None:
    toml = Statement("case.toml", 4, None)
    assert choose_statement((Statement("command line", None, 0.3), toml)).source == "command line"
    assert choose_statement((SILENT, toml, _fermi(9.0))) is toml
    assert choose_statement((SILENT, _fermi(9.0))).source == "x.win"


def test_silence_is_an_error_that_names_every_place() -> None:
    with pytest.raises(FillingError, match=r"--filling.*case\.toml.*fermi_energy"):
        choose_statement((SILENT,))


def test_fermi_energy_in_the_gap_counts_exactly() -> None:
    electrons = count_electrons(_fermi(0.0), None, INSULATOR, kramers=True)
    assert (electrons.filling, electrons.mean_count) == (4, 4.0)
    assert "at every point of the mesh" in electrons.how


def test_fermi_energy_that_grazes_a_band_is_told() -> None:
    mesh = np.tile(INSULATOR, (20, 1))
    mesh[0, 2:4] = 0.1  # one point of forty is above
    electrons = count_electrons(_fermi(0.0), None, mesh, kramers=True)
    assert electrons.filling == 4
    assert (electrons.least_count, electrons.most_count) == (2, 4)
    assert "on average (3.950)" in electrons.how


def test_compensated_semimetal_counts_to_a_whole_number() -> None:
    mesh = np.array([[-1.0, -1.0, 0.2, 0.2], [-1.0, -1.0, -0.2, -0.2]] * 10)
    mesh[:, :2] += np.linspace(0, 2, 20)[:, None]  # holes: as many as electrons
    energy = 0.0
    counts = (mesh < energy).sum(axis=1)
    assert counts.min() < counts.mean() < counts.max()
    assert count_electrons(_fermi(energy), None, mesh, kramers=True).filling == round(counts.mean())


def test_metal_without_a_whole_count_is_refused() -> None:
    mesh = np.array([[-1.0, -1.0, -1.0, -1.0], [-1.0, -1.0, 1.0, 1.0]])
    with pytest.raises(FillingError, match=r"counts to 3\.00 electrons per cell, which is no even"):
        count_electrons(_fermi(0.0), None, mesh, kramers=True)
    assert count_electrons(_fermi(0.0), None, mesh, kramers=False).filling == 3


@pytest.mark.parametrize("filling", [0, 6, 7])
def test_filling_without_a_gap_above_is_refused(filling: int) -> None:
    with pytest.raises(FillingError, match="has 6 bands, so the filling must be from 1 to 5"):
        count_electrons(Statement("case.toml", filling, None), None, INSULATOR, kramers=True)


def test_stated_filling_keeps_the_fermi_energy_for_the_cross_check() -> None:
    electrons = count_electrons(Statement("case.toml", 2, None), 0.0, INSULATOR, kramers=True)
    assert (electrons.filling, electrons.fermi_ev, electrons.mean_count) == (2, 0.0, 4.0)
