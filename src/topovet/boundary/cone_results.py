"""Results on surface and edge states in detail: pairs, cones, contours, edge crossings, films."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray
from topovet.boundary.results import ThicknessSeries


@dataclass(frozen=True, slots=True)
class KramersPair:
    """A pair of surface levels at a time-reversal-invariant momentum of the surface.

    Attributes
    ----------
    side
        0 for the upper half-crystal, 1 for the lower.
    k_par
        Fractional in the surface's reciprocal lattice; one number for an edge.
    energy_ev
        Of the pair.
    split_ev
        Distance of its two levels, eV: 0 with exact time reversal.
    window_low_ev, window_high_ev
        Edges of the bulk bands projected on that momentum.
    """

    side: int
    k_par: tuple[float, ...]
    energy_ev: float
    split_ev: float
    window_low_ev: float
    window_high_ev: float


@dataclass(frozen=True, slots=True, eq=False)
class Contour:
    """Where a surface band is at one energy, around the momentum of its cone.

    Attributes
    ----------
    energy_ev
        As in the Hamiltonian.
    k_ang
        (2 n_theta,) distance from the cone's momentum, 1/angstrom, at evenly spread azimuths.
    velocity_ev_ang
        (2 n_theta,) dE/dk outwards, eV angstrom.
    area_ang2
        Enclosed area, 1/angstrom^2.
    mass_m_e
        Cyclotron mass hbar^2 / (2 pi) dA/dE, in electron masses, with its sign.
    spin
        (2 n_theta, 3) expectation of sigma in the state, on the outermost plane: along the outward
        direction of k, along the turn of the azimuth (counter-clockwise seen from outside) and
        along the outward normal of the surface; None without spin.
    """

    energy_ev: float
    k_ang: FloatArray
    velocity_ev_ang: FloatArray
    area_ang2: float
    mass_m_e: float
    spin: FloatArray | None


@dataclass(frozen=True, slots=True)
class Warping:
    """lambda of E_0(k) +- sqrt(v^2 k^2 + lambda^2 k^6 cos^2 3 theta), or why there is none.

    Attributes
    ----------
    lambda_ev_ang3
        eV angstrom^3; None where the form does not describe the bands.
    least_ev_ang3, most_ev_ang3
        What single radii say.
    misfit_ev
        By how much the fit misses the difference between the two kinds of direction, at most.
    uneven_ev
        By how much directions differ that the threefold axis relates.
    band
        "upper", "lower" or "both": what was fitted.
    reach_ang
        Largest radius, 1/angstrom.
    reason
        Why there is none; empty otherwise.
    """

    lambda_ev_ang3: float | None
    least_ev_ang3: float | None
    most_ev_ang3: float | None
    misfit_ev: float | None
    uneven_ev: float | None
    band: str
    reach_ang: float | None
    reason: str


@dataclass(frozen=True, slots=True, eq=False)
class Cone:
    """The two bands that meet in a Kramers pair, followed outwards.

    Attributes
    ----------
    pair
        Where they meet.
    azimuth_rad
        (n_theta,) directions over half a turn from b'_1 on, counter-clockwise seen from outside the
        surface; time reversal gives the other half.
    k_ang
        (n_k,) distances from the pair, 1/angstrom.
    upper_ev, lower_ev
        (n_theta, n_k) the two bands, NaN where they are among bulk states.
    velocity_ev_ang
        (n_theta,) slope at the pair, eV angstrom.
    curvature_ev_ang2
        (n_theta,) b of the mean of the two bands, E_D + b k^2: hbar^2 / (2 m*).
    velocity_spread_ev_ang
        How far the slope moves when the fit takes one point less.
    warping
        Of the bands by direction.
    decay_ang
        Largest length over which the amplitude of a state at the pair can decay, angstrom.
    contours
        At a few energies.
    """

    pair: KramersPair
    azimuth_rad: FloatArray
    k_ang: FloatArray
    upper_ev: FloatArray
    lower_ev: FloatArray
    velocity_ev_ang: FloatArray
    curvature_ev_ang2: FloatArray
    velocity_spread_ev_ang: float
    warping: Warping
    decay_ang: float
    contours: tuple[Contour, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class EnergyMap:
    """Surface spectral density at fixed energies around a Dirac point, in polar coordinates.

    Attributes
    ----------
    side
        0 for the upper half-crystal, 1 for the lower.
    energies_ev
        (n_e,) the Dirac point's first.
    azimuth_rad
        (n_theta,) over the whole turn, as in `Cone`.
    k_ang
        (n_k,) from the Dirac point, 1/angstrom, 0 first.
    density
        (n_e, n_theta, n_k) states per eV on the outermost lattice plane.
    spin
        (n_e, n_theta, n_k, 3) expectation of sigma times that density, in the frame of
        `Contour.spin`; None without spin.
    broadening_ev
        Imaginary part of the energy.
    """

    side: int
    energies_ev: tuple[float, ...]
    azimuth_rad: FloatArray
    k_ang: FloatArray
    density: FloatArray
    spin: FloatArray | None
    broadening_ev: float


@dataclass(frozen=True, slots=True)
class EdgeCrossing:
    """An edge level at the energy that was asked for.

    Attributes
    ----------
    side
        0 for the upper half-plane, 1 for the lower.
    k_edge
        Fractional along the edge.
    energy_ev
        The energy.
    velocity_ev_ang
        dE/dk there along +a'_1, eV angstrom.
    decay_ang
        Largest length over which the amplitude can decay, angstrom.
    """

    side: int
    k_edge: float
    energy_ev: float
    velocity_ev_ang: float
    decay_ang: float


@dataclass(frozen=True, slots=True, eq=False)
class SurfaceStates:
    """What the surface or edge carries, as far as it was followed.

    Attributes
    ----------
    terminations
        Names of the upper and the lower half-crystal.
    pairs
        Kramers pairs in the window at the surface's time-reversal-invariant momenta.
    buried
        Momenta where a level must pass, but the window holds none: it is among bulk states.
    cones
        At most one for each half-crystal: the pair that lies farthest from bulk states.
    films
        Gaps of films at the momentum of the first cone; None where films were too large to solve.
    film_note
        Why there are none, or where the series ends.
    crossings
        In two dimensions: levels at an energy in the gap, with time reversal those between 0 and
        1/2 of the edge zone. Empty where they do not add up to the index.
    energy_map
        Density at constant energies around the first cone; None where none was followed.
    """

    terminations: tuple[str, str]
    pairs: tuple[KramersPair, ...]
    buried: tuple[tuple[float, ...], ...]
    cones: tuple[Cone, ...]
    films: ThicknessSeries | None
    film_note: str
    crossings: tuple[EdgeCrossing, ...] = ()
    energy_map: EnergyMap | None = None
