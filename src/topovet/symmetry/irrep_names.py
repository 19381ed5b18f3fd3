"""Names of irreps: a scheme of our own that reads off characters, and the textbook's beside it.

Own label: point, dimension, letter, parity, such as "Γ2a+" or "W2"; "±" marks an irrep that holds
states of both parities. The letter tells irreps of one
dimension and parity apart and is left out where there is but one. They are lettered by the rotation
numbers j of the main rotation, smallest |j| first: a turn by 360/n degrees has eigenvalues
exp(-2 pi i j/n), j half-integer for spinors, as for states of angular momentum j about the axis.

The main rotation is that of highest order; rotoinversions (S4, S6, S3, m) count only where there is
no inversion, since parity says the rest. Among equals: proper before improper, then the axis
nearest to z, x, y. At the zone boundary the eigenvalue of a screw keeps the phase of its
translation, and its j need not be a half-integer.

The parity is that about the centre of the operation {-1|w}, w/2, or about the one that is given.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from scipy.spatial.transform import Rotation

from topovet.arrays import ComplexArray, FloatArray, IntArray, frozen
from topovet.errors import NoInversionError
from topovet.symmetry.irreps import Irrep
from topovet.symmetry.little_group import LittleGroup
from topovet.symmetry.operations import TRANSLATION_TOLERANCE
from topovet.symmetry.textbook_names import operation_kinds, textbook_number

HALF_TURN_TOLERANCE = 1e-2
"""Angles in radians this near to 0 or pi are that; the next nearest is pi/3, and cells have few
digits."""

SCHOENFLIES = {"m": "m", "-1": "i", "-3": "S6", "-4": "S4", "-6": "S3"}
"""How rotoinversions are written; proper rotations are C2, C3, C4, C6."""

_TURNS = {"1": 1, "-1": 1, "2": 2, "m": 2, "3": 3, "-3": 3, "4": 4, "-4": 4, "6": 6, "-6": 6}
"""n of the proper part of each kind of operation."""


_PARITY_SIGNS = {None: "", 1: "+", -1: "−", 0: "±"}


@dataclass(frozen=True, slots=True, eq=False)
class IrrepName:
    """What an irrep is called, and why.

    Attributes
    ----------
    label
        Own label, e.g. "Γ2a+".
    level_label
        That of the levels it makes: where time reversal pairs it with another irrep of its
        dimension and parity both letters, "L1ab−"; else the label.
    textbook
        Name in the textbooks, e.g. "Γ6+"; None where the little co-group is not tabulated or acts
        with screws and glides that no origin removes.
    dimension
        Of the irrep itself.
    parity
        +1 or -1; 0 where half of its states are even and half odd, as a nonsymmorphic group can
        enforce at the zone boundary; None unless inversion is in the little group.
    rotation
        Main rotation, "C4", "S4", "m", …; empty in a trivial group.
    rotation_numbers
        (d,) j of its eigenvalues exp(-2 pi i j/n), falling.
    time_reversal, partner
        As in `Irrep`.
    """

    label: str
    level_label: str
    textbook: str | None
    dimension: int
    parity: int | None
    rotation: str
    rotation_numbers: tuple[float, ...]
    time_reversal: str
    partner: int


def name_irreps(
    group: LittleGroup,
    irreps: tuple[Irrep, ...],
    point: str,
    centre_frac: FloatArray | None = None,
) -> tuple[IrrepName, ...]:
    """Names of all irreps of a little group, in their order.

    Parameters
    ----------
    group, irreps
        As `compute_irreps` pairs them.
    point
        Name of the k-point; of "K/U" the first is used.
    centre_frac
        (3,) inversion centre that parities refer to; that of the operation itself if None. It is
        also the first choice of origin for the textbook's names.

    Raises
    ------
    NoInversionError
        The group has inversion, but not about the given centre.
    """
    stem = point.split("/")[0] + (":" if point.startswith("(") else "")
    parities = _parities(group, irreps, centre_frac)
    main = main_rotation(group)
    numbers = [_rotation_numbers(group, irrep, main) for irrep in irreps]
    letters = _letters([i.dimension for i in irreps], parities, numbers)
    textbook = _textbook(group, irreps, stem, centre_frac)
    labels = [
        f"{stem}{irrep.dimension}{letter}{_PARITY_SIGNS[parity]}"
        for irrep, letter, parity in zip(irreps, letters, parities, strict=True)
    ]
    return tuple(
        IrrepName(
            label=label,
            level_label=_joint_label(label, letter, labels[irrep.partner], letters[irrep.partner]),
            textbook=textbook_name,
            dimension=irrep.dimension,
            parity=parity,
            rotation="" if main is None else rotation_symbol(group.rotations[main]),
            rotation_numbers=j,
            time_reversal=irrep.time_reversal,
            partner=irrep.partner,
        )
        for irrep, label, letter, textbook_name, parity, j in zip(
            irreps, labels, letters, textbook, parities, numbers, strict=True
        )
    )


def _joint_label(label: str, letter: str, partner: str, partner_letter: str) -> str:
    """Label of the level that an irrep and its partner make: "L1ab−" of L1a− and L1b−."""
    if label == partner:
        return label
    both = "".join(sorted((letter, partner_letter)))
    first, second = label.rsplit(letter, 1), partner.rsplit(partner_letter, 1)
    return both.join(first) if letter and first == second else f"{label} ⊕ {partner}"


def operation_turns(kind: str) -> int:
    """n of the turn by 360/n degrees in a kind of operation such as "4" or "-4"."""
    return _TURNS[kind]


def rotation_symbol(rotation: IntArray) -> str:
    """C2, C3, C4, C6, m, S3, S4, S6, i, or E."""
    kind = operation_kinds(rotation[None])[0]
    return SCHOENFLIES.get(kind) or (f"C{kind}" if kind != "1" else "E")


def rotation_axis(cartesian: FloatArray) -> FloatArray:
    """(3,) unit vector about which the proper part turns counter-clockwise by at most 180 degrees.

    Of the two for half turns the positive one; zero for the identity and for inversion.
    """
    turn = Rotation.from_matrix(np.linalg.det(cartesian) * cartesian).as_rotvec()
    angle = float(np.linalg.norm(turn))
    if angle < HALF_TURN_TOLERANCE:
        return np.zeros(3)
    axis = np.where(np.abs(turn / angle) < 1e-9, 0.0, turn / angle)
    return -axis if angle > np.pi - HALF_TURN_TOLERANCE and not is_positive(axis) else axis


def is_positive(axis: FloatArray) -> bool:
    """Whether the last component that is not zero is positive: one of each pair +-axis."""
    return next((bool(c > 0) for c in axis[::-1] if abs(c) > 1e-3), False)


def main_rotation(group: LittleGroup) -> int | None:
    """Position of the main rotation among the members; None where there is only the identity."""
    kinds = operation_kinds(group.rotations)
    with_inversion = "-1" in kinds
    best, best_key = None, None
    for position, (kind, cartesian) in enumerate(zip(kinds, group.cartesian, strict=True)):
        proper = kind in "12346"
        if kind in ("1", "-1") or (with_inversion and not proper):
            continue
        x, y, z = np.round(rotation_axis(cartesian), 4) + 0.0
        key = (_TURNS[kind], proper, float(z), float(x), float(y))
        if best_key is None or key > best_key:
            best, best_key = position, key
    return best


def _rotation_numbers(group: LittleGroup, irrep: Irrep, main: int | None) -> tuple[float, ...]:
    """j of the main rotation's eigenvalues, in (-n/2, n/2], largest first."""
    if main is None:
        return ()
    n = _TURNS[operation_kinds(group.rotations[main][None])[0]]
    bloch = np.exp(2j * np.pi * float(group.k_frac @ group.translations[main]))
    angles = np.angle(np.linalg.eigvals(irrep.matrices[main] * bloch))
    raw = -n * angles / (2 * np.pi)
    j = np.round(np.where(raw <= -n / 2 + 1e-6, raw + n, raw), 4) + 0.0
    return tuple(sorted(j.tolist(), reverse=True))


def _parities(
    group: LittleGroup, irreps: tuple[Irrep, ...], centre_frac: FloatArray | None
) -> list[int | None]:
    """Parity of each irrep about the centre."""
    at = np.flatnonzero(np.all(group.rotations == -np.eye(3, dtype=np.int64), axis=(1, 2)))
    if not len(at):
        return [None] * len(irreps)
    cell = np.zeros(3)
    if centre_frac is not None:
        candidates = 2 * np.asarray(centre_frac) - group.translations[at]
        apart = np.abs(candidates - np.round(candidates)).max(axis=1)
        at = at[[int(apart.argmin())]]
        if apart.min() > TRANSLATION_TOLERANCE:
            raise NoInversionError(f"no inversion about {np.round(centre_frac, 4).tolist()}")
        cell = np.round(candidates[int(apart.argmin())])
    phase = np.exp(-2j * np.pi * float(group.k_frac @ cell))
    return [round(float((i.characters[at[0]] * phase).real) / i.dimension) for i in irreps]


def _letters(
    dimensions: list[int], parities: list[int | None], numbers: list[tuple[float, ...]]
) -> list[str]:
    """Letter of each irrep among those of its dimension and parity, "" for the only one."""
    letters = [""] * len(dimensions)
    kinds = list(zip(dimensions, parities, strict=True))
    for kind in set(kinds):
        alike = [i for i, other in enumerate(kinds) if other == kind]
        # ties keep the order of `compute_irreps`
        alike.sort(key=lambda i: (sorted(abs(j) for j in numbers[i]), [-j for j in numbers[i]]))
        if len(alike) > 1:
            for count, i in enumerate(alike):
                letters[i] = _letter(count)
    return letters


def _letter(count: int) -> str:
    """a … z, then aa, ab, …"""
    return ("" if count < 26 else _letter(count // 26 - 1)) + chr(ord("a") + count % 26)


def _textbook(
    group: LittleGroup, irreps: tuple[Irrep, ...], stem: str, centre_frac: FloatArray | None
) -> list[str | None]:
    nothing: list[str | None] = [None] * len(irreps)
    if len({w.tobytes() for w in group.rotations}) < len(group.members):
        return nothing  # cell is not primitive: the co-group holds translations
    phases = point_group_phases(group, centre_frac)
    if phases is None:
        return nothing
    spinful = group.operations.spinful
    numbers = [
        textbook_number(group.rotations, i.characters * phases, spinful=spinful) for i in irreps
    ]
    return [None if number is None else stem + number for number in numbers]


def point_group_phases(
    group: LittleGroup, centre_frac: FloatArray | None = None
) -> ComplexArray | None:
    """(n,) phases that turn characters of {W|w} into those of the rotations W about one origin.

    Inside the zone, where gk = k without a reciprocal vector, exp(2 pi i k.w) does it for any w. At
    the boundary the members must be rotations about one point up to lattice vectors t, and the
    phases are exp(2 pi i k.t); None where there is no such point (essential screws and glides).

    Parameters
    ----------
    group
        The little group.
    centre_frac
        (3,) origin that is preferred if it qualifies; of several others the one nearest to it
        (or to 0) is taken.
    """
    w, t = group.rotations, group.translations
    k = group.k_frac
    images = k @ np.round(np.linalg.inv(w.astype(float)))
    if np.abs(images - k).max() < 1e-6:
        return np.asarray(np.exp(2j * np.pi * (t @ k)))
    preferred = np.zeros(3) if centre_frac is None else np.asarray(centre_frac, dtype=float)
    for origin in _origins(w, t, preferred):
        rest = t - (np.eye(3) - w) @ origin
        if np.abs(rest - np.round(rest)).max() < TRANSLATION_TOLERANCE:
            return np.asarray(np.exp(2j * np.pi * (np.round(rest) @ k)))
    return None


def _origins(rotations: IntArray, translations: FloatArray, preferred: FloatArray) -> FloatArray:
    """Points that could be fixed by all operations modulo the lattice, nearest to one first."""
    chosen = _generators(rotations)
    equations = np.concatenate([np.eye(3) - rotations[i] for i in chosen])
    solve = np.linalg.pinv(equations)
    cells = np.array(list(itertools.product((-1, 0, 1), repeat=3)), dtype=float)
    right: FloatArray = np.zeros((1, 0))
    for i in chosen:
        rest = translations[i] - (np.eye(3) - rotations[i]) @ preferred
        shifted = rest - np.round(rest) + cells
        right = np.concatenate(
            [np.repeat(right, len(cells), axis=0), np.tile(shifted, (len(right), 1))], axis=1
        )
    # solved relative to the preferred point, so that a free coordinate keeps its value
    found = right @ solve.T
    exact = np.abs(found @ equations.T - right).max(axis=1) < TRANSLATION_TOLERANCE
    points = np.unique(np.round(found[exact], 6), axis=0)
    nearest = np.argsort(np.linalg.norm(points, axis=1), kind="stable")
    return frozen(points[nearest] + preferred)


def _generators(rotations: IntArray) -> list[int]:
    """Positions of a few rotations, three at most, that generate all of them."""
    made = {np.eye(3, dtype=np.int64).tobytes()}
    chosen: list[int] = []
    for i in np.argsort([-_TURNS[kind] for kind in operation_kinds(rotations)], kind="stable"):
        if rotations[i].tobytes() in made:
            continue
        chosen.append(int(i))
        made = _closure([rotations[j] for j in chosen])
    return chosen


def _closure(generators: list[IntArray]) -> set[bytes]:
    """All products of the generators, as bytes."""
    identity = np.eye(3, dtype=np.int64)
    found = {identity.tobytes(): identity}
    waiting = [identity]
    while waiting:
        element = waiting.pop()
        for generator in generators:
            product = np.asarray(element @ generator, dtype=np.int64)
            if product.tobytes() not in found:
                found[product.tobytes()] = product
                waiting.append(product)
    return set(found)
