"""Mirror Chern numbers of the first-principles cases, and of one with its bands turned over."""

from __future__ import annotations

import numpy as np
import pytest

from real_cases import CASES, run_of
from real_operators import operated, shifted_onsite
from topovet.invariants.mirror_witness import (
    MirrorWitness,
    compute_mirror_witness,
    proper_mirrors,
)
from topovet.model.fourier import build_bloch_sum
from topovet.pipeline.dossier import start_run

pytestmark = pytest.mark.real_data


def witness_of(case: str) -> MirrorWitness:
    witness: MirrorWitness = run_of(case).result("mirror-chern")
    return witness


@pytest.mark.parametrize(
    ("case", "magnitude", "n_planes"),
    [
        ("Bi2Se3", 1, 3),
        ("Bi2Se3_mlwf", 1, 1),  # two mirrors are broken by the Wannier functions
        ("Sb2Se3_compressed", 1, 3),
        pytest.param("Sb2Se3", 0, 3, marks=pytest.mark.endurance),
        ("BiTeI", 0, 3),
        ("BiTeI_pressed", 1, 3),
        pytest.param("CdTe", 0, 6, marks=pytest.mark.endurance),
        ("PbTe", 0, 9),
        pytest.param("Si", 0, 6, marks=pytest.mark.endurance),
    ],
)
def test_every_plane_has_its_number(case: str, magnitude: int, n_planes: int) -> None:
    """Odd where an odd number of inverted TRIM lies on the plane (Teo, Fu, Kane 2008): Gamma of
    Bi2Se3 and Sb2Se3_compressed, A of BiTeI_pressed; |n_M| = 1 in Bi2Se3 is from memory."""
    witness = witness_of(case)
    assert witness.status == "ok", witness.reason
    assert len(witness.numbers) == n_planes
    assert {abs(n) for n in witness.numbers.values()} == {magnitude}
    assert len(set(witness.numbers.values())) == 1
    assert witness.n_solves < 6000


def test_silicon_has_three_glides() -> None:
    assert witness_of("Si").left_out == ("glides: m(0 1 1), m(1 0 1), m(1 1 0)",)


def test_lead_telluride_with_inverted_l_is_like_tin_telluride() -> None:
    """Hsieh et al., Nat. Commun. 3, 982 (2012): n_M = -2 on {110} for L6- below L6+.

    No real case here is a crystalline insulator; lowering the Pb p levels of PbTe inverts L as in
    SnTe, with all hoppings those of the first-principles run.
    """
    case = operated("PbTe_a656")
    lowered = [-0.4 if " p" in label else 0.0 for label in case.basis.labels]
    lowered = [
        shift if label.startswith("Pb") else 0.0
        for shift, label in zip(lowered, case.basis.labels, strict=True)
    ]
    bloch = build_bloch_sum(shifted_onsite(case.model, np.array(lowered)))
    unitary = [o for o in case.operators if not o.antiunitary]
    reflections = [
        (o, 0.0)
        for o in unitary
        if np.trace(o.rotation) == 1 and round(float(np.linalg.det(o.rotation))) == -1
    ]
    mirrors, _ = proper_mirrors(reflections, case.crystal)
    witness = compute_mirror_witness(bloch, mirrors, unitary, case.crystal, case.filling)
    assert witness.status == "ok", witness.reason
    assert sorted(witness.numbers.values()) == [-2] * 6 + [0] * 3
    assert witness.z2(3) == (0, 0, 0, 0)


@pytest.mark.parametrize(
    ("case", "fillings"),
    [
        ("Bi2Se3", (4, 10)),
        ("PbTe", (2,)),
        pytest.param("Sb2Se3", (4, 10), marks=pytest.mark.endurance),
    ],
)
def test_lower_groups_of_bands_by_both_witnesses(case: str, fillings: tuple[int, ...]) -> None:
    """Bands below lower gaps, 5 to 106 meV wide: parities and Wilson loops agree on each.

    The cheapest case also has its lower gap proved; the others are sampled to save time.
    """
    effort = "standard" if case == "PbTe" else "quick"
    settings = {"lower_gaps": list(fillings), "effort": effort}
    groups = start_run(CASES / case, settings=settings).result("lower-gaps").groups
    assert [g.filling for g in groups] == list(fillings)
    for group in groups:
        assert group.status == "ok", (group.filling, group.reason)
        assert group.parity_z2 is not None
        assert group.parity_z2 == group.wilson_z2
        assert group.z4 % 2 == group.parity_z2[0]
        bound = group.proved_min_ev
        assert (bound is not None) == (effort == "standard")
        assert bound is None or 0.9 * group.direct_gap_ev < bound <= group.direct_gap_ev


@pytest.mark.parametrize("case", ["CdTe", pytest.param("Bi2Se3", marks=pytest.mark.endurance)])
def test_planes_made_equal_by_symmetry_cost_nothing_and_change_nothing(case: str) -> None:
    """Half of the planes or fewer are followed; the thorough effort follows all six."""
    quick = run_of(case).result("wilson")
    thorough = start_run(CASES / case, settings={"effort": "thorough"}).result("wilson")
    assert quick.z2 == thorough.z2
    assert len(quick.planes) + len(quick.assumed_equal) == 6
    assert len(quick.planes) == (4 if case == "Bi2Se3" else 2)
    assert len(thorough.planes) == 6
    z2 = {plane.plane: plane.z2 for plane in thorough.planes}
    assert all(z2[name] == z2[source] for name, source in quick.assumed_equal)
