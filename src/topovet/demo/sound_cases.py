"""Compounds whose files are sound: insulators first, then physics that is harder to vet."""

from __future__ import annotations

from topovet.demo import faults
from topovet.demo.changes import in_crystal, in_ev
from topovet.demo.compound import Compound
from topovet.demo.crystal_models import snte
from topovet.demo.dirac_models import wilson_dirac
from topovet.demo.draft import draft_case
from topovet.demo.materials import (
    CUBIC,
    LAYER,
    bonded,
    cubic,
    honeycomb,
    ionic,
    layered,
    strong,
    two_inversions,
    weak,
)
from topovet.demo.planar_models import haldane, kane_mele

INSULATORS: tuple[Compound, ...] = (
    Compound(
        "GX-01",
        "cubic, bands of one cation inverted at Gamma (Wilson-Dirac model)",
        lambda: draft_case(strong(), CUBIC),
        "strong-ti",
        (1, 0, 0, 0),
    ),
    Compound(
        "GX-02",
        "diamond-like with one strong bond (Fu-Kane-Mele model), all files of the run",
        lambda: draft_case(bonded(("Ge", "Ge"), 0.4), CUBIC, shared=True),
        "strong-ti",
        (1, 1, 1, 1),
    ),
    Compound(
        "GX-03",
        "cubic, bands inverted at Gamma and X (Wilson-Dirac model)",
        lambda: draft_case(weak(), CUBIC),
        "weak-ti",
        (0, 1, 1, 1),
    ),
    Compound(
        "GX-04",
        "topological layers, loosely stacked (Bernevig-Hughes-Zhang model)",
        lambda: draft_case(layered(), CUBIC),
        "weak-ti",
        (0, 0, 0, 1),
    ),
    Compound(
        "GX-05",
        "ionic, wide gap, filled p shell of the anion",
        lambda: draft_case(ionic(), CUBIC, shared=True),
        "trivial",
        (0, 0, 0, 0),
    ),
    Compound(
        "GX-06",
        "triclinic, two inverted pairs of bands at Gamma: Z2 trivial, kappa = 2",
        lambda: draft_case(two_inversions(), CUBIC),
        "higher-order",
        (0, 0, 0, 0),
    ),
    Compound(
        "GX-07",
        "rock salt, bands inverted at all four L, mirror Chern number 2 (model of SnTe)",
        lambda: draft_case(in_ev(in_crystal(snte(), ("Ge", "Se")), 0.4, 3.0), CUBIC),
        "crystalline-ti",
        (0, 0, 0, 0),
    ),
    Compound(
        "GX-08",
        "polar, one strong bond between unlike atoms: strong without inversion",
        lambda: draft_case(bonded(("In", "Sb"), 0.4, 0.15), CUBIC, shared=True),
        "strong-ti",
        (1, 1, 1, 1),
    ),
    Compound(
        "GX-09",
        "zinc blende, strongly ionic: trivial without inversion",
        lambda: draft_case(bonded(("Ga", "P"), 0.0, 1.2), CUBIC),
        "trivial",
        (0, 0, 0, 0),
    ),
    Compound(
        "GX-10",
        "flat honeycomb sheet (Kane-Mele model), electrons given by the Fermi energy alone",
        lambda: faults.with_settings(
            draft_case(honeycomb(kane_mele(), ("Sn", "Sn")), LAYER), filling=None
        ),
        "strong-ti",
        (1,),
    ),
)

HARD: tuple[Compound, ...] = (
    Compound(
        "GX-11",
        "as GX-01, so near its transition that the gap is 2 meV",
        lambda: draft_case(cubic(wilson_dirac(m=-2.997), "In", "I", 4.35), CUBIC),
        "strong-ti",
        (1, 0, 0, 0),
    ),
    Compound(
        "GX-12",
        "diamond lattice with equal bonds: Dirac points at X",
        lambda: draft_case(bonded(("Pb", "Pb"), 0.0), CUBIC),
        "dirac-semimetal",
        None,
        ("gap-closes",),
        may_stay_open=True,
    ),
    Compound(
        "GX-13",
        "spinless sheet with broken time reversal (Haldane model)",
        lambda: draft_case(honeycomb(haldane(), ("C", "C")), LAYER),
        "chern",
        None,
        ("no-spin-orbit",),
    ),
    Compound(
        "GX-14",
        "as GX-01 with weak magnetic order: inversion indicator of an axion insulator",
        lambda: draft_case(cubic(wilson_dirac(m=-2.0, zeeman=0.3), "Mn", "I", 4.35), CUBIC),
        "axion-candidate",
        None,
        ("time-reversal-broken",),
    ),
    Compound(
        "GX-15",
        "as GX-01 with strong magnetic order: Weyl points",
        lambda: draft_case(cubic(wilson_dirac(m=-2.8, zeeman=0.6), "Mn", "I", 4.35), CUBIC),
        "weyl-semimetal",
        None,
        ("time-reversal-broken", "gap-closes"),
        may_stay_open=True,
    ),
    Compound(
        "GX-16",
        "as GX-05, computed without spin",
        lambda: draft_case(ionic(spinful=False), CUBIC),
        "undetermined",
        None,
        ("no-spin-orbit",),
    ),
)
