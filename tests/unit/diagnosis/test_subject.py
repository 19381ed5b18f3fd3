"""The case under examination, put to the witnesses."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from diagnosis_subjects import PAULI_Z, lattice_of, subject_of, with_onsite

from lattice_models import bhz, kane_mele, wilson_dirac
from topovet.diagnosis.results import Rereading
from topovet.diagnosis.subject import ask, largest_band_shift_mev, with_hamiltonian, with_inversion
from topovet.errors import UndefinedError

GRAPHENE = kane_mele()
SUBJECT = subject_of(GRAPHENE)


def test_both_witnesses_answer() -> None:
    found = ask(SUBJECT, "closer-look", "nothing changed")
    assert found.z2 == (1,)
    assert found.parity is not None
    assert found.wilson is not None
    assert found.parity.z2 == found.wilson.z2 == (1,)
    # 6 sqrt(3) lambda_so at K, Kane and Mele, PRL 95, 226801
    assert found.gap.direct_ev == pytest.approx(6 * np.sqrt(3) * 0.06, abs=1e-6)
    assert found.moved_mev is None


def test_no_loops_and_no_index_where_the_gap_is_closed() -> None:
    """At K, which is no TRIM: parities alone would not notice."""
    closed = subject_of(kane_mele(lambda_v=3 * np.sqrt(3) * 0.06))
    found = ask(closed, "closer-look", "nothing changed")
    assert found.gap.status == "gapless"
    assert found.wilson is None
    assert found.parity is not None
    assert found.parity.z2 is not None
    assert found.z2 is None


def test_without_time_reversal_there_is_no_z2() -> None:
    magnetic = subject_of(with_onsite(GRAPHENE, 0.05 * np.kron(np.eye(2), PAULI_Z)))
    assert not magnetic.time_reversal.present
    found = ask(magnetic, "closer-look", "nothing changed")
    assert found.wilson is None
    assert found.z2 is None


def test_symmetries_are_measured_on_the_other_hamiltonian() -> None:
    staggered = with_onsite(GRAPHENE, 0.05 * np.kron(PAULI_Z, np.eye(2)))
    other = with_hamiltonian(SUBJECT, lattice_of(staggered))
    assert SUBJECT.inversion.violation_mev == pytest.approx(0, abs=1e-6)
    # the two sites change places: +-50 meV becomes -+50 meV
    assert other.inversion.violation_mev == pytest.approx(100, abs=1e-6)
    assert other.time_reversal.present


def test_time_reversal_that_only_shifts_break_stays_present() -> None:
    """4 meV that are known to come from shifts; half of them gone leaves 2 that are no moment."""
    four, two, ten = (
        lattice_of(with_onsite(GRAPHENE, 0.5e-3 * mev * np.kron(np.eye(2), PAULI_Z)))
        for mev in (4, 2, 10)
    )
    by_shifts = replace(
        subject_of(GRAPHENE, lattice=four),
        time_reversal=replace(subject_of(GRAPHENE, lattice=four).time_reversal, present=True),
    )
    assert with_hamiltonian(by_shifts, two).time_reversal.present
    assert not with_hamiltonian(by_shifts, ten).time_reversal.present


def test_another_inversion_is_measured() -> None:
    operator = SUBJECT.operator
    assert operator is not None
    wrong = replace(operator, matrix=operator.matrix * np.array([1, 1, -1, -1.0]))
    other = with_inversion(SUBJECT, wrong, "inferred")
    assert other.inversion.basis == "inferred"
    assert other.inversion.violation_mev is not None
    assert other.inversion.violation_mev > 100
    assert SUBJECT.inversion.basis != "inferred"


def test_bands_of_another_hamiltonian() -> None:
    moved = lattice_of(with_onsite(GRAPHENE, 0.02 * np.eye(4)))
    assert largest_band_shift_mev(SUBJECT, moved) == pytest.approx(20, abs=1e-6)
    with pytest.raises(UndefinedError, match="different numbers of bands"):
        largest_band_shift_mev(SUBJECT, lattice_of(bhz(m=2.0)))


def test_witnesses_that_differ_say_nothing_together() -> None:
    strong = ask(subject_of(wilson_dirac(m=-2.0)), "closer-look", "nothing changed")
    trivial = ask(subject_of(wilson_dirac(m=4.0)), "closer-look", "nothing changed")
    assert strong.z2 == (1, 0, 0, 0)
    at_odds: Rereading = replace(strong, parity=trivial.parity)
    assert at_odds.z2 is None
    assert replace(strong, parity=None).z2 == (1, 0, 0, 0)
    assert replace(strong, parity=None, wilson=None).z2 is None
