"""Compounds with something wrong in their files, each fault as it happens to people."""

from __future__ import annotations

import numpy as np

from topovet.demo import faults
from topovet.demo.compound import Compound
from topovet.demo.dirac_models import wilson_dirac
from topovet.demo.draft import draft_case
from topovet.demo.materials import (
    CUBIC,
    LAYER,
    bonded,
    cubic,
    film,
    honeycomb,
    layered,
    strong,
    weak,
)
from topovet.demo.planar_models import bhz, kane_mele

FLAWED: tuple[Compound, ...] = (
    Compound(
        "GX-17",
        "as GX-01, spinors written all up, then all down",
        lambda: faults.block_spin_order(draft_case(strong(), CUBIC)),
        "strong-ti",
        (1, 0, 0, 0),
        ("spin-order-mismatch",),
    ),
    Compound(
        "GX-18",
        "as GX-01, projections in another order than in the run",
        lambda: faults.projections_reversed(draft_case(strong(), CUBIC)),
        "strong-ti",
        (1, 0, 0, 0),
        ("orbital-declaration-wrong",),
        may_stay_open=True,
    ),
    Compound(
        "GX-19",
        "sheet as GX-10 on a polar substrate that the structure does not show: trivial",
        lambda: draft_case(honeycomb(kane_mele(lambda_v=0.35), ("Sn", "Sn")), LAYER),
        "trivial",
        (0,),
        ("symmetry-broken", "parity-impure", "witnesses-disagree"),
        may_stay_open=True,
    ),
    Compound(
        "GX-20",
        "as GX-03, inversion centre and POSCAR of another run",
        lambda: faults.structure_of_another_run(
            faults.centre_declared(draft_case(weak(), CUBIC), (0.2, 0.0, 0.0)), 1.03
        ),
        "weak-ti",
        (0, 1, 1, 1),
        ("inversion-centre-shifted", "cell-mismatch"),
        may_stay_open=True,
    ),
    Compound(
        "GX-21",
        "as GX-01, put together from parts: one block twice, of R and -R only one",
        lambda: faults.block_listed_twice(faults.upper_half_lost(draft_case(strong(), CUBIC)), 0.5),
        "undetermined",
        None,
        ("duplicate-r", "missing-partner-r"),
    ),
    Compound(
        "GX-22",
        "as GX-01, one electron too many in case.toml",
        lambda: faults.with_settings(draft_case(strong(), CUBIC), filling="3"),
        "undetermined",
        None,
        ("filling-off",),
    ),
    Compound(
        "GX-23",
        "square film in normal order, doped: the Fermi energy lies in the conduction band",
        lambda: faults.fermi_moved(draft_case(film(bhz(m=-1.0), "Tl", "S"), LAYER), 0.34),
        "trivial",
        (0,),
        ("fermi-outside-gap",),
    ),
    Compound(
        "GX-24",
        "as GX-02, one hopping edited by hand: no longer Hermitian",
        lambda: faults.edited_by_hand(draft_case(bonded(("Ge", "Ge"), 0.4), CUBIC), 0.04),
        "strong-ti",
        (1, 1, 1, 1),
        ("not-hermitian",),
        may_stay_open=True,
    ),
    Compound(
        "GX-25",
        "as GX-04, lattice vectors of the outer shells left out",
        lambda: faults.shells_cut(draft_case(layered(), CUBIC), 0.6),
        "weak-ti",
        (0, 0, 0, 1),
        ("range-truncated",),
        may_stay_open=True,
    ),
    Compound(
        "GX-26",
        "as GX-02, one centre on a wrong branch and the shifts that follow from it",
        lambda: faults.centre_on_wrong_branch(
            draft_case(bonded(("Ge", "Ge"), 0.4), CUBIC, shared=True),
            1,
            np.array([0.5, 0.0, 0.0]),
        ),
        "strong-ti",
        (1, 1, 1, 1),
        ("centres-off",),
    ),
    Compound(
        "GX-27",
        "as GX-08, with the energies of a run with another potential",
        lambda: faults.energies_of_another_run(
            draft_case(bonded(("In", "Sb"), 0.4, 0.15), CUBIC, shared=True), 1.05
        ),
        "strong-ti",
        (1, 1, 1, 1),
        ("interpolation-poor",),
    ),
    Compound(
        "GX-28",
        "as GX-11, H(R) printed with three digits: its gap is below the last of them",
        lambda: faults.digits_lost(
            draft_case(cubic(wilson_dirac(m=-2.997), "In", "I", 4.35), CUBIC), 3
        ),
        "undetermined",
        None,
        ("inside-error-bar",),
    ),
    Compound(
        "GX-29",
        "as GX-02, a copy of hr.dat that broke off: cannot be read",
        lambda: faults.cut_short(draft_case(bonded(("Ge", "Ge"), 0.4), CUBIC), 0.7),
        "",
    ),
    Compound(
        "GX-30",
        "as GX-23, nothing says how many electrons there are: cannot be vetted",
        lambda: faults.electrons_unsaid(draft_case(film(bhz(m=-1.0), "Tl", "S"), LAYER)),
        "",
    ),
)
