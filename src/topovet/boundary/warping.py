"""Hexagonal warping of a cone on a threefold surface.

To third order in k a Kramers pair at the centre of a surface with a threefold axis and mirrors
(C3v) disperses as

    E_+-(k, theta) = E_0(k) +- sqrt(v^2 k^2 + lambda^2 k^6 cos^2 3 theta)

(Fu 2009): between the mirror planes, where cos^2 is 1, the bands lie farther apart than in them,
where it is 0. E_0 does not depend on the direction, so that the distance D of either band from one
kind of direction to the other needs no knowledge of E_0, and one band is enough:

    D(k) = sqrt(v^2 k^2 + lambda^2 k^6) - v k.

lambda is fitted to D at all radii; what D would be from it is held against what D is.

References
----------
Fu, PRL 103, 266801 (2009), doi:10.1103/PhysRevLett.103.266801
"""

from __future__ import annotations

import numpy as np
from scipy.optimize import minimize_scalar

from topovet.arrays import BoolArray, FloatArray
from topovet.boundary.cone import Branches
from topovet.boundary.cone_results import KramersPair, Warping
from topovet.boundary.recut import Recut

DIRECTIONS = 6
"""Azimuths over half a turn, from b'_1 on: every second one is of one kind."""

LEAST_RADII = 3
"""Radii at which a band must be known along all azimuths."""

LEAST_SIGNAL_EV = 2e-3
"""Least D at the largest radius: levels are found to 0.3 meV."""

LARGEST_MISFIT, NEGLIGIBLE_MISFIT_EV = 0.1, 5e-4
"""The fit may miss D by this share of the largest D, or by this much."""

LARGEST_UNEVENNESS = 0.5
"""Directions that the threefold axis relates may differ by this share of the largest D."""

ALIGNED = 1e-3
"""Of unit vectors that should be parallel or normal to each other: rounding of the structure."""


def mirrors_of_surface(cut: Recut, rotations_cart: FloatArray | None) -> tuple[str, str]:
    """How the mirrors of a C3v surface lie: "along" b'_1 or "across" it; else "" and why not.

    Parameters
    ----------
    cut
        The surface.
    rotations_cart
        (n, 3, 3) point group of the structure; None where it is not known.
    """
    if rotations_cart is None:
        return "", "the symmetry of the surface is not known without a structure"
    keep = np.abs(rotations_cart @ cut.normal_cart - cut.normal_cart).max(axis=1) < ALIGNED
    kept = rotations_cart[keep]
    proper = np.linalg.det(kept) > 0
    turns = sorted(np.round(np.trace(kept[proper], axis1=1, axis2=2)).astype(int).tolist())
    if turns != [0, 0, 3]:  # traces of the identity and of two turns by 120 degrees
        return "", "the structure has no threefold axis (alone) normal to this surface"
    mirrors = kept[~proper]
    if len(mirrors) != 3:
        return "", "the structure has no mirror normal to this surface"
    first = np.linalg.inv(cut.cell).T[0]
    first = first - (first @ cut.normal_cart) * cut.normal_cart
    kept_first = np.abs(mirrors @ first - first).max(axis=1) < ALIGNED * np.linalg.norm(first)
    return ("along" if kept_first.any() else "across"), ""


def fit_warping(branches: Branches, pair: KramersPair, mirrors: str, why_not: str) -> Warping:
    """lambda, or why the form does not describe the bands.

    Parameters
    ----------
    branches, pair
        The two bands and where they meet.
    mirrors, why_not
        From `mirrors_of_surface`.
    """
    if not mirrors:
        return _refused(why_not)
    if any(pair.k_par):
        return _refused("the Dirac point is not at the centre of the surface zone")
    if len(branches.azimuth_rad) != DIRECTIONS:
        return _refused("the bands were not followed along six directions")
    sign = 1.0 if mirrors == "along" else -1.0
    apart = np.stack(
        [sign * _apart(branches.upper_ev), -sign * _apart(branches.lower_ev)]
    )  # (2, n_k) D of either band
    known = np.isfinite(apart)
    band, chosen = _longest(known)
    if chosen.sum() < LEAST_RADII:
        return _refused(
            f"neither band is known along all directions at {LEAST_RADII} radii before bulk "
            "states come"
        )
    bands = [0, 1] if band == "both" else [("upper", "lower").index(band)]
    d = apart[bands][:, chosen].mean(axis=0)
    both = [branches.upper_ev, branches.lower_ev]
    uneven = max(_unevenness(both[i][:, chosen]) for i in bands)
    k = branches.k_ang[chosen]
    return _fitted(k, d, _slope(branches), uneven, band)


def _apart(energies: FloatArray) -> FloatArray:
    """(n_k,) mean between b'_1 and its images less mean along them; NaN where one is missing."""
    return np.asarray(energies[1::2].mean(axis=0) - energies[0::2].mean(axis=0))


def _unevenness(energies: FloatArray) -> float:
    """Largest difference between directions that the threefold axis relates, eV."""
    return float(max(np.ptp(energies[i::2], axis=0).max() for i in (0, 1)))


def _longest(known: BoolArray) -> tuple[str, BoolArray]:
    """Both bands where they are known at enough radii, else the one known at more."""
    common = np.asarray(known.all(axis=0), dtype=bool)
    if common.sum() >= LEAST_RADII:
        return "both", common
    more = int(known.sum(axis=1).argmax())
    return ("upper", "lower")[more], np.asarray(known[more])


def _slope(branches: Branches) -> float:
    """v in eV angstrom: half the distance of the bands over k, at the first radius they have."""
    half = 0.5 * (branches.upper_ev - branches.lower_ev).mean(axis=0)
    known = np.flatnonzero(np.isfinite(half))
    if not len(known):
        return float("nan")
    return float(half[known[0]] / branches.k_ang[known[0]])


def _fitted(k: FloatArray, d: FloatArray, slope: float, uneven: float, band: str) -> Warping:
    largest = float(np.abs(d).max())
    if not np.isfinite(slope):
        return _refused("the slope at the Dirac point is not known")
    if largest < LEAST_SIGNAL_EV:
        return _refused(
            f"the bands are round to {1e3 * LEAST_SIGNAL_EV:g} meV up to k = {k[-1]:.3f} 1/angstrom"
        )
    if uneven > LARGEST_UNEVENNESS * largest:
        return _refused(
            f"directions that the threefold axis relates differ by {1e3 * uneven:.2g} meV, "
            f"the two kinds of direction by {1e3 * largest:.2g} meV: the axis is broken too much"
        )
    if d[-1] < 0:
        return _refused("the bands lie farther apart in the mirror planes than between them")
    each = np.sqrt(np.maximum(d**2 + 2 * slope * k * d, 0.0)) / k**3

    def predicted(lam: float) -> FloatArray:
        return np.asarray(np.hypot(slope * k, lam * k**3) - slope * k)

    # the slope of D in lambda is bounded: the sum of squares has one minimum below the largest
    best = float(
        minimize_scalar(
            lambda lam: float(((predicted(lam) - d) ** 2).sum()),
            bounds=(0.0, 1.5 * float(each.max())),
            method="bounded",
            options={"xatol": 1e-6 * float(each.max())},
        ).x
    )
    misfit = float(np.abs(predicted(best) - d).max())
    if misfit > max(LARGEST_MISFIT * largest, NEGLIGIBLE_MISFIT_EV):
        return _refused(
            f"the form misses the bands by {1e3 * misfit:.2g} of {1e3 * largest:.2g} meV"
        )
    seen = each[d > LEAST_SIGNAL_EV]
    return Warping(
        lambda_ev_ang3=best,
        least_ev_ang3=float(seen.min()),
        most_ev_ang3=float(seen.max()),
        misfit_ev=misfit,
        uneven_ev=uneven,
        band=band,
        reach_ang=float(k[-1]),
        reason="",
    )


def _refused(reason: str) -> Warping:
    return Warping(None, None, None, None, None, "", None, reason)
