"""The merit of a vetted case: points for what speaks for it, each with its words.

The merit orders cases within a tier and never across tiers; see `topovet.screening.ranking`. Every
number stands in the rules (`merit.toml`); nothing here is a probability.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

from topovet.notation import mev, significant
from topovet.report.handling import handling_cautions
from topovet.report.shortlist.records import Candidate, Part, RuleTable
from topovet.screening.merit_rules import MeritRules
from topovet.units import KT_ROOM_MEV, MEV_PER_EV


class _Value(NamedTuple):
    value: float | None
    words: str


def merit_parts(candidate: Candidate, rules: MeritRules) -> tuple[Part, ...]:
    """The parts of the merit of one case, in the order of the weights.

    Parameters
    ----------
    candidate
        A case with a verdict that stands.
    rules
        Weights, values and scales.
    """
    return tuple(
        _part(name, weight, _VALUES[name](candidate, rules))
        for name, weight in rules.weights.items()
    )


def _part(name: str, weight: float, found: _Value) -> Part:
    return Part(name, found.value, weight * (found.value or 0.0), weight, found.words)


def limiting_gap(candidate: Candidate) -> tuple[float, str, bool] | None:
    """The gap that counts: (meV, "direct" or "indirect", whether it is proved), None if unknown.

    The indirect gap is the one of the bulk as a conductor; the direct one, at its proved bound
    where there is one, protects the index and can be the smaller of the two only through that
    bound.
    """
    gaps = candidate.gaps
    proved = gaps.proved_ev is not None
    direct = gaps.proved_ev if proved else gaps.direct_ev
    known = [
        (value * MEV_PER_EV, name, is_proved)
        for value, name, is_proved in (
            (gaps.indirect_ev, "indirect", False),
            (direct, "direct", proved),
        )
        if value is not None
    ]
    return min(known, default=None)


def cautioned_elements(candidate: Candidate) -> tuple[str, ...]:
    """Elements of the formula that carry a handling caution."""
    return tuple(symbol for symbol in candidate.elements or () if handling_cautions([symbol]))


def _class(candidate: Candidate, rules: MeritRules) -> _Value:
    return _Value(rules.tables["class"][candidate.class_], candidate.title.lower())


def _agreement(candidate: Candidate, rules: MeritRules) -> _Value:
    words = {"agree": "independent witnesses agree", "one-witness": "one witness speaks"}
    value = rules.tables["agreement"].get(candidate.agreement, 0.0)
    return _Value(value, words.get(candidate.agreement, "no witness speaks"))


def _grade(candidate: Candidate, rules: MeritRules) -> _Value:
    return _Value(rules.tables["grade"][candidate.grade], f"grade {candidate.grade}")


def _gap(candidate: Candidate, rules: MeritRules) -> _Value:
    found = limiting_gap(candidate)
    if found is None:
        return _Value(None, "gap not computed")
    gap, kind, proved = found
    if gap <= 0:
        overlap = f"bands overlap by {mev(-gap)}" if kind == "indirect" else "no direct gap"
        return _Value(0.0, f"{overlap}: the bulk conducts")
    table = rules.tables["gap"]
    share = min(1.0, gap / KT_ROOM_MEV / table["full_kT"])
    how = "proved" if proved else "sampled, not proved"
    words = f"{kind} gap {mev(gap)} ({how}), {significant(gap / KT_ROOM_MEV, 2)} kT at 300 K"
    return _Value(share if proved else share * table["sampled"], words)


def _tipping(candidate: Candidate, rules: MeritRules) -> _Value:
    distance = candidate.tipping_mev
    if distance is None:
        return _Value(None, "tipping distance not measured")
    share = min(1.0, abs(distance) / rules.tables["tipping"]["full_meV"])
    return _Value(share, f"nearest tipping point {mev(abs(distance))} away")


def _exposure(candidate: Candidate, rules: MeritRules) -> _Value:
    distance = candidate.exposure_mev
    if distance is None:
        return _Value(None, "Dirac point exposure not measured")
    if distance <= 0:
        return _Value(0.0, f"Dirac point buried {mev(-distance)} deep in bulk bands")
    share = min(1.0, distance / KT_ROOM_MEV / rules.tables["exposure"]["full_kT"])
    return _Value(share, f"Dirac point {mev(distance)} from the nearest bulk band")


def _handling(candidate: Candidate, rules: MeritRules) -> _Value:
    if candidate.elements is None:
        return _Value(None, "formula not readable, so handling cautions are not known")
    found = cautioned_elements(candidate)
    if not found:
        return _Value(1.0, "no element on the list of handling cautions (not a clearance)")
    factor: float = rules.tables["handling"]["per_element"] ** len(found)
    return _Value(factor, f"handling cautions for {', '.join(found)}")


_VALUES: dict[str, Callable[[Candidate, MeritRules], _Value]] = {
    "class": _class,
    "agreement": _agreement,
    "grade": _grade,
    "gap": _gap,
    "tipping": _tipping,
    "exposure": _exposure,
    "handling": _handling,
}

PARTS = tuple(_VALUES)
"""Parts of the merit, as keys of [weights]."""


def rule_table(rules: MeritRules) -> RuleTable:
    """The rules with a sentence for each part."""
    gap, handling = rules.tables["gap"], rules.tables["handling"]
    explained = {
        "class": "the value of the class, from the table of classes",
        "agreement": "whether independent witnesses agree or one speaks alone",
        "grade": "the confidence grade of the verdict",
        "gap": "the indirect gap, or the direct one (its proved bound where there is one) if that "
        f"is smaller; in full from {gap['full_kT']:g} kT at 300 K ({KT_ROOM_MEV:.2f} meV), times "
        f"{gap['sampled']:g} where it is only sampled; 0 where bands overlap",
        "tipping": "distance to the nearest change of the Hamiltonian that flips the verdict; in "
        f"full from {rules.tables['tipping']['full_meV']:g} meV",
        "exposure": "distance of the Dirac point from the nearest bulk band; in full from "
        f"{rules.tables['exposure']['full_kT']:g} kT at 300 K, 0 where it is buried",
        "handling": f"1, times {handling['per_element']:g} for each element with a handling "
        "caution; a matter of convenience, never of safety",
    }
    return RuleTable(
        rules.source,
        dict(rules.weights),
        tuple((name, explained[name]) for name in rules.weights),
        {name: dict(table) for name, table in rules.tables.items()},
    )
