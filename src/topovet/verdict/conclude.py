"""From the witnesses to what the verdict stands behind: invariants, agreement, class."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from topovet.invariants.results import ChernWitness, ParityWitness, WilsonWitness
from topovet.verdict.agreement import Agreement, Statement, weigh
from topovet.verdict.document import InvariantsEntry
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag


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
    if not findings.kramers:
        return _without_kramers(findings)
    if agreement.z2 is None:
        return _undetermined(agreement.word, _silence(findings))
    parity = findings.parity if _speaks(findings.parity) else None
    z4 = None if parity is None else parity.z4
    class_, grounds = _class_from_indices(findings, agreement.z2, parity)
    indicators = {} if z4 is None else {"z4": z4}
    indicators |= _s4_indicators(findings)
    invariants = InvariantsEntry(z2=agreement.z2, z4=z4, indicators=indicators)
    return Conclusion(invariants, agreement.word, class_, grounds)


def weigh_witnesses(findings: Findings) -> Agreement:
    """The Z2 indices of all witnesses that speak, side by side."""
    return weigh(witness_statements(findings))


def witness_statements(findings: Findings) -> list[Statement]:
    """What each witness that speaks says of Z2; S4 knows the strong index alone."""
    named = (("parity", findings.parity), ("Wilson loops", findings.wilson))
    statements = [
        Statement(name, witness.z2)
        for name, witness in named
        if witness is not None and witness.status == "ok" and witness.z2 is not None
    ]
    s4 = findings.s4
    if s4 is not None and s4.status == "ok" and s4.z2 is not None:
        statements.append(Statement("S4 eigenvalues", (s4.z2, None, None, None)))
    return statements


def _s4_indicators(findings: Findings) -> dict[str, int]:
    s4 = findings.s4
    if s4 is None or s4.status != "ok" or s4.kappa is None:
        return {}
    found = {"s4": s4.kappa % 2}
    return found if s4.z8 is None else {**found, "z8": s4.z8}


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
    findings: Findings, z2: tuple[int, ...], parity: ParityWitness | None
) -> tuple[str, tuple[str, ...]]:
    strong, weak = z2[0], z2[1:]
    if strong:
        return "strong-ti", ("the strong Z2 index is 1",)
    if any(weak):
        centre = "kappa depends on the inversion centre here and is quoted for the one stated"
        grounds = ("the strong Z2 index is 0, weak ones are not",)
        return "weak-ti", grounds if parity is None else (*grounds, centre)
    if parity is not None and parity.z4 == 2:
        return "higher-order", (
            "all Z2 indices are 0 and kappa = 2: hinge states protected by inversion, or surface "
            "states protected by a mirror or rotation; parities alone do not tell which",
        )
    seen = "all Z2 indices are 0" if parity is None else "all indices that parities can see are 0"
    if findings.declared.crystal.dimension == 3:
        return "trivial", (seen, "mirror and rotation invariants were not tested")
    return "trivial", (seen,)


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
    invariants = InvariantsEntry(
        indicators={} if eta4 is None else {"eta4": eta4}, chern=_chern_entry(values)
    )
    voices = (parity is not None) + (chern is not None)
    word = ("undetermined", "one-witness", "agree")[voices]
    return Conclusion(invariants, word, class_, tuple(grounds))


def _chern_entry(values: tuple[int, ...] | None) -> int | tuple[int, int, int] | None:
    if values is None:
        return None
    if len(values) == 1:
        return values[0]
    c_1, c_2, c_3 = values
    return c_1, c_2, c_3
