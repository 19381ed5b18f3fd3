"""Lattice models of the literature as case folders: what the whole way to the verdict says.

The models and their sources are in `lattice_models`. Here it also counts what must not be said:
no index where the gap closes, where time reversal is broken, or where inversion is broken by more
than the gap allows.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from case_writer import write_case
from lattice_models import (
    LatticeModel,
    atomic_insulator,
    bhz,
    fu_kane_mele,
    kane_mele,
    wilson_dirac,
)
from topovet.pipeline.dossier import start_run
from topovet.verdict.document import Verdict


def vetted(model: LatticeModel, folder: Path) -> Verdict:
    run = start_run(write_case(model, folder), settings={"effort": "quick"})
    verdict: Verdict = run.result("verdict")
    return verdict


def codes(verdict: Verdict) -> set[str]:
    return {flag.code for flag in verdict.flags}


@pytest.mark.parametrize(
    ("model", "z2", "class_"),
    [
        (kane_mele(), (1,), "strong-ti"),
        (bhz(m=2.0), (1,), "strong-ti"),
        (bhz(m=9.0), (0,), "trivial"),
        (bhz(a=-3.42, b=-16.9, c=-0.0263, d=0.514, m=-0.00686), (1,), "strong-ti"),
        (bhz(a=-3.62, b=-18.0, c=-0.0180, d=-0.594, m=0.00922), (0,), "trivial"),
        (wilson_dirac(m=-2.0), (1, 0, 0, 0), "strong-ti"),
        (wilson_dirac(m=0.0), (0, 1, 1, 1), "weak-ti"),
        (wilson_dirac(m=2.99), (1, 1, 1, 1), "strong-ti"),
        (wilson_dirac(m=3.01), (0, 0, 0, 0), "trivial"),
        (fu_kane_mele(dt=(0.4, 0, 0, 0)), (1, 1, 1, 1), "strong-ti"),
        (fu_kane_mele(dt=(-0.4, 0, 0, 0)), (0, 1, 1, 1), "weak-ti"),
        (fu_kane_mele(dt=(2.5, 0, 0, 0)), (0, 0, 0, 0), "trivial"),
        (atomic_insulator(filled="p"), (0, 0, 0, 0), "trivial"),
        (atomic_insulator(filled="s"), (0, 0, 0, 0), "trivial"),
    ],
    ids=lambda x: x.name if isinstance(x, LatticeModel) else "",
)
def test_published_phase(
    model: LatticeModel, z2: tuple[int, ...], class_: str, tmp_path: Path
) -> None:
    verdict = vetted(model, tmp_path / "case")
    assert verdict.invariants.z2 == z2
    assert verdict.class_ == class_
    assert not {flag.code for flag in verdict.flags if flag.severity == "error"}


def test_filling_that_cuts_a_kramers_pair(tmp_path: Path) -> None:
    """An odd filling is an error, not an index."""
    case = write_case(wilson_dirac(m=-2.0), tmp_path / "case", filling=3)
    verdict = start_run(case, settings={"effort": "quick"}).result("verdict")
    assert verdict.invariants.z2 is None
    assert "filling-off" in codes(verdict)


@pytest.mark.parametrize(
    "model",
    [
        kane_mele(lambda_so=0.0),
        kane_mele(lambda_v=3 * np.sqrt(3) * 0.06),
        bhz(m=4.0),
        wilson_dirac(m=-1.0),
        fu_kane_mele(),
    ],
    ids=["graphene", "kane_mele", "bhz", "wilson_dirac", "diamond"],
)
def test_no_index_without_a_gap(model: LatticeModel, tmp_path: Path) -> None:
    verdict = vetted(model, tmp_path / "case")
    assert verdict.invariants.z2 is None
    assert verdict.class_ not in ("strong-ti", "weak-ti", "trivial")
    assert "gap-closes" in codes(verdict)


def test_no_index_where_inversion_is_broken_beyond_the_gap(tmp_path: Path) -> None:
    """Kane-Mele at lambda_v = 0.4 > 3 sqrt(3) lambda_so is trivial (PRL 95, 146802).

    Its symmetric average, lambda_v = 0, is not: parities of the average (1 here, and pure enough
    to be read) say nothing about this Hamiltonian.
    """
    verdict = vetted(kane_mele(lambda_v=0.4), tmp_path / "case")
    assert verdict.inversion.violation_meV == pytest.approx(800, rel=1e-3)
    assert verdict.invariants.z2 != (1,)
    assert verdict.class_ != "strong-ti"


def test_broken_time_reversal(tmp_path: Path) -> None:
    """A strong phase in an exchange field: no Z2, eta = 2 (PRB 85, 165120)."""
    verdict = vetted(wilson_dirac(m=-2.6, zeeman=0.1), tmp_path / "case")
    assert not verdict.time_reversal.present
    assert verdict.invariants.z2 is None
    assert verdict.invariants.indicators == {"eta4": 2}
    assert "time-reversal-broken" in codes(verdict)


def test_spinless(tmp_path: Path) -> None:
    verdict = vetted(atomic_insulator(spinful=False), tmp_path / "case")
    assert verdict.invariants.z2 is None
    assert "no-spin-orbit" in codes(verdict)


@pytest.mark.parametrize(
    ("model", "z2"),
    [
        (wilson_dirac(m=-2.0), (1, 0, 0, 0)),
        (wilson_dirac(m=2.0), (1, 1, 1, 1)),
        (fu_kane_mele(dt=(0, -0.4, 0, 0)), (0, 1, 0, 0)),
    ],
    ids=["strong", "strong-111", "weak"],
)
def test_block_spin_order_is_found(
    model: LatticeModel, z2: tuple[int, ...], tmp_path: Path
) -> None:
    """All up, then all down in the file, declared as ever: found, flagged, same indices."""
    order = np.concatenate([np.arange(0, model.n_orb, 2), np.arange(1, model.n_orb, 2)])
    block = replace(model, h_r=model.h_r[:, order[:, None], order[None, :]])
    verdict = vetted(block, tmp_path / "case")
    assert verdict.time_reversal.spin_order == "block"
    assert "spin-order-mismatch" in codes(verdict)
    assert verdict.invariants.z2 == z2
