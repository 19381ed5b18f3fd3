"""The parity witness about an inversion that was inferred from the Hamiltonian.

Its overall sign is open: Z2 indices do not notice, kappa and eta turn into their negatives. The
sign of a set of functions that nothing couples to the rest is open too, and there an index may
notice; then it is not known.
"""

from __future__ import annotations

from dataclasses import replace

from topovet.errors import NoInversionError
from topovet.invariants.parity import compute_parity
from topovet.invariants.results import ParityWitness
from topovet.model.fourier import BlochSum
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.results import InversionOperator


def compute_inferred_parity(
    bloch: BlochSum,
    inferred: InferredInversion,
    filling: int,
    periodic: tuple[bool, bool, bool],
    *,
    kramers: bool,
) -> ParityWitness:
    """As `compute_parity`, for every sign that the Hamiltonian leaves open.

    Parameters
    ----------
    bloch, filling, periodic, kramers
        As there.
    inferred
        From `infer_inversion`, not refused.

    Returns
    -------
    ParityWitness
        "failed" where Z2 indices or eta (up to sign) depend on the sign of a decoupled set; z4,
        kappa and their values about other centres are left out where only they do. Of the two
        overall signs the one with the smaller z4 or eta is taken: 1 stands for 1 or 3.

    Raises
    ------
    NoInversionError
        The inference was refused.
    """
    if inferred.operator is None or inferred.reliability == "refused":
        raise NoInversionError(inferred.reason)

    def count(operator: InversionOperator) -> ParityWitness:
        return compute_parity(bloch, operator, filling, periodic, kramers=kramers)

    witness, *others = map(count, (inferred.operator, *inferred.alternatives))
    if 3 in (witness.z4, witness.eta4):
        witness = count(replace(inferred.operator, matrix=-inferred.operator.matrix))
    if witness.status != "ok":
        return witness
    if any(other.status != "ok" or _decides(other) != _decides(witness) for other in others):
        return replace(
            witness,
            status="failed",
            reason="the indices depend on the relative parity of functions that no hopping "
            "couples to the rest, and it is not declared",
            z2=None, z4=None, kappa=None, eta4=None, kappa_by_centre=(),
        )  # fmt: skip
    if any(_indicator(other) != _indicator(witness) for other in others):
        return replace(witness, z4=None, kappa=None, kappa_by_centre=())
    return witness


def _decides(witness: ParityWitness) -> tuple[tuple[int, ...] | None, int | None]:
    return witness.z2, _up_to_sign(witness.eta4)


def _indicator(witness: ParityWitness) -> tuple[int | None, ...]:
    about_centres = (_up_to_sign(kappa) for _, kappa in witness.kappa_by_centre)
    return (_up_to_sign(witness.z4), *about_centres)


def _up_to_sign(index: int | None) -> int | None:
    return None if index is None else min(index % 4, -index % 4)
