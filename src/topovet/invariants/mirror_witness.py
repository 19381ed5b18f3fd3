"""Mirror Chern numbers on every mirror-invariant plane of the Hamiltonian's group.

n_M = (C+ - C-)/2 of the occupied states with mirror eigenvalues +i and -i. Signs: the mirror with
normal n acts on spin as -i n.sigma, and the plane is counter-clockwise about n, so that n and -n
give the same number. Operations of the group take a plane and its number to others; on planes
at the zone boundary the sign also belongs to the mirror that is meant, named by a point on it: its
neighbour half a lattice period away has the other sign there.

With time reversal C- = -C+, and the plane's own Z2 is n_M modulo 2: a plane k.n = c of the zone has
nu.n for c = 1/2 and nu0 + nu.n for c = 0, with nu = (nu1, nu2, nu3).

References
----------
Teo, Fu, Kane, Phys. Rev. B 78, 045426 (2008), doi:10.1103/PhysRevB.78.045426 (n_M, and its parity);
Fu, Kane, Phys. Rev. B 76, 045302 (2007), doi:10.1103/PhysRevB.76.045302 (Z2 of planes).
"""

from __future__ import annotations

import functools
import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.invariants.mirror_chern import compute_mirror_chern, mirror_planes
from topovet.invariants.mirror_indicators import without_glide
from topovet.invariants.results import MirrorChern
from topovet.invariants.wilson_sheet import SheetCriteria
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.model.plane import Cell, KPlane
from topovet.spectrum.eigen import map_threads
from topovet.symmetry.equivalent_planes import plane_key
from topovet.symmetry.operations import TRANSLATION_TOLERANCE
from topovet.symmetry.operators import (
    WannierOperator,
    cartesian_rotation,
    operator_at,
    spin_rotation,
)

LEAST_PURITY = 0.9
"""Least |eigenvalue| of the mirror in the occupied space with which a number is stood behind."""

GENERIC_XY = np.array([[0.137, 0.291]])
"""A point of each plane on which operators are compared."""

PAULI: ComplexArray = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])

Point3 = tuple[float, float, float]


@dataclass(frozen=True, slots=True, eq=False)
class MirrorPlane:
    """One mirror-invariant plane of k.

    Attributes
    ----------
    name
        Mirror by its Miller indices in the Hamiltonian's cell, and the place of the plane along
        that reciprocal vector G: "m(1 -1 0) k=0" or "m(0 0 1) k=G/2".
    normal_cart
        Unit normal n of mirror and plane; the plane is counter-clockwise about it.
    through
        A point on the mirror, fractional.
    row, half
        The plane is where k.row is an integer, or with `half` a half-integer.
    judged_mev
        How well the mirror holds on the Hamiltonian.
    status
        "ok", "unresolved" or "failed".
    reason
        Why it is not "ok"; empty otherwise.
    number
        n_M; None unless "ok".
    taken_from
        Name of the plane that a symmetry takes to this one, where that was computed; else empty.
    evidence
        What was computed; None where the number is taken over.
    """

    name: str
    normal_cart: Point3
    through: Point3
    row: Cell
    half: bool
    judged_mev: float
    status: str
    reason: str
    number: int | None
    taken_from: str
    evidence: MirrorChern | None


@dataclass(frozen=True, slots=True, eq=False)
class MirrorWitness:
    """Mirror Chern numbers of a case.

    Attributes
    ----------
    status
        "ok" where every plane has its number, else "unresolved" or "failed".
    reason
        Why it is not "ok"; empty otherwise.
    planes
        All planes of mirrors that hold well enough.
    left_out
        Why other mirror-like operations were not used, one clause each.
    n_solves
        Eigenvalue problems solved.
    """

    status: str
    reason: str
    planes: tuple[MirrorPlane, ...]
    left_out: tuple[str, ...]
    n_solves: int

    @property
    def numbers(self) -> dict[str, int]:
        """n_M by plane, for the planes that have one."""
        return {p.name: p.number for p in self.planes if p.number is not None}

    def contradicts(self, z2: Sequence[int]) -> tuple[MirrorPlane, ...]:
        """Planes whose n_M has another parity than these Z2 indices give the plane."""
        return tuple(
            p for p in self.planes if p.number is not None and p.number % 2 != _z2_of_plane(p, z2)
        )

    def allowed_z2(self, dimension: int) -> tuple[tuple[int, ...], ...]:
        """All sets of Z2 indices that agree with every number."""
        choices = itertools.product((0, 1), repeat=4 if dimension == 3 else 1)
        return tuple(z2 for z2 in choices if not self.contradicts(z2))

    def z2(self, dimension: int) -> tuple[int | None, ...]:
        """Z2 indices that the numbers fix by themselves; None at others and in a contradiction."""
        allowed = np.array(self.allowed_z2(dimension)).reshape(-1, 4 if dimension == 3 else 1)
        return tuple(int(c[0]) if len(set(c)) == 1 else None for c in allowed.T.tolist())


def _z2_of_plane(plane: MirrorPlane, z2: Sequence[int]) -> int:
    if len(z2) == 1:
        return z2[0]
    weak = int(np.dot(z2[1:], plane.row))
    return (weak if plane.half else weak + z2[0]) % 2


@dataclass(frozen=True, slots=True, eq=False)
class Mirror:
    """A mirror to be used: its operator without glide, and how well it holds, meV."""

    operator: WannierOperator
    judged_mev: float


@dataclass(frozen=True, slots=True, eq=False)
class _Oriented:
    """A plane of a mirror, counter-clockwise about its normal."""

    plane: KPlane
    mirror: Mirror
    normal: FloatArray


def proper_mirrors(
    mirrors: Sequence[tuple[WannierOperator, float]], crystal: Crystal
) -> tuple[list[Mirror], tuple[str, ...]]:
    """Mirrors proper among operations with the rotation part of one, the best of each normal.

    Parameters
    ----------
    mirrors
        Operations with the rotation part of a reflection, and how well each holds, meV.
    crystal
        A layer has no mirror Chern number but that of the mirror in its own plane.

    Returns
    -------
    tuple
        Mirrors, and why the others are none.
    """
    found: list[Mirror] = []
    glides: list[str] = []
    upright: list[str] = []
    for operator, judged_mev in sorted(mirrors, key=lambda m: m[1]):
        proper = without_glide(operator)
        glide = (np.eye(3) + proper.rotation) @ proper.translation
        if np.abs(glide[list(crystal.periodic)]).max() > TRANSLATION_TOLERANCE:
            glides.append(_mirror_name(operator))
        elif not all(crystal.periodic) and not _in_layer(operator, crystal):
            upright.append(_mirror_name(operator))
        else:
            found.append(Mirror(proper, judged_mev))
    left_out = []
    if glides:
        left_out.append(f"glides: {', '.join(sorted(glides))}")
    if upright:
        left_out.append(f"mirrors that stand upright on the layer: {', '.join(sorted(upright))}")
    return found, tuple(left_out)


def compute_mirror_witness(
    bloch: BlochSum,
    mirrors: Sequence[Mirror],
    symmetries: Sequence[WannierOperator],
    crystal: Crystal,
    filling: int,
    criteria: SheetCriteria | None = None,
    *,
    left_out: tuple[str, ...] = (),
) -> MirrorWitness:
    """n_M on all planes of the given mirrors; time reversal with spin is taken for granted.

    Parameters
    ----------
    bloch
        Spinful Hamiltonian with time reversal.
    mirrors
        Mirrors without glide, the best one first.
    symmetries
        Unitary operations that hold well below the gap: a plane that one of them makes of another
        is not computed again.
    crystal
        Gives cell and periodic directions.
    filling
        Occupied bands.
    criteria
        Convergence criteria, and the budget of each of the two Chern numbers of a plane.
    left_out
        See `MirrorWitness`.
    """
    oriented = [o for mirror in mirrors for o in _oriented_planes(mirror, crystal)]
    sources = _sources(oriented, symmetries, crystal)
    to_solve = [o for o, source in zip(oriented, sources, strict=True) if source is None]
    computed = dict(
        zip(
            [o.plane.name for o in to_solve],
            map_threads(lambda o: _compute(bloch, o, filling, criteria), to_solve),
            strict=True,
        )
    )
    planes = tuple(
        _entry(o, computed[o.plane.name], "", 1)
        if source is None
        else _entry(o, computed[source[0]], *source)
        for o, source in zip(oriented, sources, strict=True)
    )
    open_planes = [p for p in planes if p.status != "ok" and not p.taken_from]
    failed = any(p.status == "failed" for p in open_planes)
    return MirrorWitness(
        status="failed" if failed else "unresolved" if open_planes else "ok",
        reason="; ".join(f"{p.name}: {p.reason}" for p in open_planes),
        planes=planes,
        left_out=left_out,
        n_solves=sum(c.n_solves for c in computed.values()),
    )


def _compute(
    bloch: BlochSum, oriented: _Oriented, filling: int, criteria: SheetCriteria | None
) -> MirrorChern:
    mirror_at = functools.partial(operator_at, oriented.mirror.operator)
    return compute_mirror_chern(bloch, oriented.plane, mirror_at, filling, criteria)


def _entry(oriented: _Oriented, found: MirrorChern, taken_from: str, sign: int) -> MirrorPlane:
    operator = oriented.mirror.operator
    normal, offset = plane_key(oriented.plane)
    status, reason, number = _number(found)
    return MirrorPlane(
        name=oriented.plane.name,
        normal_cart=_point(oriented.normal),
        through=_point((operator.translation - operator.rotation @ operator.translation) / 4),
        row=normal,
        half=offset > 0,
        judged_mev=oriented.mirror.judged_mev,
        status=status,
        reason=reason,
        number=None if number is None else sign * number,
        taken_from=taken_from,
        evidence=None if taken_from else found,
    )


def _number(found: MirrorChern) -> tuple[str, str, int | None]:
    """Status, reason and n_M = C+ of one plane; with time reversal C- is -C+."""
    if found.status == "not-applicable":
        return "failed", found.reason, None
    if found.status != "ok" or found.mirror_chern is None:
        return found.status, found.reason, None
    if found.purity < LEAST_PURITY:
        reason = (
            f"occupied states have no definite mirror eigenvalue (|eigenvalue| down to "
            f"{found.purity:.2f}, at least {LEAST_PURITY} needed)"
        )
        return "failed", reason, None
    c_plus, c_minus = (0 if p is None else p.chern or 0 for p in (found.plus, found.minus))
    if c_plus != -c_minus:
        return "failed", f"C+ = {c_plus} and C- = {c_minus} are not opposite", None
    return "ok", "", c_plus


def _oriented_planes(mirror: Mirror, crystal: Crystal) -> list[_Oriented]:
    """The mirror's planes, named and turned to be counter-clockwise about the normal."""
    rotation = mirror.operator.rotation
    normal = mirror_normal(cartesian_rotation(rotation, crystal.cell))
    found = []
    for plane, place in zip(mirror_planes(rotation), ("k=0", "k=G/2"), strict=False):
        if place != "k=0" and not all(crystal.periodic):
            continue
        across, along = np.array([plane.across, plane.along]) @ crystal.reciprocal
        turned = plane if np.cross(across, along) @ normal > 0 else plane.turned()
        name = f"{_mirror_name(mirror.operator)} {place}"
        named = KPlane(name, turned.origin, turned.across, turned.along)
        found.append(_Oriented(named, mirror, normal))
    return found


def mirror_normal(cartesian: FloatArray) -> FloatArray:
    """(3,) unit n with -i n.sigma the spin part of a mirror in the fixed sign."""
    traces = np.trace(spin_rotation(cartesian) @ PAULI, axis1=1, axis2=2)
    return np.asarray((0.5j * traces).real)


def _mirror_name(operator: WannierOperator) -> str:
    return "m" + mirror_planes(operator.rotation)[0].name.removesuffix(" at 0")


def _in_layer(operator: WannierOperator, crystal: Crystal) -> bool:
    """Whether the mirror keeps every in-plane vector of a layer."""
    axis = crystal.periodic.index(False)
    kept = np.delete(np.delete(operator.rotation, axis, 0), axis, 1)
    return bool(np.array_equal(kept, np.eye(2)))


def _sources(
    oriented: Sequence[_Oriented], symmetries: Sequence[WannierOperator], crystal: Crystal
) -> list[tuple[str, int] | None]:
    """For each plane the one that is computed for it and the sign between them; None for itself."""
    keys = [plane_key(o.plane) for o in oriented]
    sources: list[tuple[str, int] | None] = [None] * len(oriented)
    taken: set[int] = set()
    for i, first in enumerate(oriented):
        if i in taken:
            continue
        taken.add(i)
        for g in symmetries:
            image = _image_key(first.plane, g.k_rotation)
            j = next((j for j, key in enumerate(keys) if key == image and j not in taken), None)
            if j is None:
                continue
            sign = _sign_between(first, oriented[j], g, crystal)
            if sign is not None:
                sources[j] = (first.plane.name, sign)
                taken.add(j)
    return sources


def _image_key(plane: KPlane, k_rotation: IntArray) -> tuple[Cell, float]:
    span = np.array([plane.across, plane.along]) @ k_rotation
    x, y, z = (np.array(plane.origin) @ k_rotation).tolist()
    return plane_key(KPlane("", (x, y, z), _cell(span[0]), _cell(span[1])))


def _sign_between(
    first: _Oriented, second: _Oriented, g: WannierOperator, crystal: Crystal
) -> int | None:
    """n_M of the second plane over that of the first, which g takes there; None if they differ.

    D_g(k) D_m(k) = s D_m'(gk) D_g(k) says which mirror eigenvalue goes to which, and the turned
    plane is counter-clockwise or not about its own normal. The mirror of first and second fix k
    and gk up to a reciprocal vector, which D in the periodic gauge does not notice.
    """
    k = first.plane.k_at(GENERIC_XY)
    k_image = k @ g.k_rotation
    d_g = operator_at(g, k)[0]
    before = d_g @ operator_at(first.mirror.operator, k)[0]
    after = operator_at(second.mirror.operator, k_image)[0] @ d_g
    sign = round(float(np.trace(after.conj().T @ before).real) / len(d_g))
    if abs(sign) != 1 or np.abs(before - sign * after).max() > 1e-6:
        return None
    turn = cartesian_rotation(g.rotation, crystal.cell)
    orientation = round(float(np.linalg.det(turn) * (turn @ first.normal) @ second.normal))
    return sign * orientation


def _point(vector: FloatArray) -> Point3:
    x, y, z = (round(float(c), 9) + 0.0 for c in vector)
    return x, y, z


def _cell(vector: IntArray) -> Cell:
    x, y, z = (int(c) for c in vector)
    return x, y, z
