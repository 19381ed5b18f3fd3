"""What the comparison of declared orbitals with the Hamiltonian finds: evidence, no verdict."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray, frozen
from topovet.symmetry.centre_search import CentreTrial
from topovet.symmetry.declaration_trials import Reading
from topovet.symmetry.inference import InferredInversion

AGREES = 0.5
"""Overlap of the declared with the inferred image of a function above which they agree."""


@dataclass(frozen=True, slots=True)
class OperatorFit:
    """How well an inversion operator fits: spectral norm of P H(k) P^-1 - H(-k), meV.

    Attributes
    ----------
    trim_mev, generic_mev
        Largest over the TRIM and over generic k; None where there is no operator.
    reason
        Why there is none; empty otherwise.
    """

    trim_mev: float | None
    generic_mev: float | None
    reason: str = ""

    @property
    def worst_mev(self) -> float:
        """The larger of the two, infinite without an operator."""
        if self.trim_mev is None or self.generic_mev is None:
            return float("inf")
        return max(self.trim_mev, self.generic_mev)


@dataclass(frozen=True, slots=True)
class FunctionAgreement:
    """Declared against inferred for one Wannier function.

    Attributes
    ----------
    function
        Counted from 0.
    label
        As declared.
    overlap
        Inner product of its declared and its inferred image, with the overall sign that suits
        most functions: 1 agree, -1 opposite parity, 0 sent to something else; None where either
        operator is missing.
    site_offset_ang
        Distance of the declared position from the site its centre is on, modulo the lattice.
    on_declared_site
        Whether that is the site it is declared on.
    """

    function: int
    label: str
    overlap: float | None
    site_offset_ang: float
    on_declared_site: bool

    @property
    def agrees(self) -> bool:
        """Same site, and the same image as far as that is known."""
        return self.on_declared_site and (self.overlap is None or self.overlap > AGREES)


@dataclass(frozen=True, slots=True, eq=False)
class Correction:
    """A changed reading of the declaration that mends the residual.

    Attributes
    ----------
    reading
        What is changed.
    centre_frac
        Inversion centre with it.
    fit
        Residual after the change; `DeclarationCheck.declared` is the one before.
    n_changed
        Wannier functions whose declaration it changes; where two readings fit alike, the one that
        changes less comes first.
    """

    reading: Reading
    centre_frac: tuple[float, float, float]
    fit: OperatorFit
    n_changed: int


@dataclass(frozen=True, slots=True, eq=False)
class DeclarationCheck:
    """Declared inversion against inferred.

    Attributes
    ----------
    centre_frac
        (3,) centre of both.
    declared
        Fit of the operator built from the declared orbitals.
    inferred_fit
        Fit of the inferred operator.
    inferred
        The inference itself.
    functions
        One entry for each Wannier function.
    corrections
        Readings that lower the declared residual at least tenfold, the best first.
    centres
        Inference about every point that the sites allow.
    shift_frac
        Common shift of the sites against the declared positions; None where there is none.
    rehomed
        Functions that were taken from another cell than declared, because the hoppings say so.
    """

    centre_frac: FloatArray
    declared: OperatorFit
    inferred_fit: OperatorFit
    inferred: InferredInversion
    functions: tuple[FunctionAgreement, ...]
    corrections: tuple[Correction, ...]
    centres: tuple[CentreTrial, ...]
    shift_frac: FloatArray | None
    rehomed: tuple[int, ...] = ()

    def __post_init__(self) -> None:
        object.__setattr__(self, "centre_frac", frozen(self.centre_frac))

    @property
    def disagreeing(self) -> tuple[int, ...]:
        """Functions on which declaration and Hamiltonian disagree, from 0."""
        return tuple(f.function for f in self.functions if not f.agrees)
