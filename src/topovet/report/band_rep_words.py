"""What band representations say, in plain words: what follows and what does not."""

from __future__ import annotations

from topovet.invariants.band_reps.results import (
    ATOMIC,
    FRAGILE,
    NOT_GAPPED,
    STABLE,
    AtomicLimit,
    BandRepWitness,
    BandSet,
)
from topovet.notation import k_text

_SUBSCRIPTS = str.maketrans("0123456789", "₀₁₂₃₄₅₆₇₈₉")


def indicator_group_name(orders: tuple[int, ...] | None) -> str:
    """ "Z₂ × Z₄", or "trivial"."""
    if orders is None:
        return "–"
    return " × ".join(f"Z{n}".translate(_SUBSCRIPTS) for n in orders) or "trivial"


def indicator_value(indicator: tuple[int, ...] | None) -> str:
    """ "(1, 2)"; a dash where there is none."""
    if not indicator:
        return "–"
    return f"({', '.join(map(str, indicator))})"


def limit_text(limit: AtomicLimit) -> str:
    """One atomic limit, e.g. "orbital 2b on ¼ ¼ ¼ (site symmetry -43m, 1 per cell, 2 bands)"."""
    copies = f"{limit.copies} × " if limit.copies > 1 else ""
    place = k_text(limit.site)
    kind = "an atom" if limit.on_atoms else "no atom"
    symmetry = limit.site_symmetry.replace("-", "−")
    return (
        f"{copies}orbital {limit.orbital} at {place} ({kind}; site symmetry {symmetry}, "
        f"{limit.n_sites} per cell, {limit.n_bands} bands)"
    )


def set_words(bands: BandSet) -> str:
    """The class of a set of bands in one phrase."""
    if bands.classification == ATOMIC and bands.obstructed:
        return "obstructed atomic limit"
    return bands.classification


def witness_note(found: BandRepWitness) -> str:
    """What stands beside the witness in the table of all of them."""
    if found.status != "ok":
        return found.reason
    if not found.indicator_group and found.occupied.classification == ATOMIC:
        return f"{set_words(found.occupied)}; levels show no stable topology in this group"
    shared = found.occupied.z2[0] is not None
    rests = "; rests on the same eigenvalues as parities and S4 where these speak"
    return set_words(found.occupied) + (rests if shared else "")


def reading(found: BandRepWitness) -> tuple[str, ...]:
    """What the finding on the occupied bands says, and what it cannot say; one sentence each."""
    bands = found.occupied
    boundary = "edge" if found.dimension == 2 else "surface"
    if bands.classification == STABLE and not found.spinful:
        return (
            "No sum or difference of atomic limits has the levels of these bands.",
            "Without spin and with time reversal that enforces nodes at k of low symmetry (Song, "
            "Zhang and Fang, Phys. Rev. X 8, 031069 (2018), from memory): a gap that sampling "
            "shows is then not to be believed.",
        )
    if bands.classification == STABLE:
        return (
            "No sum or difference of atomic limits has the levels of the occupied bands: while "
            "the gap stays open and the symmetry holds, they cannot be localised.",
            "Which phase it is the named indicators say; the entries here refer to generators "
            "that the reduction happened to pick.",
        )
    if bands.classification == FRAGILE:
        return (
            "The levels are a difference of atomic limits but no sum of them: fragile topology.",
            "Further bands of the right kind can undo it; it brings no protected states at the "
            f"{boundary}.",
        )
    if bands.classification == NOT_GAPPED:
        return (
            "The levels at different k cannot be connected without a crossing: the occupied bands "
            "meet the others somewhere on the lines named.",
        )
    if bands.classification == ATOMIC:
        return (*_atomic(bands), _limits_of(found))
    return (bands.reason,)


def _atomic(bands: BandSet) -> tuple[str, ...]:
    if bands.obstructed:
        return (
            "Orbitals on the atoms cannot have these levels; orbitals at places between them do: "
            "an obstructed atomic limit, whose charge is centred where no atom sits.",
        )
    if bands.obstructed is None:
        return ("Orbitals localised at the places listed have the same levels.",)
    return ("Orbitals localised on the atoms have the same levels.",)


def _limits_of(found: BandRepWitness) -> str:
    if not found.indicator_group:
        return (
            "In this group levels cannot show any stable topology, so that this does not speak "
            "against it: Wilson loops and mirror Chern numbers decide."
        )
    return (
        "Topology that leaves no trace in the levels at these k is not excluded by this: Wilson "
        "loops and mirror Chern numbers are counted separately."
    )
