"""What a fault is, and the small tools that faults are made of."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from clean_cases import CleanCase

Apply = Callable[[Path, float], None]

CLEAN = "clean"
"""The fault is one of description or of the file: the answer of the clean case stays the right one,
and no other may be given."""

CHANGED = "changed"
"""The fault makes another Hamiltonian, and nothing in the folder says so: the right answer is that
of what now lies there."""


AS_STATED = "as-stated"
"""The fault states another filling and nothing contradicts it: the right answer is that of the
filling that was taken, the clean one where it is the same."""


HAMILTONIAN_DECIDES = (
    "spin-order-mismatch",
    "orbital-declaration-wrong",
    "filling-off",
    "inside-error-bar",
    "noise",
)
"""Faults of description that only the Hamiltonian can tell."""


def everywhere(case: CleanCase) -> bool:
    return True


def in_real(case: CleanCase) -> bool:
    return case.real


def in_models(case: CleanCase) -> bool:
    return not case.real


@dataclass(frozen=True, slots=True)
class Fault:
    """One way to spoil a case.

    Attributes
    ----------
    code
        The flag this fault is the cause of; "none" for changes that leave the case sound.
    name
        Kebab-case, unique.
    sizes
        From harmless to fatal; `unit` says what they count.
    unit
        Of the sizes.
    apply
        Spoils a case folder in place.
    expected
        Flags that name the right cause when they stand on top.
    truth
        `CLEAN`, `CHANGED` or `AS_STATED`.
    truth_in_models
        The same for models where it differs: a model has no `.eig` file that would betray a
        Hamiltonian that was changed.
    suits
        Cases in which it can be done.
    """

    code: str
    name: str
    sizes: tuple[float, ...]
    unit: str
    apply: Apply
    expected: frozenset[str]
    truth: str = CLEAN
    truth_in_models: str | None = None
    suits: Callable[[CleanCase], bool] = everywhere

    def sizes_for(self, case: CleanCase) -> tuple[float, ...]:
        """Sizes to try on a case: all, or of large cases every second one and the largest."""
        if not self.suits(case) or not (case.thorough or self._meets_hamiltonian()):
            return ()
        return self.sizes[::-1][::2][::-1] if case.large else self.sizes

    @property
    def only_real(self) -> bool:
        """Needs what only a first-principles run leaves: shifts, centres, energies."""
        return self.suits in (in_real,)

    def _meets_hamiltonian(self) -> bool:
        return self.truth != CLEAN or self.code in HAMILTONIAN_DECIDES

    def truth_for(self, case: CleanCase) -> str:
        if not case.real and self.truth_in_models is not None:
            return self.truth_in_models
        return self.truth


def flags(*codes: str) -> frozenset[str]:
    return frozenset(codes)
