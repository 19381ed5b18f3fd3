"""What crystal symmetry adds where the Z2 indices are silent: mirror Chern numbers, indicators.

A mirror Chern number that is not 0 protects surface states on every face the mirror keeps. An
indicator that is not 0 excludes an atomic insulator but rarely says which phase there is.

References
----------
Khalaf, Po, Vishwanath, Watanabe, Phys. Rev. X 8, 031070 (2018), doi:10.1103/PhysRevX.8.031070.
Song, Zhang, Fang, Fang, Nat. Commun. 9, 3530 (2018), doi:10.1038/s41467-018-06010-w. Of their Z12
for 6/m what is known from memory is used: modulo 4 it is kappa, modulo 3 the difference of the
mirror Chern numbers of the planes at 1/2 and at 0.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from topovet.invariants.band_reps.results import FRAGILE, STABLE
from topovet.invariants.mirror_indicators import MirrorIndicator
from topovet.invariants.mirror_witness import MirrorPlane
from topovet.notation import nonzero_by_plane
from topovet.symmetry.equivalent_planes import plane_key
from topovet.verdict.findings import Findings

PLACES = {"mirror k=0": "k=0", "mirror k=1/2": "k=G/2"}


def mirror_numbers(findings: Findings) -> dict[str, int]:
    """Mirror Chern numbers by plane."""
    return {} if findings.mirror is None else findings.mirror.numbers


def indicator_values(findings: Findings) -> dict[str, int]:
    """Every symmetry indicator that the group has and that could be read, by its usual name."""
    values: dict[str, int] = {}
    parity, s4 = findings.parity, findings.s4
    if parity is not None and parity.status == "ok" and parity.z4 is not None:
        values["z4"] = parity.z4
        if parity.z2 is not None:
            values |= {f"z2w{i}": nu for i, nu in enumerate(parity.z2[1:], start=1)}
    if s4 is not None and s4.status == "ok" and s4.kappa is not None:
        values["s4"] = s4.kappa % 2
        if s4.z8 is not None:
            values["z8"] = s4.z8
    values |= _mirror_values(findings.mirror_indicators)
    z12 = _z12(findings)
    return values if z12 is None else {**values, "z12": z12}


def _mirror_values(indicators: Sequence[MirrorIndicator]) -> dict[str, int]:
    """z3m, z4m, z6m by place of the plane, with the axis where several axes differ."""
    read = [i for i in indicators if i.status == "ok" and i.mirror_chern is not None]
    values: dict[str, int] = {}
    for found in read:
        name = f"z{found.n}m {PLACES[found.plane.name]}"
        alike = {i.mirror_chern for i in read if (i.n, i.plane.name) == (found.n, found.plane.name)}
        if len(alike) > 1:
            name += f" about [{' '.join(f'{c:.3g}' for c in found.axis_cart)}]"
        values[name] = found.mirror_chern or 0
    return values


def _z12(findings: Findings) -> int | None:
    """Z12 of 6/m about the inversion centre of kappa; None where a part of it is not known."""
    parity = findings.parity
    six = [i for i in findings.mirror_indicators if i.n == 6 and i.status == "ok"]
    if parity is None or parity.status != "ok" or parity.kappa is None or len(six) != 2:
        return None
    if parity.centre is None:
        return None
    at_0, at_half = (i.mirror_chern or 0 for i in six)
    # at 1/2 the sign is that of the mirror through the centre
    offset = np.array(parity.centre) - np.array(six[1].through)
    sign = round(float(np.cos(2 * np.pi * np.array(six[1].plane.origin) @ (2 * offset))))
    difference = (sign * at_half - at_0) % 3
    return next(z for z in range(12) if (z - parity.kappa) % 4 == 0 and z % 3 == difference)


def indicator_conflicts(findings: Findings) -> tuple[tuple[MirrorIndicator, MirrorPlane], ...]:
    """Planes whose counted mirror Chern number is not what rotation eigenvalues say modulo n."""
    if findings.mirror is None:
        return ()
    by_key = {((p.row), p.half): p for p in findings.mirror.planes if p.number is not None}
    found = []
    for indicator in findings.mirror_indicators:
        normal, offset = plane_key(indicator.plane)
        plane = by_key.get((normal, offset > 0))
        if plane is None or plane.number is None or indicator.mirror_chern is None:
            continue
        sign = round(float(np.dot(plane.normal_cart, indicator.axis_cart)))
        if (sign * plane.number - indicator.mirror_chern) % indicator.n:
            found.append((indicator, plane))
    return tuple(found)


def class_without_z2(
    findings: Findings, indicators: Mapping[str, int]
) -> tuple[str, tuple[str, ...]]:
    """Class and grounds where all Z2 indices are 0."""
    counted = nonzero_by_plane(mirror_numbers(findings))
    read = {name: v for name, v in indicators.items() if v and name.startswith(MIRROR_NAMES)}
    others = {name: v for name, v in indicators.items() if v and name not in read}
    kappa = ("kappa = 2 leaves open whether there are hinge states besides",)
    if counted:
        grounds = ("all Z2 indices are 0", f"mirror Chern numbers are not: {counted}")
        return "crystalline-ti", grounds + (kappa if others.get("z4") == 2 else ())
    if read:
        shown = ", ".join(f"{name} = {v}" for name, v in read.items())
        return "crystalline-ti", (
            "all Z2 indices are 0",
            f"mirror Chern numbers are not, by rotation eigenvalues: {shown}",
        )
    if others:
        shown = ", ".join(_indicator_words(name, v) for name, v in others.items())
        return "higher-order", (
            f"all Z2 indices are 0 and {shown}: {_what_is_left(findings)}; indicators alone do "
            "not tell which",
            *_tested(findings),
        )
    if (levels := findings.band_reps) is not None and levels.occupied.classification == STABLE:
        if levels.dimension == 2:
            return _stable_layer(findings)
        return "higher-order", (
            "all Z2 indices and the named indicators are 0, but no sum or difference of atomic "
            f"limits has the levels of the occupied bands: {_what_is_left(findings)}; levels alone "
            "do not tell which",
            *_tested(findings),
        )
    seen = "all Z2 indices are 0" if not indicators else "all Z2 indices and indicators are 0"
    return "trivial", (seen, *_levels(findings), *_tested(findings))


def _stable_layer(findings: Findings) -> tuple[str, tuple[str, ...]]:
    """What levels of no atomic limit mean in a layer whose Z2 index is 0.

    The indicator groups of the 80 layer groups, with spin and time reversal, are Z2 with inversion
    and Zn with an n-fold axis normal to a mirror, the mirror Chern number modulo n.
    """
    seen = (
        "the Z2 index is 0, but no sum or difference of atomic limits has the levels of the "
        "occupied bands: in a layer they are those of a mirror Chern number other than 0"
    )
    if findings.mirror is not None and findings.mirror.numbers:
        return "undetermined", (f"{seen}, while the count gives 0",)
    return "crystalline-ti", (seen, *_tested(findings))


def _levels(findings: Findings) -> tuple[str, ...]:
    """What the levels say of a trivial phase that is not plain."""
    levels = findings.band_reps
    if levels is None or levels.status != "ok":
        return ()
    if levels.occupied.classification == FRAGILE:
        return ("the levels are those of fragile topology, which further bands can undo",)
    if levels.occupied.obstructed:
        return ("the levels are those of orbitals between the atoms: an obstructed atomic limit",)
    return ()


MIRROR_NAMES = ("z3m", "z4m", "z6m")


def _indicator_words(name: str, value: int) -> str:
    return f"kappa = {value}" if name == "z4" else f"{name} = {value}"


def _what_is_left(findings: Findings) -> str:
    """Phases that an indicator allows when no mirror Chern number is known to be other than 0."""
    hinges = "hinge states protected by inversion or a rotation"
    if findings.mirror is not None and findings.mirror.status == "ok":
        return f"{hinges}, or surface states protected by a rotation, glide or screw"
    return f"{hinges}, or surface states protected by a mirror, rotation, glide or screw"


def _tested(findings: Findings) -> tuple[str, ...]:
    """What was looked at beyond Z2, and what was not."""
    if findings.declared.crystal.dimension == 2 and findings.mirror is None:
        return ()
    mirror, lines = findings.mirror, []
    if mirror is None:
        why = findings.missing.get("mirror-chern", "not tested")
        lines.append(f"no mirror Chern number was counted ({why})")
    else:
        known = len(mirror.numbers)
        if known:
            plural = "s" if known > 1 else ""
            lines.append(f"mirror Chern numbers of {known} plane{plural} are 0")
        if mirror.reason:
            lines.append(f"mirror planes without an answer: {mirror.reason}")
        if mirror.left_out:
            lines.append("not used: " + "; ".join(mirror.left_out))
    if findings.declared.crystal.dimension == 3:
        lines.append(
            "glide, screw and rotation invariants were not tested beyond the indicators listed"
        )
    return tuple(lines)
