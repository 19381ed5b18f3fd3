"""Mirror-protected phases as case folders, from the files to the class, against the literature."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from case_writer import write_case
from chern_models import double_wilson_dirac, layered_bhz, snte
from lattice_models import LatticeModel, bhz, kane_mele, wilson_dirac
from topovet.pipeline.dossier import start_run
from topovet.verdict.document import Verdict


def vetted(model: LatticeModel, folder: Path) -> Verdict:
    run = start_run(write_case(model, folder), settings={"effort": "quick"})
    verdict: Verdict = run.result("verdict")
    return verdict


def boron_nitride() -> LatticeModel:
    """Kane and Mele's model in its trivial phase, on two kinds of atoms."""
    model = kane_mele(lambda_v=0.5)
    return replace(model, crystal=replace(model.crystal, symbols=("B", "N")))


def test_tin_telluride_is_a_crystalline_insulator(tmp_path: Path) -> None:
    """Hsieh et al., Nat. Commun. 3, 982 (2012): n_M = -2 on the six {110} mirrors, all Z2 zero.

    On {100}, which hold no L, it is 0. Z8 = 4: Khalaf et al., PRX 8, 031070 (2018) (from memory).
    """
    verdict = vetted(snte(), tmp_path / "case")
    assert verdict.class_ == "crystalline-ti"
    assert verdict.agreement == "agree"
    assert verdict.invariants.z2 == (0, 0, 0, 0)
    assert verdict.invariants.z4 == 0
    assert verdict.invariants.indicators["z8"] == 4
    numbers = [abs(n) for n in verdict.invariants.mirror_chern.values()]
    assert sorted(numbers) == [0, 0, 0, 2, 2, 2, 2, 2, 2]
    for plane in verdict.witnesses.mirror.planes:
        diagonal = np.count_nonzero(np.round(plane["normal"], 6)) == 2
        assert (plane["mirror_chern"] != 0) == diagonal
    assert len(set(verdict.invariants.mirror_chern.values())) == 2  # one sign on all six


def test_without_inversion_of_its_bands_it_is_trivial(tmp_path: Path) -> None:
    verdict = vetted(snte(m=4.0), tmp_path / "case")
    assert verdict.class_ == "trivial"
    assert set(verdict.invariants.mirror_chern.values()) == {0}
    assert set(verdict.invariants.indicators.values()) == {0}
    assert any("glide, screw and rotation" in reason for reason in verdict.confidence.reasons)


def test_two_strong_insulators_make_a_crystalline_one(tmp_path: Path) -> None:
    """n_M and kappa add up: kappa = 2 goes with n_M = +-2, so that it is not called higher-order
    (Khalaf et al., PRX 8, 031070 (2018): one indicator, several phases)."""
    verdict = vetted(double_wilson_dirac(), tmp_path / "case")
    assert verdict.class_ == "crystalline-ti"
    assert verdict.invariants.z4 == 2
    assert {abs(n) for n in verdict.invariants.mirror_chern.values()} == {0, 2}


def test_without_its_mirrors_the_same_indicator_reads_higher_order(tmp_path: Path) -> None:
    """A structure of inversion alone: kappa = 2 is left, and no mirror to say more."""
    model = double_wilson_dirac()
    cell = model.crystal.cell + np.array([[0, 0.1, 0.2], [0, 0, 0.3], [0, 0, 0]])
    model = replace(model, crystal=replace(model.crystal, cell=cell))
    verdict = vetted(model, tmp_path / "case")
    assert verdict.class_ == "higher-order"
    assert verdict.invariants.mirror_chern == {}
    assert any("the group has no mirror" in reason for reason in verdict.confidence.reasons)


@pytest.mark.parametrize(
    ("model", "number"),
    [(kane_mele(), 1), (boron_nitride(), 0), (bhz(m=2.0), 1), (bhz(m=9.0), 0)],
    ids=lambda x: x.name if isinstance(x, LatticeModel) else "",
)
def test_spin_chern_number_of_a_layer(model: LatticeModel, number: int, tmp_path: Path) -> None:
    """With s_z kept, the mirror in the plane counts spins: n_M is the spin Chern number (Sheng,
    Weng, Sheng, Haldane, PRL 97, 036808 (2006), doi:10.1103/PhysRevLett.97.036808), odd with nu."""
    verdict = vetted(model, tmp_path / "case")
    assert [abs(n) for n in verdict.invariants.mirror_chern.values()] == [number]
    assert verdict.invariants.z2 == (number,)


@pytest.mark.parametrize(
    ("model", "at_0", "at_half"),
    [(wilson_dirac(m=-2.0), 1, 0), (wilson_dirac(m=2.0), 0, 1), (layered_bhz(), 1, 1)],
    ids=["strong 000", "strong 111", "layers"],
)
def test_sum_rule(model: LatticeModel, at_0: int, at_half: int, tmp_path: Path) -> None:
    """Odd on an odd number of the two planes of a mirror in a strong phase (Teo, Fu, Kane 2008)."""
    verdict = vetted(model, tmp_path / "case")
    assert verdict.agreement == "agree"
    numbers = verdict.invariants.mirror_chern
    assert numbers["m(0 0 1) k=0"] % 2 == at_0
    assert numbers["m(0 0 1) k=G/2"] % 2 == at_half
