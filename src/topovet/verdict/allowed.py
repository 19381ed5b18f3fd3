"""The list of invariants that the indicators allow, and mirror Chern numbers held against it."""

from __future__ import annotations

import functools
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from topovet.invariants.band_reps.allowed import find_allowed
from topovet.invariants.band_reps.allowed_results import (
    FIXED,
    LAYERS,
    MIRROR,
    OPEN,
    STRONG,
    WEAK,
    AllowedInvariant,
    AllowedInvariants,
    AllowedValues,
    IndicatorValues,
    PlaneResidue,
)
from topovet.invariants.mirror_witness import MirrorPlane
from topovet.model.plane import Cell
from topovet.symmetry.equivalent_planes import held_within, plane_key
from topovet.symmetry.group_results import GroupTest, OperationTest
from topovet.symmetry.operations import largest_closed_subset, multiplication_table
from topovet.symmetry.textbook_names import operation_kinds
from topovet.units import MEV_PER_EV
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag

MOST_OPERATIONS = 192
"""Those of a cubic group in a cell of four lattice points."""

HELD_SHARE = 0.25
"""Operations that hold to within this share of the smallest direct gap are used, as for mirrors:
the average over them moves H by half of the violation, which cannot close the gap."""


@dataclass(frozen=True, slots=True)
class AllowedFindings:
    """The list before and after mirror Chern numbers are taken into account.

    Attributes
    ----------
    group
        Symbol and number, or how many operations of the structure's group hold.
    by_indicators, with_numbers
        From the indicators alone, and with the numbers that were counted; the latter is the former
        where none was, or where they do not fit.
    used
        The indicator values that were used, by name.
    outside
        Planes whose number is not in the list.
    together
        The numbers are in the list one by one, but not together.
    """

    group: str
    by_indicators: AllowedInvariants
    with_numbers: AllowedInvariants
    used: Mapping[str, int]
    outside: tuple[MirrorPlane, ...]
    together: bool


@functools.lru_cache(maxsize=2)  # asked for by flags, agreement and document of one case
def allowed_findings(findings: Findings) -> AllowedFindings | str:
    """The list for a case, or why there is none."""
    if findings.declared.crystal.dimension != 3:
        return "listed for three dimensions only"
    if not findings.kramers:
        return "listed only for spinors with time reversal"
    if findings.gap is None or findings.gap.status == "gapless":
        return "no gap, no invariants"
    if findings.group is None:
        return f"the group was not tested ({findings.missing.get('group', '')})"
    if len(findings.group.operations) > MOST_OPERATIONS:
        return "the cell repeats a smaller one"
    try:
        return _listed(findings, findings.group, findings.gap.direct_ev)
    except ValueError as error:  # operations known too badly to be a group, or a very skewed cell
        return str(error)


def _listed(findings: Findings, group: GroupTest, direct_gap_ev: float) -> AllowedFindings | str:
    operations = _operations_in_use(group, direct_gap_ev)
    rotations = np.array([o.rotation for o in operations])
    translations = np.array([o.translation for o in operations])
    if len(np.unique(rotations.reshape(-1, 9), axis=0)) < len(rotations):
        return "the cell repeats a smaller one"
    values, used = _indicator_values(findings, operation_kinds(rotations))
    cell = findings.declared.crystal.cell
    listed = find_allowed(cell, rotations, translations, values)
    numbers = _numbers(findings, listed)
    outside = tuple(p for p in numbers if not dict(listed.planes)[p.name].holds(p.number or 0))
    narrowed = listed
    if numbers and not outside:
        counted = {p.name: p.number or 0 for p in numbers}
        narrowed = find_allowed(cell, rotations, translations, values, counted)
    return AllowedFindings(
        group=_group_name(group, len(operations)),
        by_indicators=listed,
        with_numbers=listed if narrowed.status != "ok" else narrowed,
        used=used,
        outside=outside,
        together=not outside and listed.status == "ok" and narrowed.status != "ok",
    )


def _operations_in_use(group: GroupTest, direct_gap_ev: float) -> list[OperationTest]:
    """The largest group of operations that H has to within a share of the gap."""
    rotations = np.array([o.rotation for o in group.operations])
    translations = np.array([o.translation for o in group.operations])
    table, _ = multiplication_table(rotations, translations, np.zeros(len(rotations), dtype=bool))
    among = np.zeros(len(rotations), dtype=bool)
    among[held_within(group, HELD_SHARE * MEV_PER_EV * direct_gap_ev)] = True
    among[np.flatnonzero(np.all(table == np.arange(len(table)), axis=1))] = True
    badness = np.array([o.judged_mev or 0.0 for o in group.operations])
    return [group.operations[i] for i in largest_closed_subset(table, among, badness).tolist()]


def _group_name(group: GroupTest, n: int) -> str:
    name = f"{group.structure_symbol} ({group.structure_number})"
    if n == group.n_structure:
        return name
    if n == len(group.kept) and group.own.number:
        return f"{group.own.symbol} ({group.own.number})"
    return f"{n} of the {group.n_structure} operations of {name}"


def _indicator_values(
    findings: Findings, kinds: tuple[str, ...]
) -> tuple[IndicatorValues, dict[str, int]]:
    """Indicators whose operations are in use, and the same by name."""
    strong: int | None = None
    weak: Cell | None = None
    source, used = "", dict[str, int]()
    z4: int | None = None
    z8: int | None = None
    parity, s4 = findings.parity, findings.s4
    if s4 is not None and s4.status == "ok" and s4.z2 is not None and "-4" in kinds:
        strong, source = s4.z2, "S4 eigenvalues"
        used["s4"] = s4.z2
        if "-1" in kinds and s4.z8 is not None and s4.z8_centre is not None:
            z8 = used["z8"] = s4.z8
    if parity is not None and parity.status == "ok" and parity.z2 is not None and "-1" in kinds:
        nu_0, nu_1, nu_2, nu_3 = parity.z2
        strong, weak, source = nu_0, (nu_1, nu_2, nu_3), "parities, kappa modulo 2"
        used |= {"z2w1": nu_1, "z2w2": nu_2, "z2w3": nu_3}
        if parity.z4 is not None:
            z4 = used["z4"] = parity.z4
    planes, named = _plane_residues(findings, kinds)
    values = IndicatorValues(
        strong=strong,
        weak=weak,
        strong_from=source,
        z4=z4,
        centre=None if parity is None else parity.centre,
        z8=z8,
        z8_centre=None if s4 is None else s4.z8_centre,
        z8_axis=None if s4 is None or not s4.axes else s4.axes[0].axis_cart,
        planes=planes,
    )
    return values, used | named


def _plane_residues(
    findings: Findings, kinds: tuple[str, ...]
) -> tuple[tuple[PlaneResidue, ...], dict[str, int]]:
    """Mirror Chern numbers modulo n of axes whose rotation is in use."""
    found, named = [], {}
    for indicator in findings.mirror_indicators:
        if indicator.mirror_chern is None or str(indicator.n) not in kinds:
            continue
        row, offset = plane_key(indicator.plane)
        found.append(
            PlaneResidue(
                row=row,
                half=offset > 0,
                axis_cart=indicator.axis_cart,
                through=indicator.through,
                n=indicator.n,
                value=indicator.mirror_chern,
            )
        )
        place = "k=G/2" if offset > 0 else "k=0"
        axis = " ".join(f"{c:.3g}" for c in indicator.axis_cart)
        named[f"z{indicator.n}m {place} about [{axis}]"] = indicator.mirror_chern
    return tuple(found), named


def _numbers(findings: Findings, listed: AllowedInvariants) -> list[MirrorPlane]:
    """Planes with a counted number that the list speaks of."""
    if findings.mirror is None:
        return []
    known = {name for name, _ in listed.planes}
    return [p for p in findings.mirror.planes if p.number is not None and p.name in known]


def outside_the_list(findings: Findings) -> tuple[str, ...]:
    """Planes whose mirror Chern numbers the indicators do not allow, alone or together."""
    found = allowed_findings(findings)
    if isinstance(found, str):
        return ()
    if found.together and findings.mirror is not None:
        return tuple(findings.mirror.numbers)
    return tuple(p.name for p in found.outside)


def list_flags(findings: Findings) -> Iterator[Flag]:
    """A flag for numbers outside the list; where others accuse the numbers it would add nothing."""
    found = allowed_findings(findings)
    if isinstance(found, str):
        return
    allowed = dict(found.by_indicators.planes)
    if found.outside:
        said = ", ".join(
            f"{p.name}: {p.number}, allowed {residue_text(allowed[p.name])}" for p in found.outside
        )
        yield _flag(
            f"mirror Chern numbers are not among those that indicators allow: {said}.",
            found.outside,
        )
    elif found.together:
        planes = _numbers(findings, found.by_indicators)
        said = ", ".join(f"{p.name}: {p.number}" for p in planes)
        yield _flag(
            f"mirror Chern numbers do not fit the indicators together, though each does: {said}.",
            planes,
        )


def _flag(summary: str, planes: list[MirrorPlane] | tuple[MirrorPlane, ...]) -> Flag:
    return Flag(
        "witnesses-disagree",
        "error",
        summary,
        {p.name: p.number for p in planes},
        "A gap that closes on a mirror plane, or eigenvalues read with the wrong operators; the "
        "other flags name what breaks the ground of one of them.",
    )


def residue_text(values: AllowedValues) -> str:
    """ "0", "2 modulo 4", "1 or 3 modulo 8", "any integer"."""
    if not values.allowed:
        return "any integer"
    shown = " or ".join(str(v) for v in values.allowed)
    return shown if values.modulus is None else f"{shown} modulo {values.modulus}"


def allowed_entry(findings: Findings, z2: tuple[int, ...] | None) -> dict[str, Any]:
    """The list as the verdict's document has it.

    Parameters
    ----------
    findings
        Results of all steps.
    z2
        The indices that the witnesses agree on.
    """
    found = allowed_findings(findings)
    if isinstance(found, str):
        return {"status": "not-applicable", "reason": found}
    listed, numbers = found.by_indicators, found.with_numbers
    counted = {} if findings.mirror is None else findings.mirror.numbers
    return {
        "status": listed.status,
        "reason": listed.reason,
        "group": found.group,
        "indicators": dict(found.used),
        "invariants": [
            _invariant(a, _with_parities(b, findings), _found(a, z2, counted))
            for a, b in zip(listed.invariants, numbers.invariants, strict=True)
        ],
        "combinations": [[_values(v) for v in combination] for combination in listed.combinations],
        "fits_mirror_numbers": [_compatible(c, numbers) for c in listed.combinations],
        "outside": list(outside_the_list(findings)),
    }


def _compatible(combination: tuple[AllowedValues, ...], numbers: AllowedInvariants) -> bool:
    """Whether a combination is left once mirror Chern numbers are known."""
    left = numbers.combinations or (tuple(i.values for i in numbers.invariants),)
    return any(
        all(_within(a, b) for a, b in zip(narrow, combination, strict=True)) for narrow in left
    )


def _within(narrow: AllowedValues, wide: AllowedValues) -> bool:
    """Whether every value of one set is in another."""
    if not wide.allowed:
        return True
    if wide.modulus is None or narrow.modulus is None:
        return set(narrow.allowed) <= set(wide.allowed) and wide.modulus == narrow.modulus
    return narrow.modulus % wide.modulus == 0 and all(
        v % wide.modulus in wide.allowed for v in narrow.allowed if isinstance(v, int)
    )


def _invariant(
    listed: AllowedInvariant, narrowed: AllowedValues, found: int | list[int] | None
) -> dict[str, Any]:
    if isinstance(found, int) and listed.kind in (MIRROR, LAYERS):
        narrowed = AllowedValues(FIXED, (found,))
    return {
        "invariant": listed.kind,
        "operation": listed.operation,
        "planes": list(listed.planes),
        **_values(listed.values),
        "source": listed.source,
        "found": found,
        "with_mirror_numbers": _values(narrowed),
    }


def _with_parities(invariant: AllowedInvariant, findings: Findings) -> AllowedValues:
    """Z2 indices that indicators leave open, with those that odd and even numbers fix."""
    values = invariant.values
    if findings.mirror is None or values.status != OPEN or invariant.kind not in (STRONG, WEAK):
        return values
    strong, *weak = findings.mirror.z2(3)
    if invariant.kind == STRONG:
        return values if strong is None else AllowedValues(FIXED, (strong,))
    left = tuple(
        nu
        for nu in values.allowed
        if isinstance(nu, tuple) and all(w is None or w == n for w, n in zip(weak, nu, strict=True))
    )
    return AllowedValues(FIXED if len(left) == 1 else OPEN, left) if left else values


def _values(values: AllowedValues) -> dict[str, Any]:
    allowed = [list(v) if isinstance(v, tuple) else v for v in values.allowed]
    return {"status": values.status, "allowed": allowed or None, "modulus": values.modulus}


def _found(
    invariant: AllowedInvariant, z2: tuple[int, ...] | None, counted: Mapping[str, int]
) -> int | list[int] | None:
    """What was found: by the witnesses that agree, or by counting on the plane itself."""
    if invariant.kind == STRONG:
        return None if z2 is None else z2[0]
    if invariant.kind == WEAK:
        return None if z2 is None else list(z2[1:])
    if invariant.kind == MIRROR:
        return counted.get(invariant.planes[0])
    if invariant.kind == LAYERS:
        both = [counted.get(f"{invariant.operation} {place}") for place in ("k=0", "k=G/2")]
        at_0, at_half = both
        return None if at_0 is None or at_half is None else (at_0 + at_half) // 2
    return None
