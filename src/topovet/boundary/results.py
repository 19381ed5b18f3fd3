"""What the boundary says."""

from __future__ import annotations

from dataclasses import dataclass, field

from topovet.arrays import FloatArray


@dataclass(frozen=True, slots=True)
class Crossing:
    """Surface levels of one termination that cross an energy curve along one line of k_par.

    Attributes
    ----------
    start, end
        Ends of the line, fractional in the surface's own reciprocal lattice (b'_1, b'_2); one
        number each in two dimensions.
    termination
        "upper" or "lower", see `topovet.boundary.cleavage.Termination`.
    fraction
        Where the curve runs: 0 at the upper edge of the filled bulk bands projected on k_par, 1 at
        the lower edge of the empty ones.
    status
        "ok" or "unresolved".
    reason
        Why it is not "ok"; empty otherwise.
    net
        Levels that rise through the curve from start to end less those that sink; None unless
        "ok". Its parity is that of the number of crossings.
    points
        k_par at which half-crystals were solved.
    largest_move
        Largest angle, radians, that the phases moved by between neighbouring points.
    margin_ev
        Least |E - eps| of the surface levels from the curve at the two ends, eV.
    energies_ev
        The curve at the two ends.
    """

    start: tuple[float, ...]
    end: tuple[float, ...]
    termination: str
    fraction: float
    status: str
    reason: str
    net: int | None
    points: int
    largest_move: float
    margin_ev: float
    energies_ev: tuple[float, float]


@dataclass(frozen=True, slots=True)
class SurfaceLine:
    """A line of k_par with all that was counted on it.

    Attributes
    ----------
    start, end
        As in `Crossing`.
    status
        "ok", "unresolved", "not-applicable" (no energy curve exists) or "failed" (counts differ).
    reason
        Why it is not "ok"; empty otherwise.
    parity
        Of the number of crossings; None unless "ok".
    net
        Net crossings of the upper half, where all curves give the same, as they must on a closed
        line; None otherwise.
    smallest_window_ev, narrowest
        Least distance of the projected bulk bands met on the line, and its k_par.
    crossings
        One for each termination and curve.
    """

    start: tuple[float, ...]
    end: tuple[float, ...]
    status: str
    reason: str
    parity: int | None
    net: int | None
    smallest_window_ev: float
    narrowest: tuple[float, ...]
    crossings: tuple[Crossing, ...]


@dataclass(frozen=True, slots=True)
class SurfaceWitness:
    """Indices from surface or edge levels, by counting and without symmetry but time reversal.

    Attributes
    ----------
    status
        "ok", "not-applicable" (no energy curve between the projected bulk bands on this surface, or
        no time reversal of spinors), "unresolved" (a criterion was not met within the budget) or
        "failed" (terminations, curves or lines contradict each other).
    reason
        Why it is not "ok"; empty otherwise.
    z2
        (nu0, nu1, nu2, nu3), (nu,) in 2D, None at an index that this surface does not settle; None
        as a whole unless "ok".
    chern
        Without time reversal or spin in 2D: the Chern number, in the orientation of
        `topovet.invariants.chern`; None otherwise.
    miller
        Of the surface, in the Hamiltonian's own cell.
    normal_cart
        Unit vector along them.
    spacing_ang
        Of the lattice planes.
    chosen_by
        "options of the run", "case.toml", "weakest bonds" or, where that plane settles nothing,
        "next weakest bonds"; "along a1" for an edge.
    terminations
        Names of the upper and the lower half-crystal.
    cut_width_ang
        Distance of the atomic planes on the two sides of the cut; None where no sites are declared
        and home cells are cut apart as they are.
    matrix
        Rows: the re-cut lattice vectors in units of the old ones; k'_i = k.a'_i.
    lines
        The lines of k_par that were followed.
    dropped_mev
        Bound on what was left out of H for being far apart.
    layer_size
        Orbitals in a principal layer.
    n_solves
        Half-crystals solved, both terminations at once.
    n_bulk_solves
        Eigenvalue problems of the bulk solved for the projected edges.
    instead_of, instead_reason
        The likeliest cleavage plane, and why it settles nothing, where the next one stands in.
    """

    status: str
    reason: str
    z2: tuple[int | None, ...] | None
    chern: int | None
    miller: tuple[int, int, int]
    normal_cart: tuple[float, float, float]
    spacing_ang: float
    chosen_by: str
    terminations: tuple[str, str]
    cut_width_ang: float | None
    matrix: tuple[tuple[int, int, int], ...]
    lines: tuple[SurfaceLine, ...]
    dropped_mev: float
    layer_size: int
    n_solves: int
    n_bulk_solves: int
    instead_of: tuple[int, int, int] | None = None
    instead_reason: str = ""

    @property
    def z2_strong(self) -> int | None:
        return None if self.z2 is None else self.z2[0]


@dataclass(frozen=True, slots=True, eq=False)
class SurfaceMap:
    """Surface spectral density along a path of the surface zone.

    Attributes
    ----------
    miller
        Of the surface, in the Hamiltonian's own cell.
    termination
        Name of the half-crystal.
    k_par
        (n_k, 2) fractional in the surface's reciprocal lattice.
    distance
        (n_k,) arc length, 1/angstrom, 2 pi included.
    label_index, labels
        Where the named points are.
    energies_ev
        (n_e,) as in the Hamiltonian.
    density
        (n_k, n_e) states per eV on the outermost lattice plane, spin counted, >= 0.
    spin
        (n_k, n_e, 3) expectation of sigma times that density, per eV; components in the frame
        (in-plane perpendicular, in-plane along the path, outward normal); None without spin.
    broadening_ev
        Imaginary part of the energy.
    top_ev, bottom_ev
        (n_k,) edges of the projected bulk bands.
    """

    miller: tuple[int, int, int]
    termination: str
    k_par: FloatArray
    distance: FloatArray
    label_index: tuple[int, ...]
    labels: tuple[str, ...]
    energies_ev: FloatArray
    density: FloatArray
    spin: FloatArray | None
    broadening_ev: float
    top_ev: FloatArray
    bottom_ev: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class SlabBands:
    """Bands of a slab with the weight of every state near its two faces.

    Attributes
    ----------
    k_par
        (n_k, 2) fractional.
    energies_ev
        (n_k, n_planes n_orb).
    lower_face, upper_face
        (n_k, n_states) weight on the outermost planes: of those that end the slab towards -n and
        towards +n.
    spin_lower, spin_upper
        (n_k, n_states, 3) expectation of sigma, Cartesian, on those planes; None without spin.
    n_planes
        Lattice planes in the slab.
    thickness_ang
        n_planes times their spacing.
    face_planes
        Planes counted as face.
    """

    k_par: FloatArray
    energies_ev: FloatArray
    lower_face: FloatArray
    upper_face: FloatArray
    spin_lower: FloatArray | None
    spin_upper: FloatArray | None
    n_planes: int
    thickness_ang: float
    face_planes: int


@dataclass(frozen=True, slots=True)
class ThicknessSeries:
    """Smallest gap of films of growing thickness at one k_par; (n,) each.

    Attributes
    ----------
    thickness_ang
        Thickness of each film.
    gap_ev
        E[N] - E[N-1] with N the filling of the film: for a topological film at the surface TRIM of
        its cone the hybridisation gap of the two faces.
    """

    thickness_ang: tuple[float, ...]
    gap_ev: tuple[float, ...]
    k_par: tuple[float, ...] = field(default=())
