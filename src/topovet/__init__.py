"""topovet: vets the band topology of compounds from Wannier90 tight-binding output.

>>> import topovet
>>> verdict = topovet.vet("fixtures/cases/Bi2Se3")      # doctest: +SKIP
>>> verdict.invariants.z2                               # doctest: +SKIP
(1, 0, 0, 0)
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from topovet.api import vet as vet
    from topovet.verdict.document import Verdict as Verdict

__version__ = "0.1.0"
__all__ = ["Verdict", "__version__", "vet"]


def __getattr__(name: str) -> Any:
    """Load the numerical libraries when they are first asked for, not when the package is."""
    if name == "vet":
        from topovet.api import vet

        return vet
    if name == "Verdict":
        from topovet.verdict.document import Verdict

        return Verdict
    raise AttributeError(f"module 'topovet' has no attribute {name!r}")
