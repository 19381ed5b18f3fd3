"""Mirror Chern numbers: the occupied states of a mirror plane split by their mirror eigenvalue.

On a plane of k that a mirror maps to itself point by point D(k) H(k) D(k)† = H(k) with D^2 = -1 for
spinors, and the occupied states are of two kinds, eigenvalue +i or -i; n_M = (C+ - C-)/2
(Teo, Fu, Kane, Phys. Rev. B 78, 045426 (2008), doi:10.1103/PhysRevB.78.045426; Hsieh et al., Nat.
Commun. 3, 982 (2012), doi:10.1038/ncomms1969).
"""

from __future__ import annotations

import itertools
from collections.abc import Callable

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray, largest_spectral_norm
from topovet.errors import NotInvariantError
from topovet.invariants.chern import compute_chern_plane
from topovet.invariants.results import ChernPlane, MirrorChern
from topovet.invariants.wilson_sheet import SheetCriteria
from topovet.model.fourier import BlochSum
from topovet.model.plane import KPlane
from topovet.units import MEV_PER_EV

MirrorAt = Callable[[FloatArray], ComplexArray]
"""From k_frac (n, 3) to the mirror's matrices D(k), (n, n_orb, n_orb)."""

MIN_PURITY = 0.8
"""Least |eigenvalue| of the mirror in the occupied space that is read as +i or -i."""

CLOSING_PURITY = 0.9
"""Least |eigenvalue| with which a change of the numbers of states says that the gap closes."""

SQUARE_TOLERANCE = 1e-6
"""Largest element of D^2 + 1 with which D is a mirror of spinors."""

REACH = 3
"""Reciprocal vectors with components up to this are searched for those that span a plane."""

N_SAMPLE = 12
"""Generic points of the plane on which the mirror is tested."""


def mirror_planes(rotation: IntArray) -> tuple[KPlane, ...]:
    """Planes of k that a mirror leaves where they are, up to reciprocal lattice vectors.

    Parameters
    ----------
    rotation
        W (3, 3) integer of a reflection, x' = W x in the Hamiltonian's cell; k turns as k W.

    Returns
    -------
    tuple of KPlane
        One plane or two, through the origin first; named by the Miller indices of the mirror.

    Raises
    ------
    ValueError
        W is no reflection.
    """
    w = np.asarray(rotation)
    if not np.array_equal(w @ w, np.eye(3)) or np.trace(w) != 1:
        raise ValueError("not a reflection")
    integers = np.array(sorted(itertools.product(range(-REACH, REACH + 1), repeat=3), key=_length))
    (normal,) = _primitive(integers, integers @ w == -integers, 1)
    along, across = _primitive(integers, integers @ w == integers, 2)
    name = f"({' '.join(map(str, normal))})"
    planes = [KPlane(f"{name} at 0", (0.0, 0.0, 0.0), across, along)]
    # normal/2 lies on the same plane if some G = (normal + in-plane vector)/2 leads from it to 0
    in_plane = 2 * integers - normal
    if not (in_plane @ w == in_plane).all(axis=1).any():
        x, y, z = (c / 2 for c in normal)
        planes.append(KPlane(f"{name} at 1/2", (x, y, z), across, along))
    return tuple(planes)


def compute_mirror_chern(
    bloch: BlochSum,
    plane: KPlane,
    mirror_at: MirrorAt,
    filling: int,
    criteria: SheetCriteria | None = None,
) -> MirrorChern:
    """Mirror Chern number of the occupied bands on a mirror-invariant plane.

    Parameters
    ----------
    bloch
        Spinful Hamiltonian.
    plane
        A plane each of whose k the mirror leaves where it is, up to a reciprocal lattice vector.
    mirror_at
        D(k) in the periodic gauge, D(k) H(k) D(k)† = H(k), with D^2 = -1 on the plane.
    filling
        Occupied bands.
    criteria
        Convergence criteria and the budget of each of the two Chern numbers.

    Returns
    -------
    MirrorChern
        status "not-applicable" where D^2 is not -1 (spinless, or a glide), "failed" where the
        occupied states have no definite mirror eigenvalues or their numbers change over the plane.
    """
    steps = np.sqrt(np.array([2.0, 3.0]))
    k_frac = plane.k_at(np.asarray(np.arange(1, N_SAMPLE + 1)[:, None] * steps % 1.0))
    d, h = mirror_at(k_frac), bloch.at(k_frac)
    evidence = _Evidence(plane.name, MEV_PER_EV * largest_spectral_norm(d @ h - h @ d))
    if np.abs(d @ d + np.eye(bloch.n_orb)).max() > SQUARE_TOLERANCE:
        return evidence.result("not-applicable", "the operator does not square to -1 on the plane")
    split = _Split(mirror_at, np.linalg.eigh(h[:1])[1][:, :, :filling], k_frac[:1])
    found: list[ChernPlane | None] = []
    try:
        for sign, n in ((1, split.n_plus), (-1, split.n_minus)):
            found.append(
                compute_chern_plane(bloch, plane, filling, criteria, subspace=split.select(sign))
                if n
                else None
            )
    except NotInvariantError as error:
        return evidence.result("failed", str(error), split=split)
    return evidence.result(*_status(found), found=found, split=split)


def _length(vector: tuple[int, ...]) -> tuple[int, tuple[int, ...]]:
    """Short vectors first, and of two opposite ones that which leads with a positive entry."""
    return sum(c * c for c in vector), tuple(-c for c in vector)


def _primitive(integers: IntArray, keeps: BoolArray, n: int) -> list[tuple[int, int, int]]:
    """The n shortest independent vectors (rows where keeps is set) that span their lattice."""
    rows = integers[keeps.all(axis=1)]
    rows = rows[rows.any(axis=1)]
    first = rows[0]
    chosen = [first]
    if n == 2:
        cross = np.gcd.reduce(np.cross(first, rows), axis=1)
        chosen.append(rows[np.flatnonzero(cross == 1)[0]])
    return [(int(v[0]), int(v[1]), int(v[2])) for v in chosen]


class _Split:
    """Hands out the occupied states of one mirror eigenvalue; watches that their number stays.

    Parameters
    ----------
    mirror_at
        D(k).
    states, k_frac
        Occupied states (1, n_orb, n_occ) at one k (1, 3), where the numbers are fixed.
    """

    def __init__(self, mirror_at: MirrorAt, states: ComplexArray, k_frac: FloatArray) -> None:
        self._mirror_at = mirror_at
        self.purity = 1.0
        eigenvalues = np.linalg.eigvalsh(self._restricted(k_frac, states))[0]
        self._purity_at_first = float(np.abs(eigenvalues).min())
        self.closes_near: tuple[float, float, float] | None = None
        self.n_minus = int((eigenvalues < 0).sum())
        self.n_plus = len(eigenvalues) - self.n_minus

    def select(self, sign: int) -> Callable[[FloatArray, ComplexArray], ComplexArray]:
        """A subspace function for the states with eigenvalue sign times i."""
        columns = slice(self.n_minus, None) if sign > 0 else slice(0, self.n_minus)

        def subspace(k_frac: FloatArray, states: ComplexArray) -> ComplexArray:
            eigenvalues, vectors = np.linalg.eigh(self._restricted(k_frac, states))
            self._check(k_frac, eigenvalues)
            return np.asarray(states @ vectors[:, :, columns])

        return subspace

    def _restricted(self, k_frac: FloatArray, states: ComplexArray) -> ComplexArray:
        """-i D in the occupied space: Hermitian, eigenvalues +-1."""
        return np.asarray(-1j * states.conj().swapaxes(1, 2) @ (self._mirror_at(k_frac) @ states))

    def _check(self, k_frac: FloatArray, eigenvalues: FloatArray) -> None:
        self.purity = min(self.purity, float(np.abs(eigenvalues).min()))
        changed = (eigenvalues < 0).sum(axis=1) != self.n_minus
        impure = np.abs(eigenvalues).min(axis=1) < MIN_PURITY
        if changed.any():
            pure = changed & (np.abs(eigenvalues).min(axis=1) >= CLOSING_PURITY)
            if pure.any() and self._purity_at_first >= CLOSING_PURITY:
                self.closes_near = _triple(k_frac[pure][0] % 1.0)
            raise NotInvariantError(
                f"the number of occupied states with mirror eigenvalue -i changes from "
                f"{self.n_minus} at {_words(k_frac[changed][0])}: the gap closes on the plane"
            )
        if impure.any():
            raise NotInvariantError(
                f"occupied states at {_words(k_frac[impure][0])} have no definite mirror "
                f"eigenvalue (|eigenvalue| down to {self.purity:.2f}, at least {MIN_PURITY} needed)"
            )


class _Evidence:
    """What is known of the plane before any Chern number is."""

    def __init__(self, plane: str, violation_mev: float) -> None:
        self._plane = plane
        self._violation_mev = violation_mev

    def result(
        self,
        status: str,
        reason: str,
        *,
        found: list[ChernPlane | None] | None = None,
        split: _Split | None = None,
    ) -> MirrorChern:
        plus, minus = found or (None, None)
        mirror_chern = None
        if status == "ok":
            mirror_chern = (_number(plus) - _number(minus)) / 2
        return MirrorChern(
            plane=self._plane,
            status=status,
            reason=reason,
            mirror_chern=mirror_chern,
            plus=plus,
            minus=minus,
            n_plus=split.n_plus if split else 0,
            n_minus=split.n_minus if split else 0,
            purity=split.purity if split else 0.0,
            violation_mev=self._violation_mev,
            closes_near=split.closes_near if split else None,
            n_solves=sum(plane.n_solves for plane in (plus, minus) if plane is not None),
        )


def _number(plane: ChernPlane | None) -> int:
    """Chern number; an empty set of states has 0."""
    return 0 if plane is None or plane.chern is None else plane.chern


def _status(found: list[ChernPlane | None]) -> tuple[str, str]:
    open_planes = [plane for plane in found if plane is not None and plane.chern is None]
    return ("unresolved", open_planes[0].reason) if open_planes else ("ok", "")


def _triple(k: FloatArray) -> tuple[float, float, float]:
    x, y, z = (float(c) for c in k)
    return x, y, z


def _words(k: FloatArray) -> str:
    return "k = (" + ", ".join(f"{c:.4f}" for c in k) + ")"
