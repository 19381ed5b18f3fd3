"""Made-up results for the report tests: an invented campaign on compounds nobody has made.

The bands are those of a lattice Dirac model, mass M - sum cos k_i, so that levels, parities and
indices hang together; all other numbers are chosen.
"""

from __future__ import annotations

import itertools
from dataclasses import replace

import numpy as np

from topovet.intake.audit_results import HamiltonianAudit
from topovet.invariants.results import ParityWitness, TrimParity
from topovet.model.crystal import Crystal
from topovet.model.decay import DecayProfile
from topovet.report.material import ReportMaterial, TaskEntry
from topovet.spectrum.results import BandPath, Electrons, GapSample, InterpolationCheck
from topovet.symmetry.results import InversionTest, SpaceGroup, SpinOrder, TimeReversalTest
from topovet.verdict.document import (
    CaseEntry,
    ConfidenceEntry,
    ElectronsEntry,
    GapEntry,
    InputEntry,
    InvariantsEntry,
    InversionEntry,
    ParityEntry,
    ProvenanceEntry,
    RobustnessEntry,
    SpaceGroupEntry,
    SurfaceEntry,
    TimeReversalEntry,
    TrimEntry,
    Verdict,
    WilsonEntry,
    WitnessesEntry,
)
from topovet.verdict.flags import Flag

HOSTILE = "<script>alert('1')</script>\"\n../../etc & $x^2$ \x1b[31m\u202e{{ 7*7 }}"
"""What a name out of a file could hold: markup, quotes, line ends, paths, escapes, templates."""

_MASS = {3: 2.0, 2: 1.0}
_SPECIAL = {
    3: (
        *(("G", (0, 0, 0)), ("M", (0.5, 0, 0)), ("K", (1 / 3, 1 / 3, 0)), ("G", (0, 0, 0))),
        *(("A", (0, 0, 0.5)), ("L", (0.5, 0, 0.5)), ("H", (1 / 3, 1 / 3, 0.5))),
        ("A", (0, 0, 0.5)),
    ),
    2: (("G", (0, 0, 0)), ("M", (0.5, 0, 0)), ("K", (1 / 3, 1 / 3, 0)), ("G", (0, 0, 0))),
}
_NOT_BUILT = "not tested by this version"


def levels(k: np.ndarray, dimension: int) -> np.ndarray:
    """(n_k, 6) energies of the Kramers pairs, eV, ascending; three of the six are filled."""
    angle = 2 * np.pi * k[:, :dimension]
    mass = _MASS[dimension] - np.cos(angle).sum(axis=1)
    dirac = 0.35 * np.sqrt(mass**2 + (np.sin(angle) ** 2).sum(axis=1))
    wave = np.cos(angle).sum(axis=1) / dimension
    far = [-3.1 + 0.5 * wave, -2.0 - 0.4 * wave, 2.3 + 0.5 * wave, 3.4 - 0.6 * wave]
    return np.stack([far[0], far[1], -dirac, dirac, far[2], far[3]], axis=1) + 5.4


def level_parities(k: np.ndarray, dimension: int) -> np.ndarray:
    """(6,) parities of the same pairs at a TRIM."""
    mass = _MASS[dimension] - np.cos(2 * np.pi * k[:dimension]).sum()
    return np.array([1, -1, -np.sign(mass), np.sign(mass), 1, -1])


def band_path(dimension: int, reciprocal: np.ndarray) -> BandPath:
    """Forty points a leg, without jumps."""
    stops = _SPECIAL[dimension]
    k, labels, at = [np.array(stops[0][1], dtype=float)], [stops[0][0]], [0]
    for (_, start), (label, stop) in itertools.pairwise(stops):
        for share in np.linspace(0, 1, 41)[1:]:
            k.append((1 - share) * np.array(start) + share * np.array(stop))
        labels.append(label)
        at.append(len(k) - 1)
    k_frac = np.array(k)
    steps = np.linalg.norm(np.diff(k_frac, axis=0) @ reciprocal, axis=1)
    distance = np.concatenate([[0.0], np.cumsum(steps)])
    energies = np.repeat(levels(k_frac, dimension), 2, axis=1)
    return BandPath(k_frac, distance, energies, tuple(at), tuple(labels), "hexagonal")


def trim_parities(dimension: int) -> tuple[TrimParity, ...]:
    """All TRIM; the purity and the residual are chosen."""
    found = []
    for k in itertools.product(*([(0.0, 0.5)] * dimension + [(0.0,)] * (3 - dimension))):
        point = np.array(k)
        energy, parity = levels(point[None], dimension)[0], level_parities(point, dimension)
        plus = 2 * int((parity[:3] > 0).sum())
        found.append(
            TrimParity(
                k=k,
                n_plus=plus,
                n_minus=6 - plus,
                delta=int(np.prod(parity[:3])),
                purity=0.9991 - 0.0003 * k[0],
                gap_ev=float(energy[3] - energy[2]),
                violation_mev=0.12 + k[1],
                level_energies_ev=tuple(energy.tolist()),
                level_parities=tuple((0.999 * parity).tolist()),
            )
        )
    return tuple(found)


def crystal(dimension: int) -> Crystal:
    a, c = 4.21, 11.3 if dimension == 3 else 21.0
    cell = np.array([[a, 0, 0], [-a / 2, a * np.sqrt(3) / 2, 0], [0, 0, c]])
    atoms = [[0, 0, 0], [1 / 3, 2 / 3, 0.11], [2 / 3, 1 / 3, -0.11]]
    return Crystal(cell, ("Cd", "Te", "Te"), np.array(atoms), (True, True, dimension == 3))


def space_group() -> SpaceGroup:
    identity = np.eye(3, dtype=int)
    return SpaceGroup(
        number=164,
        symbol="P-3m1",
        rotations=np.array([identity, -identity]),
        translations=np.zeros((2, 3)),
        symprec_ang=1e-3,
        centres_frac=np.array(list(itertools.product((0, 0.5), repeat=3))),
        wyckoff=("a", "d", "d"),
    )


def audit() -> HamiltonianAudit:
    return HamiltonianAudit(
        file="lantern_hr.dat.gz",
        header="written by an invented run",
        reader="fixed-columns",
        n_wann=12,
        n_r=343,
        hermiticity_mev=0.0004,
        duplicate_r=(),
        duplicates_identical=True,
        missing_partner_r=(),
        n_missing_partner=0,
        missing_partner_mev=0.0,
        degeneracy_sum=216.0,
        all_degeneracies_one=False,
        mesh_points=216,
        onsite_scale_ev=4.7,
        rounding_mev=0.004,
        shift_source="wsvec file",
        shift_note="Shifts of lantern_wsvec.dat.gz were applied to every element.",
        centre_offsets_ang=(0.02, 0.04),
    )


def decay() -> DecayProfile:
    distance = np.linspace(0, 13, 60)
    return DecayProfile(
        distances_ang=tuple(distance.tolist()),
        largest_mev=tuple((2400 * np.exp(-distance / 1.7) * (1.4 + np.sin(5 * distance))).tolist()),
        rim_ang=11.2,
        rim_mev=4.2,
        largest_hopping_mev=1450.0,
        positions="declared sites",
    )


def tasks() -> tuple[TaskEntry, ...]:
    def entry(name: str, needs: str, seconds: float, about: str) -> TaskEntry:
        return TaskEntry(name, tuple(needs.split()), "done", "", seconds, about)

    return (
        entry("hamiltonian", "", 1.24, "reads H(R) and applies weights and shifts"),
        entry("structure", "", 0.03, "reads cell and atoms"),
        entry("audit", "hamiltonian structure", 0.21, "checks the files against each other"),
        entry("model", "hamiltonian structure", 0.18, "builds the Hermitian model"),
        entry("space-group", "structure", 0.02, "finds the space group of the input cell"),
        entry("time-reversal", "model", 0.06, "tests time reversal in both spin orders"),
        entry("inversion", "model space-group", 0.31, "tests inversion on the orbitals"),
        replace(entry("electrons", "model", 0.0001, "settles the filling"), state="cached"),
        entry("gap", "model electrons", 2.9, "samples the direct gap"),
        entry("parity", "model inversion time-reversal electrons", 0.04, "counts parities"),
        entry("bands", "model structure", 0.6, "bands along the path"),
        entry("interpolation", "model electrons", 0.9, "compares with given energies"),
        replace(
            entry("wilson", "model electrons", 0, "follows Wannier charge centres"),
            state="not-applicable",
            reason=_NOT_BUILT,
            seconds=None,
        ),
        entry("verdict", "gap parity audit interpolation", 0.01, "weighs the evidence"),
        entry("report", "verdict bands", 1.1, "writes the dossier"),
    )


def strong() -> ReportMaterial:
    """A clean three-dimensional strong insulator with two mild flags."""
    flags = (
        Flag(
            "centres-off",
            "warning",
            "Two Wannier centres lie 1.9 Å from their declared sites.",
            {"largest_offset_ang": 1.9, "functions": [3, 7], "shifts_rebuilt": True},
            "Run Wannier90 again with guiding centres.",
        ),
        Flag("symmetry-broken", "info", "Inversion is kept to 0.62 meV.", {"violation_meV": 0.62}),
    )
    return _material(3, "Lantern-7", "CdTe2", (1, 0, 0, 0), "strong-ti", flags)


def sheet() -> ReportMaterial:
    """A two-dimensional topological insulator without flags."""
    return _material(2, "Veil-2", "CdTe2", (1,), "strong-ti", ())


def undetermined() -> ReportMaterial:
    """Impure parities at the TRIM, errors raised, nothing but the audit to show."""
    base = strong()
    reason = "states at (1/2, 0, 0) have a purity of 0.41, at least 0.9 needed"
    flags = (
        Flag(
            "parity-impure",
            "error",
            "Filled states at (1/2, 0, 0) are neither even nor odd: purity 0.41.",
            {"purity": 0.41, "k": [0.5, 0.0, 0.0], "needed": 0.9},
            "Check the projections against the Wannier90 run.",
        ),
        Flag("gap-closes", "error", "The direct gap closes to 0.02 meV.", {"gap_eV": 2e-5}, "…"),
    )
    verdict = replace(
        base.verdict,
        case=replace(base.verdict.case, name="Gravel-11", space_group=None),
        gap=GapEntry(2e-5, None, (0.12, 0.3, 0.0), -0.4, "gapless"),
        inversion=InversionEntry(False, None, None, "none", "no projections are declared"),
        witnesses=replace(
            base.verdict.witnesses, parity=ParityEntry("failed", reason, None, None, ())
        ),
        invariants=InvariantsEntry(),
        agreement="undetermined",
        class_="undetermined",
        robustness=RobustnessEntry(None, {"rounding": 0.004, "interpolation": None}),
        flags=flags,
        confidence=ConfidenceEntry("D", ("no witness gives an index",)),
    )
    inversion = InversionTest(
        False, "no projections are declared", None, "none", None, None, None, 0
    )
    return replace(
        base,
        verdict=verdict,
        space_group=None,
        inversion=inversion,
        gap=None,
        bands=None,
        parity=None,
        interpolation=None,
    )


def hostile() -> ReportMaterial:
    """Every string that can come from a file is hostile."""
    base = strong()
    v = base.verdict
    flag = Flag("cell-mismatch", "warning", HOSTILE, {HOSTILE: HOSTILE, "list": [HOSTILE]}, HOSTILE)
    verdict = replace(
        v,
        case=replace(
            v.case, name=HOSTILE, formula=HOSTILE, space_group=SpaceGroupEntry(2, HOSTILE)
        ),
        inputs=(InputEntry(HOSTILE, "0" * 64, 1),),
        electrons=replace(v.electrons, source=HOSTILE, how=HOSTILE),
        inversion=replace(v.inversion, reason=HOSTILE),
        witnesses=replace(v.witnesses, wilson=WilsonEntry("not-applicable", HOSTILE)),
        flags=(flag,),
        confidence=ConfidenceEntry("C", (HOSTILE,)),
        provenance=ProvenanceEntry("0", {HOSTILE: HOSTILE}, {HOSTILE: HOSTILE}, {}),
    )
    assert base.bands is not None
    return replace(
        base,
        verdict=verdict,
        crystal=Crystal(base.crystal.cell, (HOSTILE,) * 3, base.crystal.positions_frac),
        bands=replace(base.bands, labels=(HOSTILE,) * len(base.bands.labels), lattice=HOSTILE),
        audit=replace(base.audit, file=HOSTILE, header=HOSTILE, shift_note=HOSTILE),
        tasks=(TaskEntry(HOSTILE, (), "failed", HOSTILE, 0.1, HOSTILE), *base.tasks),
        log_note=HOSTILE,
    )


def _material(
    dimension: int,
    name: str,
    formula: str,
    z2: tuple[int, ...],
    class_: str,
    flags: tuple[Flag, ...],
) -> ReportMaterial:
    where = crystal(dimension)
    trim = trim_parities(dimension)
    z4 = 1 if dimension == 3 else None
    parity = ParityWitness(
        status="ok",
        reason="",
        z2=z2,
        z4=z4,
        kappa=-3 if dimension == 3 else None,
        eta4=None,
        centre=(0.0, 0.0, 0.0),
        trim=trim,
        kappa_by_centre=tuple(
            (c, 1) for c in itertools.product((0.0, 0.5), repeat=3) if dimension == 3
        ),
    )
    return ReportMaterial(
        verdict=_verdict(dimension, name, formula, parity, class_, flags),
        crystal=where,
        space_group=space_group(),
        inferred=None,
        symmetry_class=None,
        time_reversal=TimeReversalTest(
            present=True,
            violation_mev=0.0009,
            violation_r_mev=0.0007,
            violation_unshifted_mev=0.0004,
            kramers_splitting_mev=0.0002,
            spin_mixing_mev=640.0,
            tolerance_mev=1.0,
        ),
        inversion=InversionTest(True, "", (0.0, 0.0, 0.0), "declared", 0.62, 0.2, 0.31, 32),
        electrons=Electrons(6, "case.toml", "Stated in case.toml.", None, None, None, None),
        gap=GapSample(
            direct_ev=0.7,
            direct_k=(0.0, 0.0, 0.0),
            indirect_ev=0.7,
            vbm_ev=5.05,
            vbm_k=(0.0, 0.0, 0.0),
            cbm_ev=5.75,
            cbm_k=(0.0, 0.0, 0.0),
            mesh=(8, 8, 8 if dimension == 3 else 1),
            mesh_direct_ev=0.7,
            status="insulator",
            n_solves=1412,
        ),
        bands=band_path(dimension, where.reciprocal),
        group=None,
        parity=parity,
        wilson=None,
        chern=None,
        s4=None,
        irreps=(),
        interpolation=InterpolationCheck(0.8, 42.0, 216, 0.05, 0.6, 184, 4),
        audit=audit(),
        decay=decay(),
        spin_order=SpinOrder("interlaced", 0.0009, 912.0, 912.0),
        tasks=tasks(),
        log_note="The log of the run lies beside this file as log.txt.",
    )


def _verdict(
    dimension: int,
    name: str,
    formula: str,
    parity: ParityWitness,
    class_: str,
    flags: tuple[Flag, ...],
) -> Verdict:
    trim = tuple(
        TrimEntry(t.k, t.n_plus, t.n_minus, t.delta, t.purity, t.gap_ev) for t in parity.trim
    )
    return Verdict(
        case=CaseEntry(name, formula, dimension, True, 12, SpaceGroupEntry(164, "P-3m1")),
        inputs=(
            InputEntry("lantern_hr.dat.gz", "4f" * 32, 8_213_004),
            InputEntry("lantern.win", "a0" * 32, 2_110),
        ),
        electrons=ElectronsEntry(6, "case.toml", None, "Stated in case.toml."),
        gap=GapEntry(0.7, None, (0.0, 0.0, 0.0), 0.7, "insulator"),
        time_reversal=TimeReversalEntry(True, 0.0009, "interlaced"),
        inversion=InversionEntry(True, (0.0, 0.0, 0.0), 0.62, "declared"),
        witnesses=WitnessesEntry(
            ParityEntry("ok", "", parity.z2, parity.z4, trim),
            WilsonEntry("not-applicable", _NOT_BUILT),
            SurfaceEntry("not-applicable", _NOT_BUILT),
        ),
        invariants=InvariantsEntry(parity.z2, parity.z4),
        agreement="one-witness",
        class_=class_,
        robustness=RobustnessEntry(
            350.0, {"rounding": 0.004, "symmetry": 0.62, "interpolation": 0.8}
        ),
        flags=flags,
        confidence=ConfidenceEntry("B", ("one witness", "the gap is sampled, not proved")),
        measurable={},
        provenance=ProvenanceEntry(
            version="0.1.0",
            packages={"numpy": "2.0.0", "spglib": "2.5.0"},
            settings={"effort": "standard", "mesh": [8, 8, 8]},
            task_seconds={"hamiltonian": 1.24, "gap": 2.9},
        ),
    )
