"""From the witnesses to what the verdict stands behind: invariants, agreement, class."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from topovet.invariants.results import ChernWitness, ParityWitness, WilsonWitness
from topovet.verdict.agreement import Agreement, Statement, weigh
from topovet.verdict.allowed import outside_the_list
from topovet.verdict.crystalline import class_without_z2, indicator_values, mirror_numbers
from topovet.verdict.document import InvariantsEntry
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.semimetal import conclude_nodes


@dataclass(frozen=True, slots=True)
class Conclusion:
    """What is asserted.

    Attributes
    ----------
    invariants
        Only what no working witness contradicts and no error flag puts in doubt.
    agreement
        "agree", "disagree", "one-witness" or "undetermined".
    class_
        One of the classes of the schema.
    grounds
        Why this class and no stronger one, one clause each.
    """

    invariants: InvariantsEntry
    agreement: str
    class_: str
    grounds: tuple[str, ...]


def conclude(findings: Findings, flags: Sequence[Flag]) -> Conclusion:
    """Draw the conclusion; an error flag leaves everything undetermined.

    Parameters
    ----------
    findings
        Results of all steps.
    flags
        All flags that were raised.
    """
    agreement = weigh_witnesses(findings)
    errors = list(dict.fromkeys(flag.code for flag in flags if flag.severity == "error"))
    if errors:
        return _undetermined(agreement.word, "flags of severity error: " + ", ".join(errors))
    if findings.gap is None:
        why = f"the gap is not known ({findings.missing.get('gap', '')})"
        return _undetermined(agreement.word, why)
    if findings.gap.status == "gapless":
        found = conclude_nodes(findings)
        word = "one-witness" if found.class_ else "undetermined"
        return Conclusion(InvariantsEntry(), word, found.class_ or "undetermined", found.grounds)
    if not findings.kramers:
        return _without_kramers(findings)
    if agreement.z2 is None:
        return _undetermined(agreement.word, _silence(findings))
    parity = findings.parity if _speaks(findings.parity) else None
    z4 = None if parity is None else parity.z4
    indicators = indicator_values(findings)
    class_, grounds = _class_from_indices(findings, agreement.z2, parity, indicators)
    invariants = InvariantsEntry(
        z2=agreement.z2, z4=z4, indicators=indicators, mirror_chern=mirror_numbers(findings)
    )
    return Conclusion(invariants, agreement.word, class_, grounds)


def weigh_witnesses(findings: Findings) -> Agreement:
    """The Z2 indices of all witnesses that speak, side by side."""
    agreement = weigh(witness_statements(findings))
    mirror = findings.mirror
    if agreement.z2 is not None and mirror is not None and mirror.contradicts(agreement.z2):
        return Agreement("disagree", None, ("mirror planes",))
    if agreement.z2 is not None and outside_the_list(findings):
        return Agreement("disagree", None, ("mirror planes",))
    return agreement


def witness_statements(findings: Findings) -> list[Statement]:
    """What each witness that speaks says of Z2.

    S4 knows the strong index alone, a surface that and some of the weak ones, mirror Chern numbers
    the sums of indices on their planes.
    """
    named = (("parity", findings.parity), ("Wilson loops", findings.wilson))
    statements = [
        Statement(name, witness.z2)
        for name, witness in named
        if witness is not None and witness.status == "ok" and witness.z2 is not None
    ]
    s4 = findings.s4
    if s4 is not None and s4.status == "ok" and s4.z2 is not None:
        statements.append(Statement("S4 eigenvalues", (s4.z2, None, None, None)))
    if (from_levels := _band_representations(findings, statements)) is not None:
        statements.append(from_levels)
    surface = findings.surface
    if surface is not None and surface.status == "ok" and surface.z2 is not None:
        statements.append(Statement("surface states", surface.z2))
    if findings.mirror is not None:
        z2 = findings.mirror.z2(findings.declared.crystal.dimension)
        if any(value is not None for value in z2):
            statements.append(Statement("mirror Chern numbers", z2))
    return statements


def _band_representations(findings: Findings, said: Sequence[Statement]) -> Statement | None:
    """What the levels at the maximal k strata fix; parities and S4 eigenvalues are among them."""
    levels, gap = findings.band_reps, findings.gap
    if levels is None or levels.status != "ok" or gap is None or gap.status == "gapless":
        return None
    z2 = levels.occupied.z2
    if all(value is None for value in z2):
        return None
    related = any(s.witness in ("parity", "S4 eigenvalues") for s in said)
    return Statement("band representations", z2, independent=not related)


def _speaks(witness: ParityWitness | WilsonWitness | ChernWitness | None) -> bool:
    return witness is not None and witness.status == "ok"


def _undetermined(agreement: str, why: str) -> Conclusion:
    return Conclusion(InvariantsEntry(), agreement, "undetermined", (why,))


def _silence(findings: Findings) -> str:
    """Why no witness speaks."""
    parity = findings.missing.get("parity") or findings.inversion.reason
    if findings.parity is not None:
        parity = findings.parity.reason
    wilson = findings.missing.get("wilson", "not tested")
    if findings.wilson is not None:
        wilson = findings.wilson.reason
    return f"parity: {parity}; Wilson loops: {wilson}"


def _class_from_indices(
    findings: Findings,
    z2: tuple[int, ...],
    parity: ParityWitness | None,
    indicators: Mapping[str, int],
) -> tuple[str, tuple[str, ...]]:
    strong, weak = z2[0], z2[1:]
    if strong:
        return "strong-ti", ("the strong Z2 index is 1",)
    if any(weak):
        centre = "kappa depends on the inversion centre here and is quoted for the one stated"
        grounds = ("the strong Z2 index is 0, weak ones are not",)
        return "weak-ti", grounds if parity is None else (*grounds, centre)
    return class_without_z2(findings, indicators)


def _without_kramers(findings: Findings) -> Conclusion:
    """No Z2: Chern numbers, and the inversion indicator without the phases it only hints at."""
    parity = findings.parity if _speaks(findings.parity) else None
    chern = findings.chern if _speaks(findings.chern) else None
    eta4 = None if parity is None else parity.eta4
    why = (
        "the Hamiltonian is spinless"
        if not findings.spinful
        else "the Hamiltonian breaks time reversal"
    )
    grounds = [f"{why}, so Z2 indices do not exist"]
    class_, values = "undetermined", None if chern is None else chern.chern
    if values is not None and any(values):
        class_ = "chern"
        grounds.append("a Chern number is not 0")
    elif values is not None:
        grounds.append("all Chern numbers are 0")
    if eta4 is not None and eta4 % 2:
        grounds.append(f"eta = {eta4} mod 4 is odd: the occupied bands cannot be gapped everywhere")
        class_, values = "undetermined", None
    elif eta4 == 2 and findings.spinful:
        if class_ == "undetermined" and values is not None:
            class_ = "axion-candidate"
        grounds.append("eta = 2 mod 4: an axion candidate where all Chern numbers vanish")
    elif class_ == "undetermined" and values is not None and findings.spinful:
        # a topological insulator whose time reversal a field or noise breaks has these values too
        grounds.append("what broken time reversal leaves of a Z2 phase was not tested")
    if findings.chern is not None and chern is None:
        grounds.append(f"Chern numbers: {findings.chern.reason}")
    edge = None if findings.surface is None else findings.surface.chern
    invariants = InvariantsEntry(
        indicators={} if eta4 is None else {"eta4": eta4}, chern=_chern_entry(values)
    )
    voices = (parity is not None) + (chern is not None) + (edge is not None)
    word = ("undetermined", "one-witness", "agree", "agree")[voices]
    return Conclusion(invariants, word, class_, tuple(grounds))


def _chern_entry(values: tuple[int, ...] | None) -> int | tuple[int, int, int] | None:
    if values is None:
        return None
    if len(values) == 1:
        return values[0]
    c_1, c_2, c_3 = values
    return c_1, c_2, c_3
