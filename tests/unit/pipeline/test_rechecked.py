"""The stored certificate of a case, checked again from its files."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from case_writer import write_case
from lattice_models import kane_mele
from topovet.errors import UndefinedError
from topovet.pipeline import rechecked
from topovet.pipeline.dossier import Dossier, start_run, vet_case
from topovet.pipeline.rechecked import CertificateError, recheck_gap
from topovet.spectrum.proof.recheck import Recheck


@pytest.fixture(scope="module")
def case(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_case(kane_mele(lambda_v=0.1), tmp_path_factory.mktemp("rechecked") / "case")


@pytest.fixture(scope="module")
def dossier(case: Path) -> Dossier:
    return vet_case(case, out=case.parent / "out")


def test_certificate_of_a_dossier_holds(case: Path, dossier: Dossier) -> None:
    sentence = recheck_gap(case, out=case.parent / "out")
    assert dossier.verdict.gap.direct_proved_min_eV is not None
    assert "cover the zone, and in each the direct gap exceeds" in sentence


def test_without_a_proof_there_is_nothing_to_check(case: Path, tmp_path: Path) -> None:
    settings = {"effort": "quick"}
    start_run(case, out=tmp_path / "out", settings=settings).result("gap-proof")
    with pytest.raises(UndefinedError, match="no proved gap to check again: at effort quick"):
        recheck_gap(case, out=tmp_path / "out", settings=settings)


def test_certificate_for_another_hamiltonian_is_refused(
    case: Path, dossier: Dossier, monkeypatch: pytest.MonkeyPatch
) -> None:
    other = kane_mele(lambda_v=0.3).tight_binding()
    own = rechecked.recheck

    def against_another(_model: object, certificate: object) -> Recheck:
        return own(replace(other, h_r=np.array(other.h_r)), certificate)  # type: ignore[arg-type]

    monkeypatch.setattr(rechecked, "recheck", against_another)
    with pytest.raises(CertificateError, match="does not hold"):
        recheck_gap(case, out=case.parent / "out")
