"""Declared orbitals, centre and origin against the Hamiltonian. All cases invented."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from invented_findings import SOUND, changed
from topovet.symmetry.centre_search import CentreTrial
from topovet.symmetry.declaration_results import (
    Correction,
    DeclarationCheck,
    FunctionAgreement,
    OperatorFit,
)
from topovet.symmetry.declaration_trials import Reading
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.results import ShiftTest
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.flags_declaration import (
    KINDS,
    best_correction,
    declaration_flags,
    holds_as_inferred,
    moved_centre,
)


def inferred(reliability: str = "good", residual_mev: float | None = 0.02) -> InferredInversion:
    return InferredInversion(
        reliability=reliability,
        reason="" if reliability == "good" else "nothing fits",
        centre_frac=np.array([0.5, 0.0, 0.0]),
        operator=None,
        alternatives=(),
        eigenvalue_ratio=400.0,
        null_space=1,
        misfit=0.01,
        rms_residual_mev=residual_mev,
        max_residual_mev=residual_mev,
        purity=0.99,
        acts_on_spin=False,
        bond_cut=0.1,
        n_bonds=40,
        structure_checked=True,
    )


def fit(worst_mev: float | None) -> OperatorFit:
    if worst_mev is None:
        return OperatorFit(None, None, "the centre moves the site of function 1 to no site")
    return OperatorFit(worst_mev, worst_mev / 2)


def trial(shift_ang: float | None, **parts: Any) -> CentreTrial:
    return CentreTrial(inferred(**parts), np.array([0.1, 0.0, 0.0]), shift_ang)


def check(**parts: Any) -> DeclarationCheck:
    """Declared inversion misses by 900 meV and nothing else was found."""
    nothing = DeclarationCheck(
        centre_frac=np.zeros(3),
        declared=fit(900.0),
        inferred_fit=fit(None),
        inferred=inferred("refused", None),
        functions=(),
        corrections=(),
        centres=(),
        shift_frac=None,
    )
    return replace(nothing, **parts)


def correction(kind: str, after_mev: float = 0.02, **parts: Any) -> Correction:
    order = parts.pop("order", (2, 3, 0, 1))
    reading = Reading(kind, None if kind in ("parity", "centre") else order, **parts)
    return Correction(reading, (0.5, 0.0, 0.0), fit(after_mev), 4)


def flags_of(found: DeclarationCheck, **parts: Any) -> list[Flag]:
    return list(declaration_flags(changed(declaration=found, **parts)))


# --- which reading


def test_helpers_on_nothing() -> None:
    assert best_correction(check()) is None
    assert moved_centre(check()) is None
    assert not holds_as_inferred(check())
    assert flags_of(check()) == []


@pytest.mark.parametrize(
    ("reliability", "after_mev", "holds"),
    [
        ("good", 0.02, True),
        ("good", 89.0, True),
        ("good", 91.0, False),  # less than ten times better: noise spoils both alike
        ("doubtful", 0.02, False),
        ("good", None, False),
    ],
)
def test_inferred_inversion_must_hold_far_better(
    reliability: str, after_mev: float | None, holds: bool
) -> None:
    found = check(inferred=inferred(reliability), inferred_fit=fit(after_mev))
    assert holds_as_inferred(found) == holds
    assert bool(flags_of(found)) == holds


def test_centre_of_the_structure_that_serves_as_well_is_not_moved() -> None:
    assert moved_centre(check(centres=(trial(2.4),))) is not None
    assert moved_centre(check(centres=(trial(2.4), trial(0.0)))) is None
    assert moved_centre(check(centres=(trial(None),))) is None
    assert moved_centre(check(centres=(trial(2.4, reliability="doubtful"),))) is None


def test_centre_that_holds_little_better_is_not_moved() -> None:
    """Sites from scattered centres shift the point as well, by less than they scatter."""
    assert moved_centre(check(centres=(trial(0.2, residual_mev=300.0),))) is None
    assert moved_centre(check(centres=(trial(0.2, residual_mev=80.0),))) is not None


# --- flags


@pytest.mark.parametrize("kind", sorted(KINDS))
def test_corrections_are_told_in_words(kind: str) -> None:
    parts: dict[str, Any] = {"flipped": (0, 1)} if kind == "parity" else {}
    flags = flags_of(check(corrections=(correction(kind, **parts),)))
    assert [(f.code, f.severity) for f in flags] == [("orbital-declaration-wrong", "error")]
    assert KINDS[kind] in flags[0].summary
    assert "misses by 900 meV" in flags[0].summary
    assert "it holds to 0.020 meV" in flags[0].summary
    changed_functions = [1, 2] if kind == "parity" else [1, 2, 3, 4]
    assert flags[0].evidence["wannier_functions"] == changed_functions


def test_readings_that_fit_as_well_are_counted() -> None:
    as_good = [correction("line-order", mev) for mev in (0.02, 0.0205, 0.3)]
    (flag,) = flags_of(check(corrections=tuple(as_good)))
    assert flag.evidence["other_readings_as_good"] == 1


def test_inversion_that_cannot_be_built_says_why() -> None:
    found = check(declared=fit(None), inferred=inferred(), inferred_fit=fit(0.02))
    (flag,) = flags_of(found)
    assert "inversion cannot be built (the centre moves the site" in flag.summary
    assert flag.evidence["residual_before_meV"] is None


def test_functions_that_disagree_are_named_where_no_reading_mends() -> None:
    functions = tuple(
        FunctionAgreement(n, f"A{n} s", 1.0 if n < 2 else -1.0, 0.0, True) for n in range(4)
    )
    found = check(inferred=inferred(), inferred_fit=fit(0.02), functions=functions)
    (flag,) = flags_of(found)
    assert flag.evidence["correction"] == "inferred"
    assert flag.evidence["wannier_functions"] == [3, 4]
    assert "disagrees on Wannier functions 3, 4" in flag.summary


def test_functions_in_other_cells_are_named() -> None:
    found = check(inferred=inferred(), inferred_fit=fit(0.02), rehomed=(4, 5))
    (flag,) = flags_of(found)
    assert "Wannier functions 5, 6 in other cells than declared" in flag.summary


def test_indices_of_the_other_reading_are_quoted_but_not_of_other_cells() -> None:
    """Parities of the inference rest on the cells that it was made with."""
    parity = SOUND.parity
    found = check(inferred=inferred(), inferred_fit=fit(0.02))
    (flag,) = flags_of(found, inferred_parity=parity)
    assert flag.evidence["z2_if_inferred"] == [1, 0, 0, 0]
    assert "1;(000)" in flag.summary
    (rehomed,) = flags_of(replace(found, rehomed=(4,)), inferred_parity=parity)
    assert rehomed.evidence["z2_if_inferred"] is None


def test_another_centre_by_its_correction() -> None:
    flags = flags_of(check(corrections=(correction("centre"),)))
    assert [(f.code, f.severity) for f in flags] == [("inversion-centre-shifted", "error")]
    assert flags[0].evidence["centre"] == [0.5, 0.0, 0.0]
    assert "about (½, 0, 0) it holds to 0.020 meV" in flags[0].summary


def test_another_centre_by_inference() -> None:
    flags = flags_of(check(centres=(trial(2.4),)))
    assert [f.code for f in flags] == ["inversion-centre-shifted"]
    assert flags[0].evidence["distance_ang"] == 2.4


def test_orbitals_are_not_blamed_where_the_centre_explains() -> None:
    found = check(
        corrections=(correction("centre"),),
        centres=(trial(2.4),),
        inferred=inferred(),
        inferred_fit=fit(0.02),
    )
    assert [f.code for f in flags_of(found)] == ["inversion-centre-shifted"]


def test_stated_centre_that_is_none_says_it_all() -> None:
    stated = {"settings": replace(SOUND.declared.settings, inversion_centre=(0.1, 0.0, 0.0))}
    flags = flags_of(check(corrections=(correction("line-order"),)), declared=stated)
    assert [(f.code, f.severity) for f in flags] == [("inversion-centre-shifted", "error")]
    assert "case.toml" in flags[0].summary


# --- origin


def shifted(**parts: Any) -> Findings:
    test = ShiftTest("given", (), (), None, None, "", (0.25, 0.0, 0.0))
    return changed(shift_test=test, **parts)


def test_common_origin_is_a_warning_with_its_length() -> None:
    (flag,) = declaration_flags(shifted())
    assert (flag.code, flag.severity) == ("inversion-centre-shifted", "warning")
    length = float(np.linalg.norm(0.25 * SOUND.declared.crystal.cell[0]))
    assert flag.evidence["shift_ang"] == pytest.approx(length)
    assert "(¼, 0, 0)" in flag.summary


def test_without_inversion_a_common_shift_may_be_physical() -> None:
    """In a polar crystal all centres may be displaced against the ions."""
    assert SOUND.space_group is not None
    polar = {"centres_frac": np.zeros((0, 3))}
    assert list(declaration_flags(shifted(space_group=polar))) == []


def test_no_shift_no_flag() -> None:
    assert list(declaration_flags(SOUND)) == []
