"""What the witnesses say."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class TrimParity:
    """Parities at one TRIM.

    Attributes
    ----------
    k
        Fractional, entries 0 or 1/2.
    n_plus, n_minus
        Occupied states of even and odd parity, Kramers partners counted singly.
    delta
        Product of one parity per Kramers pair; without time reversal or spin, of all parities.
    purity
        Smallest |eigenvalue| of inversion in the occupied space; 1 for an exact symmetry.
    gap_ev
        E[N] - E[N-1] here.
    violation_mev
        Spectral norm of the commutator-like residual P H P^-1 - H here.
    level_energies_ev, level_parities
        One entry for each Kramers pair (or single level without time reversal) of ALL bands,
        lowest first; the parity is the mean eigenvalue of P in the level, near +1 or -1.
    """

    k: tuple[float, float, float]
    n_plus: int
    n_minus: int
    delta: int
    purity: float
    gap_ev: float
    violation_mev: float
    level_energies_ev: tuple[float, ...]
    level_parities: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class ParityWitness:
    """Fu-Kane indices and inversion indicators.

    Attributes
    ----------
    status
        "ok", "not-applicable" or "failed".
    reason
        Why it is not "ok"; empty otherwise.
    z2
        (nu0, nu1, nu2, nu3), (nu,) in 2D; None without time reversal or spin.
    z4
        kappa mod 4 in 3D with time reversal and spin, for `centre`.
    kappa
        kappa itself.
    eta4
        sum of n_minus over the TRIM mod 4, without time reversal.
    centre
        Inversion centre the counts refer to.
    kappa_by_centre
        (centre, kappa mod 4) for each of the inversion centres of the cell; shows whether z4
        depends on the choice, as it does for weak phases.
    """

    status: str
    reason: str
    z2: tuple[int, ...] | None
    z4: int | None
    kappa: int | None
    eta4: int | None
    centre: tuple[float, float, float] | None
    trim: tuple[TrimParity, ...]
    kappa_by_centre: tuple[tuple[tuple[float, float, float], int], ...]
