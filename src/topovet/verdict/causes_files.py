"""Causes that lie in the files: what is damaged, missing, or told for another case."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from topovet.notation import mev
from topovet.verdict.flags import Flag
from topovet.verdict.inquiry import Cause, Inquiry


@dataclass(frozen=True, slots=True)
class _Measured:
    """A cause whose flag carries its measurement.

    Attributes
    ----------
    cause
        The flag code.
    test
        What is measured.
    sound
        What is said where there is no such flag.
    size
        Evidence that is set against the robustness radius; "" where there is none.
    certain
        Whether the flag settles the question, however severe it is.
    """

    cause: str
    test: str
    sound: str
    size: str = ""
    certain: bool = False


MEASURED = (
    _Measured(
        "not-hermitian",
        "H(-R) is compared with the adjoint of H(R), block by block.",
        "they agree to {hermiticity}.",
        "violation_meV",
    ),
    _Measured("duplicate-r", "R vectors are looked for that are listed twice.", "there are none."),
    _Measured(
        "missing-partner-r",
        "R vectors are looked for that are listed without -R.",
        "there are none.",
        "largest_meV",
    ),
    _Measured(
        "cell-mismatch",
        "cell and atoms of the structure file are compared with those of the .win file.",
        "no difference was found.",
        certain=True,
    ),
    _Measured(
        "spin-order-mismatch",
        "time reversal is tested with spin interlaced, in blocks, pair by pair, and without spin.",
        "none is better than the declared order.",
    ),
    _Measured(
        "no-spin-orbit",
        "the spin-dependent part of H is measured.",
        "it is there.",
        certain=True,
    ),
)


def file_causes(inquiry: Inquiry) -> Iterator[Cause]:
    """Damage, cell, spin, centres and range."""
    for measured in MEASURED:
        yield _from_flag(measured, inquiry)
    yield from _centres(inquiry)
    yield _range(inquiry)


def _from_flag(measured: _Measured, inquiry: Inquiry) -> Cause:
    flag = inquiry.flag(measured.cause)
    if flag is None:
        hermiticity = mev(inquiry.findings.audit.hermiticity_mev)
        finding = measured.sound.format(hermiticity=hermiticity)
        return Cause(measured.cause, "no", measured.test, finding, {})
    answer = "yes" if flag.severity == "error" or measured.certain else "open"
    size, radius = flag.evidence.get(measured.size), inquiry.radius_mev
    finding = flag.summary
    if answer == "open" and isinstance(size, int | float) and radius is not None:
        answer = "yes" if size >= radius else "no"
        relation = "above" if answer == "yes" else "below"
        finding += f" That is {relation} the robustness radius of {mev(radius)}."
    return Cause(measured.cause, answer, measured.test, finding, flag.evidence, flag.advice)


def _centres(inquiry: Inquiry) -> Iterator[Cause]:
    shift_test, flag = inquiry.findings.shift_test, inquiry.flag("centres-off")
    test = "Wannier centres are compared with the declared sites, modulo the supercell."
    if shift_test is None or not inquiry.findings.declared.orbitals:
        return
    if flag is None:
        yield Cause("centres-off", "no", test, "none is off.", {})
        return
    mended = shift_test.adopted == "mended"
    yield Cause(
        "centres-off",
        "no" if mended else "open",
        test,
        flag.summary + (" What follows rests on the mended reading." if mended else ""),
        flag.evidence,
        flag.advice,
        inquiry.reading("bare"),
    )


OF_THE_RIM = frozenset({"inside-error-bar"})
"""What a range that ends too early brings about: it is no matter of how this file is read, so that
energies on the mesh and Wannier90's own interpolation are met all the same."""


def _range(inquiry: Inquiry) -> Cause:
    """Cut files by their flag; the range of the run by what its outermost hoppings decide."""
    flag = inquiry.flag("range-truncated")
    test = "the R list is counted against the mesh, and the outermost hoppings are left out."
    if flag is not None and flag.severity == "error":
        return Cause("range-truncated", "yes", test, flag.summary, flag.evidence, flag.advice)
    answer, finding, evidence = _outermost(inquiry, flag)
    advice = "" if flag is None else flag.advice
    return Cause("range-truncated", answer, test, finding, evidence, advice, explains=OF_THE_RIM)


def _outermost(inquiry: Inquiry, flag: Flag | None) -> tuple[str, str, dict[str, Any]]:
    """Answer, finding and evidence on what the longest hoppings decide."""
    shorter, radius = inquiry.reading("shorter-range"), inquiry.radius_mev
    fills_bar = inquiry.is_largest_error("range")
    answer = "no" if flag is None else "yes" if fills_bar else "open"
    said = "" if flag is None else flag.summary + " "
    evidence: dict[str, Any] = {"rim_meV": inquiry.findings.decay.rim_mev}
    if shorter is None or shorter.moved_mev is None:
        finding = said or "the list is whole, and its longest hoppings were not put to the test."
        return answer, finding.rstrip(), evidence
    evidence |= {"moved_meV": shorter.moved_mev, "z2_if_shorter": shorter.z2}
    finding = f"{said}{shorter.change}, bands move by up to {mev(shorter.moved_mev)}"
    if radius is not None and shorter.moved_mev < radius:
        finding += f", less than the radius of {mev(radius)}"
        finding += "; it is the largest of the known errors all the same." if fills_bar else "."
        return answer if fills_bar else "no", finding, evidence
    finding += ": the verdict rests on hoppings near the end of the range."
    return "yes" if answer == "yes" else "open", finding, evidence
