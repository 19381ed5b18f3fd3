"""Made-up findings of band representations, one of each class."""

from __future__ import annotations

from dataclasses import replace

from topovet.invariants.band_reps.results import (
    ATOMIC,
    FRAGILE,
    NOT_GAPPED,
    STABLE,
    UNRESOLVED,
    AtomicLimit,
    BandRepWitness,
    BandSet,
    LineLevels,
    PointColumns,
)

LIMIT = AtomicLimit((0.5, 0.0, 0.0), 3, "-3m", "2a+", 6, 2, on_atoms=False)

STRONG_SET = BandSet(
    first_band=0,
    n_bands=6,
    classification=STABLE,
    reason="",
    indicator=(1, 3),
    multiplicities=((2, 1), (3,)),
    atomic_limits=(),
    obstructed=None,
    crossings=(),
    z2=(1, 0, 0, 0),
    purity=0.9987,
)

ATOMIC_SET = replace(
    STRONG_SET, classification=ATOMIC, indicator=(0, 0), obstructed=False, z2=(0, 0, 0, 0)
)
OBSTRUCTED_SET = replace(ATOMIC_SET, obstructed=True, atomic_limits=(LIMIT,))
FRAGILE_SET = replace(ATOMIC_SET, classification=FRAGILE, obstructed=None)
CROSSING_SET = replace(
    STRONG_SET,
    classification=NOT_GAPPED,
    indicator=None,
    reason="compatibility relations force bands of the set to meet others",
    crossings=("from (0, 0, 0) to (0, 0, ½): 1 1a more, 1 1b fewer",),
    z2=(None, None, None, None),
)
UNREAD_SET = replace(
    CROSSING_SET,
    classification=UNRESOLVED,
    reason="at Γ <b> the purity is 0.31",
    multiplicities=(),
    crossings=(),
    purity=None,
)

STRONG = BandRepWitness(
    status="ok",
    reason="",
    group="166 (R-3m)",
    spinful=True,
    n_operations=12,
    n_structure=12,
    indicator_group=(2, 4),
    n_band_representations=16,
    points=(
        PointColumns("Γ", (0.0, 0.0, 0.0), 0, ("Γ1ab+", "Γ2−"), (2, 2)),
        PointColumns("K", (1 / 3, 1 / 3, 0.0), 1, ("K1",), (2,)),
    ),
    occupied=STRONG_SET,
    lines=(
        LineLevels("Γ", "K", (0.0, 0.0, 0.0), (1 / 3, 1 / 3, 0.0), "mm2", ("2",), (3,)),
        LineLevels("Γ", "Γ", (0.0, 0.0, 0.0), (0.0, 0.0, 1.0), "-3", ("1a", "1b"), (4, 2)),
    ),
    sets=(replace(ATOMIC_SET, n_bands=4), replace(FRAGILE_SET, first_band=4, n_bands=2)),
)


def of(bands: BandSet) -> BandRepWitness:
    """The witness with another finding on the occupied bands."""
    failed = bands.classification == UNRESOLVED
    return replace(
        STRONG,
        occupied=bands,
        status="failed" if failed else "ok",
        reason=bands.reason if failed else "",
    )
