"""How far until the verdict flips: on-site shifts and spin-orbit scale, each turned by itself.

H + x V for one V at a time: the projector on the orbitals of one element and l (a rigid shift of
their on-site energies), or the spin-orbit part of H (its scale): what depends on spin, or what is
left when a run without spin-orbit coupling is taken from H. All orbitals together would only
move the zero of energy, so that of two groups one is moved, and what counts is the distance of the
groups. The numbers are about the Hamiltonian as given: nothing is made self-consistent.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.invariants.tipping.by_gap import GapGround, gap_slope, tip_by_gap
from topovet.invariants.tipping.by_parity import TrimGround, keeps_inversion, tip_by_parity
from topovet.invariants.tipping.results import (
    BY_GAP,
    BY_PARITY,
    BY_SPIN_PART,
    SCALE,
    SHIFT,
    TippingPoint,
    TippingSearch,
)
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel
from topovet.model.orbital_groups import OrbitalGroup
from topovet.model.spin_parts import (
    Frame,
    SpinPurity,
    spin_orbit_at_trim,
    spin_orbit_sum,
)

SHIFT_REACH_EV = 2.0
"""Shifts are turned up to this in either direction."""

SCALE_REACH = 1.0
"""The scale is turned from 1 down to 0 and up to 2."""

NO_COUPLING_EV = 1e-4
"""A spin-dependent part without larger elements is no spin-orbit coupling to scale."""

MIXED_SPINS = 0.25
"""Spin-dependent over spin-independent hopping above which the functions are no products of an
orbital and a spin: 0.001 to 0.08 in the real cases, where it is; about 1 where spins are mixed at
random."""


@dataclass(frozen=True, slots=True)
class Parameter:
    """One thing that can be turned; `group` is None for the spin-orbit scale.

    `coupling` is the V(k) of the scale where it does not come from H alone.
    """

    kind: str
    group: OrbitalGroup | None
    against: str
    coupling: BlochSum | None = None

    @property
    def reach(self) -> float:
        return SHIFT_REACH_EV if self.kind == SHIFT else SCALE_REACH

    @property
    def begin(self) -> float:
        """Value for H as given."""
        return 1.0 if self.kind == SCALE else 0.0

    @property
    def name(self) -> str:
        """Name of the group, "" for the scale."""
        return "" if self.group is None else self.group.name

    def at_trim(self, ground: TrimGround, frame: Frame) -> ComplexArray:
        """V(K), (n_k, n_orb, n_orb) eV per unit."""
        if self.group is None and self.coupling is not None:
            return self.coupling.at(ground.k_trim)
        if self.group is None:
            return spin_orbit_at_trim(ground.h, frame)
        projector = np.diag(self.group.projector(ground.h.shape[1])).astype(complex)
        return np.broadcast_to(projector, ground.h.shape)

    def change(self, bloch: BlochSum, frame: Frame) -> BlochSum:
        """V(k) as a Fourier sum, eV per unit."""
        if self.group is None:
            return spin_orbit_sum(bloch, frame) if self.coupling is None else self.coupling
        return projector_sum(self.group.projector(bloch.n_orb))

    def start(self, direction: str, method: str) -> TippingPoint:
        """The point before anything was looked at."""
        return TippingPoint(
            self.kind, self.name, self.against, direction, method, "open", None, self.begin
        )


def choose_parameters(
    groups: Sequence[OrbitalGroup],
    purity: SpinPurity | None,
    coupling: BlochSum | None = None,
) -> tuple[list[Parameter], list[str]]:
    """What can be turned, and why the rest cannot.

    Parameters
    ----------
    groups
        All groups of orbitals; empty where they are not known.
    purity
        Of the spinor functions; None where spin was not looked at.
    coupling
        H less its spinless companion, where there is one that fits.
    """
    parameters, not_asked = [], []
    if len(groups) == 2:  # one up is the other down
        parameters.append(Parameter(SHIFT, groups[0], groups[1].name))
    elif len(groups) > 2:
        parameters += [Parameter(SHIFT, group, "all others") for group in groups]
    elif len(groups) == 1:
        not_asked.append(
            f"all orbitals are one group ({groups[0].name}): its shift only moves the zero of "
            "energy"
        )
    if any(group.name.endswith("(all l)") for group in groups):
        not_asked.append(
            "orbitals without a declared l, hybrids among them, are moved as a whole per element"
        )
    why_not = _no_scale(purity) if coupling is None else _no_difference(coupling)
    if why_not:
        not_asked.append(why_not)
    else:
        parameters.append(Parameter(SCALE, None, "", coupling))
    return parameters, not_asked


def _no_scale(purity: SpinPurity | None) -> str:
    if purity is None:
        return "spin-orbit coupling was not separated from the rest"
    if purity.largest_ev < NO_COUPLING_EV:
        return "H has no spin-dependent part that could be scaled"
    if purity.hopping_ratio > MIXED_SPINS:
        return (
            "spin-orbit coupling cannot be separated: the Wannier functions mix the spins "
            f"(spin-dependent hopping is {purity.hopping_ratio:.2f} of the rest)"
        )
    return ""


def _no_difference(coupling: BlochSum) -> str:
    even, odd = coupling.rows()
    largest = 0.5 * max(np.abs(even).max(initial=0.0), np.abs(odd).max(initial=0.0))
    if largest < NO_COUPLING_EV:
        return "H and its spinless companion do not differ: there is no coupling to scale"
    return ""


def search_by_parity(
    ground: TrimGround, parameters: Sequence[Parameter], frame: Frame
) -> tuple[list[TippingPoint], list[str], int]:
    """Both directions of every parameter that keeps inversion; points, left out, solves."""
    points, not_asked, n_solves = [], [], 0
    for parameter in parameters:
        v_trim = parameter.at_trim(ground, frame)
        if parameter.group is not None and not keeps_inversion(ground, v_trim):
            not_asked.append(f"{parameter.name}: not closed under inversion")
            continue
        for direction, reach in (("down", -parameter.reach), ("up", parameter.reach)):
            start = parameter.start(direction, BY_PARITY)
            point, spent = tip_by_parity(ground, v_trim, reach, start)
            points.append(point)
            n_solves += spent
    return points, not_asked, n_solves


def search_by_gap(
    ground: GapGround,
    parameters: Sequence[Parameter],
    frame: Frame,
    *,
    most_groups: int | None,
    max_solves: int,
) -> tuple[list[TippingPoint], list[str], int]:
    """Follow the gap; the directions that make it smaller come first, or alone.

    Parameters
    ----------
    ground
        The Hamiltonian.
    parameters, frame
        As above.
    most_groups
        So many groups, those whose shift changes the smallest gap most, in the direction that
        makes it smaller, and the scale likewise; None for all, both ways.
    max_solves
        Diagonalisations for each parameter and direction.
    """
    turns = list(_turns(ground, parameters, frame))
    not_asked: list[str] = []
    if most_groups is not None:
        turns, not_asked = _most_telling(turns, most_groups)
    points, n_solves = [], 0
    for turn in turns:
        for direction, sign in turn.ways(both=most_groups is None):
            start = turn.parameter.start(direction, BY_GAP)
            reach = sign * turn.parameter.reach
            point, spent = tip_by_gap(ground, turn.change, reach, start, max_solves=max_solves)
            points.append(point)
            n_solves += spent
    return points, not_asked, n_solves


@dataclass(frozen=True, slots=True)
class _Turn:
    """A parameter, its V(k), and the first-order change of the gap per unit of it."""

    parameter: Parameter
    change: BlochSum
    slope: float

    def ways(self, *, both: bool) -> list[tuple[str, float]]:
        ways = [("down", -1.0), ("up", 1.0)]
        closing = ways[1] if self.slope < 0 else ways[0]
        return ways if both else [closing]


def _turns(ground: GapGround, parameters: Sequence[Parameter], frame: Frame) -> Iterator[_Turn]:
    for parameter in parameters:
        change = parameter.change(ground.bloch, frame)
        yield _Turn(parameter, change, gap_slope(ground, change))


def _most_telling(turns: list[_Turn], most: int) -> tuple[list[_Turn], list[str]]:
    groups = sorted(
        (t for t in turns if t.parameter.group is not None), key=lambda t: -abs(t.slope)
    )
    left_out = [t.parameter.name for t in groups[most:]]
    said = ["directions in which the smallest gap widens at first were not followed"]
    if left_out:
        said.append(f"{', '.join(left_out)}: shifts change the smallest gap less than those asked")
    return [*groups[:most], *(t for t in turns if t.parameter.group is None)], said


def projector_sum(diagonal: FloatArray) -> BlochSum:
    """A diagonal matrix at R = 0 as a Fourier sum."""
    home = np.zeros((1, 3), dtype=np.int64)
    return build_bloch_sum(
        TightBindingModel(home, np.diag(diagonal)[None].astype(complex), spinful=False)
    )


def conclude_search(
    points: Sequence[TippingPoint],
    not_asked: Sequence[str],
    purity: SpinPurity | None,
    n_solves: int,
    scale_from: str = BY_SPIN_PART,
) -> TippingSearch:
    """All that was found, with what it rests on."""
    return TippingSearch(
        points=tuple(points),
        not_asked=tuple(not_asked),
        spin_orbit_ev=None if purity is None else purity.onsite_ev,
        spin_hopping_ratio=None if purity is None else purity.hopping_ratio,
        n_solves=n_solves,
        scale_from=scale_from,
    )
