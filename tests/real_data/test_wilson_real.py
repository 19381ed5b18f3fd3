"""Wilson loops against the first-principles runs the real cases come from.

`dft_parity.json` holds indices from the parities of the plane-wave states, `dft_wilson.json` Z2 of
two planes from Wilson loops of the plane-wave states themselves, `dft_s4.json` the index from their
S4 eigenvalues, `z2_by_own_wilson.json` plain loops on a fixed mesh. None of them is an input of the
witness.
"""

from __future__ import annotations

import functools

import numpy as np
import pytest

from real_cases import CENTROSYMMETRIC, reference, run_of
from real_operators import operated
from topovet.invariants.mirror_chern import compute_mirror_chern, mirror_planes
from topovet.invariants.results import WilsonWitness
from topovet.invariants.wilson_sheet import CRITERIA
from topovet.invariants.wilson_witness import compute_wilson
from topovet.symmetry.operators import operator_at

pytestmark = pytest.mark.real_data

NO_INVERSION = {
    "BiTeI": (0, 0, 0, 0),
    "BiTeI_pressed": (1, 0, 0, 1),
    "CdTe": (0, 0, 0, 0),
}


@functools.cache
def wilson_of(case: str, effort: str = "standard") -> WilsonWitness:
    run = run_of(case)
    declarations, time_reversal = run.result("declarations"), run.result("time-reversal")
    return compute_wilson(
        run.result("hamiltonian-with-basis").lattice.bloch,
        run.result("electrons").filling,
        declarations.crystal.periodic,
        time_reversal=time_reversal.present,
        spinful=bool(declarations.spinful),
        criteria=CRITERIA[effort],
    )


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_indices_are_those_of_the_parities(case: str) -> None:
    witness = wilson_of(case)
    assert (witness.status, witness.reason) == ("ok", "")
    assert witness.z2 == tuple(reference(case, "dft_parity.json")["indices_wannier_occupied"])


@pytest.mark.parametrize("case", NO_INVERSION)
def test_indices_without_inversion(case: str) -> None:
    witness = wilson_of(case)
    assert (witness.status, witness.reason) == ("ok", "")
    assert witness.z2 == NO_INVERSION[case]
    assert list(witness.z2) == reference(case, "z2_by_own_wilson.json")["z2"]


@pytest.mark.parametrize("case", NO_INVERSION)
def test_planes_are_those_of_plain_loops(case: str) -> None:
    expected = reference(case, "z2_by_own_wilson.json")["with_wsvec"]["planes"]
    found = {plane.plane.replace("1/2", "0.5"): plane.z2 for plane in wilson_of(case).planes}
    assert found == expected


@pytest.mark.parametrize("case", ["BiTeI", "BiTeI_pressed"])
def test_planes_are_those_of_the_wave_functions(case: str) -> None:
    theirs = reference(case, "dft_wilson.json")
    found = {plane.plane: plane.z2 for plane in wilson_of(case).planes}
    assert found["k3=0"] == theirs["k3=0.0"]["z2"]
    assert found["k3=1/2"] == theirs["k3=0.5"]["z2"]


def test_strong_index_is_that_of_the_s4_eigenvalues() -> None:
    z2 = wilson_of("CdTe").z2
    assert z2 is not None
    assert z2[0] == reference("CdTe", "dft_s4.json")["strong_index"]


@pytest.mark.parametrize(
    ("case", "magnitude"),
    [("Sb", 1), ("Bi2Se3", 1), ("Bi2Se3_mlwf", 1), ("Sb2Se3", 0), ("PbTe", 0), ("CdTe", 0)],
)
def test_mirror_chern_numbers(case: str, magnitude: int) -> None:
    """|n_M| = 1 for Sb (Teo, Fu, Kane, PRB 78, 045426 (2008)) and for Bi2Se3, a strong phase by
    inversion at Gamma alone (odd by their argument; the value from memory); 0 where nothing is
    inverted. All mirrors of a structure are equivalent here."""
    operated_case = operated(case)
    mirrors = [
        operator
        for operator in operated_case.operators
        if not operator.antiunitary
        and np.trace(operator.rotation) == 1
        and round(np.linalg.det(operator.rotation)) == -1
    ]
    found = set()
    for mirror in mirrors[:2]:
        for plane in mirror_planes(mirror.rotation):
            number = compute_mirror_chern(
                operated_case.bloch,
                plane,
                functools.partial(operator_at, mirror),
                operated_case.filling,
            )
            assert number.status == "ok", number.reason
            # one-sided images of use_ws_distance break rotations by up to 0.2 eV in empty bands
            assert number.purity > 0.99
            assert number.plus is not None
            assert number.minus is not None
            assert number.plus.chern == -number.minus.chern
            found.add(abs(number.mirror_chern))
    assert found == {magnitude}


@pytest.mark.parametrize("case", [*CENTROSYMMETRIC, *NO_INVERSION])
def test_evidence(case: str) -> None:
    """Time reversal holds in the loops themselves, at a cost far below the budget."""
    witness = wilson_of(case)
    assert len(set(witness.nu0_determinations)) == 1
    assert witness.n_solves < 12_000
    for plane in witness.planes:
        assert plane.kramers_splitting < 1e-3
        assert plane.reversal_loss < 1e-5
        assert plane.smallest_singular_value > 0.75
        assert plane.smallest_gap > 0.1


@pytest.mark.parametrize(
    "case",
    [
        *("BiTeI_pressed", "Bi111_bilayer", "Sb"),
        *(pytest.param(c, marks=pytest.mark.endurance) for c in ("PbTe", "Bi2Se3_mlwf")),
    ],
)
def test_more_effort_changes_nothing(case: str) -> None:
    assert wilson_of(case, "thorough").z2 == wilson_of(case).z2


def test_narrow_gap_of_lead_telluride() -> None:
    """6.6 meV at L: the planes that hold L meet it, and still cost a few hundred solves each."""
    gaps = [plane.smallest_direct_gap_ev for plane in wilson_of("PbTe").planes]
    assert min(gaps) == pytest.approx(0.0066, abs=2e-4)
