"""What a surface says about Weyl points: projections, counts on loops around them, arcs."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray


@dataclass(frozen=True, slots=True)
class Projection:
    """Nodes that fall on one momentum of the surface.

    Attributes
    ----------
    k_par
        Fractional in the surface's reciprocal lattice, in [-1/2, 1/2).
    k_ang
        1/angstrom, along a'_1 and along the surface normal (of the Miller indices) x a'_1.
    nodes
        Positions in `NodeSearch.points`.
    chirality
        Sum of theirs.
    energy_min_ev, energy_max_ev
        Of the nodes.
    nearest_ang
        Distance to the nearest other projection, an image of itself included, 1/angstrom.
    """

    k_par: tuple[float, float]
    k_ang: tuple[float, float]
    nodes: tuple[int, ...]
    chirality: int
    energy_min_ev: float
    energy_max_ev: float
    nearest_ang: float

    @property
    def energy_ev(self) -> float:
        """Middle of the nodes' energies."""
        return 0.5 * (self.energy_min_ev + self.energy_max_ev)


@dataclass(frozen=True, slots=True)
class LoopCount:
    """Surface levels on a circle around a projection.

    Attributes
    ----------
    projection
        Position in `ArcSurvey.projections`.
    status
        "ok" or "unresolved".
    reason
        Why it is not "ok"; empty otherwise.
    radius_ang
        Of the circle, 1/angstrom.
    chirality
        What the count says that the circle encloses; None unless "ok".
    smallest_window_ev
        Least distance of the projected bulk bands on the circle.
    ends
        Arcs that end at the projection, of the upper and of the lower half-crystal: levels at the
        node's energy on the circle; None where they were not all found.
    ends_reason
        Why not; empty otherwise.
    """

    projection: int
    status: str
    reason: str
    radius_ang: float
    chirality: int | None
    smallest_window_ev: float
    ends: tuple[int, int] | None
    ends_reason: str


@dataclass(frozen=True, slots=True, eq=False)
class Arc:
    """A surface level at the energy of a node, followed from its projection.

    Attributes
    ----------
    side
        0 for the upper half-crystal, 1 for the lower.
    start, end
        Positions in `ArcSurvey.projections`; end None where it was lost before it reached one.
    energy_ev
        At which it was followed.
    path
        (n, 2) k_par, fractional and not folded, from projection to projection.
    length_ang
        1/angstrom; None where the end was not reached.
    reason
        Why not; empty otherwise.
    """

    side: int
    start: int
    end: int | None
    energy_ev: float
    path: FloatArray
    length_ang: float | None
    reason: str


@dataclass(frozen=True, slots=True, eq=False)
class ArcSurvey:
    """Fermi arcs of one surface.

    Attributes
    ----------
    status
        "agree" (every circle that was counted encloses the sum of chiralities that is projected
        there), "disagree" (one does not) or "unresolved" (none was counted).
    reason
        Why it is not "agree"; empty otherwise.
    miller
        Of the surface, in the Hamiltonian's own cell.
    normal_cart
        Unit vector along them.
    chosen_by
        "options of the run", "case.toml", "weakest bonds" or, where all sums are zero on that
        surface, "separates the chiralities".
    terminations
        Names of the upper and the lower half-crystal.
    projections
        All of them, by |chirality|, largest first.
    loops
        Of those that were counted.
    arcs
        Followed ones.
    arcs_note
        Why none was, or not all; empty otherwise.
    n_solves
        Half-crystals solved for the counts.
    """

    status: str
    reason: str
    miller: tuple[int, int, int]
    normal_cart: tuple[float, float, float]
    chosen_by: str
    terminations: tuple[str, str]
    projections: tuple[Projection, ...]
    loops: tuple[LoopCount, ...]
    arcs: tuple[Arc, ...]
    arcs_note: str
    n_solves: int
