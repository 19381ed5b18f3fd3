"""Made-up surfaces for the tests of reports and verdicts: a cone as one would draw it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from topovet.boundary.cone_results import (
    Cone,
    Contour,
    EnergyMap,
    KramersPair,
    SurfaceStates,
    Warping,
)
from topovet.boundary.results import (
    Crossing,
    SurfaceLine,
    SurfaceMap,
    SurfaceWitness,
    ThicknessSeries,
)


def crossing(net: int | None, *, termination: str = "upper", fraction: float = 0.41) -> Crossing:
    status, reason = ("ok", "") if net is not None else ("unresolved", "made up")
    ends = ((0.0, 0.0), (0.5, 0.0))
    return Crossing(*ends, termination, fraction, status, reason, net, 33, 0.31, 0.08, (5.31, 5.52))


def line(parity: int | None, *, reason: str = "") -> SurfaceLine:
    counts = tuple(
        crossing(parity, termination=side, fraction=fraction)
        for side in ("upper", "lower")
        for fraction in (0.41, 0.59)
    )
    status = "ok" if parity is not None else "not-applicable"
    ends = ((0.0, 0.0), (0.5, 0.0))
    return SurfaceLine(
        *ends,
        status,
        reason,
        parity,
        parity,
        0.337,
        (0.016, 0.0),
        counts if parity is not None else (),
    )


def witness(z2: tuple[int | None, ...] | None, **changes: object) -> SurfaceWitness:
    """A surface that says z2, None for one that does not apply."""
    ok = z2 is not None
    reason = "" if ok else "no energy curve separates the projected bulk bands"
    made = SurfaceWitness(
        status="ok" if ok else "not-applicable",
        reason=reason,
        z2=z2,
        chern=None,
        miller=(0, 0, 1),
        normal_cart=(0.0, 0.0, 1.0),
        spacing_ang=11.3,
        chosen_by="weakest bonds",
        terminations=("upper half, Te outermost", "lower half, Te outermost"),
        cut_width_ang=2.61,
        matrix=((1, 0, 0), (0, 1, 0), (0, 0, 1)),
        lines=(line(1), line(0)) if ok else (line(None, reason=reason),),
        dropped_mev=1.2,
        layer_size=12,
        n_solves=132,
        n_bulk_solves=1584,
    )
    return replace(made, **changes)  # type: ignore[arg-type]


def cone(termination: str = "upper half, Te outermost", *, spinful: bool = True) -> SurfaceMap:
    """A Dirac cone of 3 eV angstrom in a gap of 0.4 eV, with its spin, along -k to k."""
    distance = np.linspace(0.0, 0.4, 41)
    k, energies = distance - 0.2, np.linspace(4.9, 5.9, 61)
    eta = 0.016
    branches = [
        eta / np.pi / ((energies - 5.4 - s * 3.0 * k[:, None]) ** 2 + eta**2) for s in (1, -1)
    ]
    spin = np.zeros((41, 61, 3))
    spin[:, :, 0] = branches[0] - branches[1]
    edge = 0.2 + np.abs(k)
    return SurfaceMap(
        miller=(0, 0, 1),
        termination=termination,
        k_par=np.stack([k, 0 * k], axis=1),
        distance=distance,
        label_index=(0, 20, 40),
        labels=("M", "G", "K"),
        energies_ev=energies,
        density=branches[0] + branches[1],
        spin=spin if spinful else None,
        broadening_ev=eta,
        top_ev=5.4 - edge,
        bottom_ev=5.4 + edge,
    )


def states(termination: str = "upper half, Te outermost") -> SurfaceStates:
    """A straight cone of 3 eV angstrom at 5.2 eV, the same on both faces, with films."""
    pairs = tuple(KramersPair(side, (0.0, 0.0), 5.2, 0.0, 5.0, 5.6) for side in (0, 1))
    k, slope = np.linspace(0.01, 0.1, 10), 3.0
    spin = np.tile([0.0, -0.6, 0.0], (12, 1))
    contours = tuple(
        Contour(
            energy_ev=5.2 + e,
            k_ang=np.full(12, abs(e) / slope),
            velocity_ev_ang=np.full(12, np.sign(e) * slope),
            area_ang2=float(np.pi * (e / slope) ** 2),
            mass_m_e=7.62 * e / slope**2,
            spin=np.sign(e) * spin,
        )
        for e in (-0.1, -0.03, 0.03, 0.1, 0.2)
    )
    cone = Cone(
        pair=pairs[0],
        azimuth_rad=np.pi * np.arange(6) / 6,
        k_ang=k,
        upper_ev=np.tile(5.2 + slope * k, (6, 1)),
        lower_ev=np.tile(5.2 - slope * k, (6, 1)),
        velocity_ev_ang=np.full(6, slope),
        curvature_ev_ang2=np.zeros(6),
        velocity_spread_ev_ang=0.02,
        warping=Warping(None, None, None, None, None, "", None, "made up"),
        decay_ang=12.0,
        contours=contours,
    )
    films = ThicknessSeries((11.3, 22.6, 33.9, 45.2), (0.4, 0.05, 6e-3, 8e-4), (0.0, 0.0))
    names = (termination, "lower half, Te outermost")
    return SurfaceStates(names, pairs, (), (cone,), films, "up to 4 planes", (), _energy_map(cone))


def _energy_map(cone: Cone) -> EnergyMap:
    """The density of the straight cone at its Dirac point and 0.2 eV above, with its spin."""
    azimuth, k = np.pi * np.arange(24) / 12, np.linspace(0.0, 0.09, 19)
    energies, eta = (5.2, 5.4), 0.02
    branches = [
        eta / np.pi / ((np.array(energies)[:, None] - 5.2 - s * 3.0 * k) ** 2 + eta**2)
        for s in (1, -1)
    ]
    density = np.repeat((branches[0] + branches[1])[:, None], 24, axis=1)
    spin = np.zeros((2, 24, 19, 3))
    spin[..., 1] = -0.6 * (branches[0] - branches[1])[:, None]
    return EnergyMap(cone.pair.side, energies, azimuth, k, density, spin, eta)
