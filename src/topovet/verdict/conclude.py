"""From the witnesses to what the verdict stands behind: invariants, agreement, class."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from topovet.invariants.results import ParityWitness
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
    parity = findings.parity
    speaks = parity is not None and parity.status == "ok"
    errors = [flag.code for flag in flags if flag.severity == "error"]
    if errors:
        return _undetermined(speaks, "flags of severity error: " + ", ".join(errors))
    if parity is None or not speaks:
        return _undetermined(False, _silence(findings))
    if findings.gap is None:
        return _undetermined(True, f"the gap is not known ({findings.missing.get('gap', '')})")
    if not findings.kramers:
        return _without_kramers(findings, parity)
    class_, grounds = _class_from_indices(findings, parity)
    indicators = {} if parity.z4 is None else {"z4": parity.z4}
    invariants = InvariantsEntry(z2=parity.z2, z4=parity.z4, indicators=indicators)
    return Conclusion(invariants, "one-witness", class_, grounds)


def _undetermined(one_speaks: bool, why: str) -> Conclusion:
    agreement = "one-witness" if one_speaks else "undetermined"
    return Conclusion(InvariantsEntry(), agreement, "undetermined", (why,))


def _silence(findings: Findings) -> str:
    """Why the only witness of this version does not speak."""
    if findings.parity is not None:
        return f"parity: {findings.parity.reason}"
    return f"parity: {findings.missing.get('parity') or findings.inversion.reason}"


def _class_from_indices(findings: Findings, parity: ParityWitness) -> tuple[str, tuple[str, ...]]:
    assert parity.z2 is not None
    strong, weak = parity.z2[0], parity.z2[1:]
    if strong:
        return "strong-ti", ("the strong Z2 index is 1",)
    if any(weak):
        return "weak-ti", (
            "the strong Z2 index is 0, weak ones are not",
            "kappa depends on the inversion centre here and is quoted for the one stated",
        )
    if parity.z4 == 2:
        return "higher-order", (
            "all Z2 indices are 0 and kappa = 2: hinge states protected by inversion, or surface "
            "states protected by a mirror or rotation; parities alone do not tell which",
        )
    dimension = findings.declared.crystal.dimension
    unseen = "mirror and rotation invariants were not tested" if dimension == 3 else ""
    return "trivial", ("all indices that parities can see are 0", *((unseen,) if unseen else ()))


def _without_kramers(findings: Findings, parity: ParityWitness) -> Conclusion:
    """No Z2: the inversion indicator alone is stated, never a class it only hints at."""
    indicators = {} if parity.eta4 is None else {"eta4": parity.eta4}
    why = (
        "the Hamiltonian is spinless"
        if not findings.spinful
        else "the Hamiltonian breaks time reversal"
    )
    grounds = [f"{why}, so Z2 indices do not exist"]
    if parity.eta4 is not None and parity.eta4 % 2:
        grounds.append(
            f"eta = {parity.eta4} mod 4 is odd: the occupied bands cannot be gapped everywhere"
        )
    elif parity.eta4 == 2 and findings.spinful:
        grounds.append("eta = 2 mod 4: axion candidate if all Chern numbers vanish (not tested)")
    return Conclusion(
        InvariantsEntry(indicators=indicators), "one-witness", "undetermined", tuple(grounds)
    )
