"""Inversion operators out of the solutions of the block problem, also where there are several.

Where sets of functions are not coupled to each other, any combination of the solutions solves the
equations: if P is an inversion, the others are P X with X from the matrices that keep every site
and commute with every H(R). This algebra holds the projectors on the decoupled sets, and up to
equivalence the inversions differ by the signs of P on them.
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import ComplexArray

TRIES = 32
"""Random combinations of several solutions, of which the one nearest to an involution is taken."""

LEAST_RANK = 0.1
"""Least ratio of smallest to largest singular value of blocks that map every function."""

DRAWS = 8
"""Random elements of the algebra; the one that tells most sets apart is used."""

CLUSTER_GAP = 0.05
"""Eigenvalues of a random element of the algebra that are nearer than this share of their range
belong to one set."""


def involution(vectors: ComplexArray) -> tuple[ComplexArray, float]:
    """A unitary P with P^2 = 1 from the solutions of the block problem.

    Polar decomposition, phase from P^2 = 1, then the matrix sign of its Hermitian part: each step
    keeps the blocks.

    Parameters
    ----------
    vectors
        (n_solutions, n_orb, n_orb).

    Returns
    -------
    tuple
        P, and the least |eigenvalue| of its Hermitian part before it was made an involution.
    """
    rng = np.random.default_rng(0)
    best, purity = polar(vectors[0]), -1.0
    for _ in range(1 if len(vectors) == 1 else TRIES):
        mixed = vectors[0]
        if len(vectors) > 1:  # a single solution may live on one decoupled set alone
            weights = rng.normal(size=(len(vectors), 2)) @ np.array([1, 1j])
            mixed = np.tensordot(weights, vectors, axes=1)
        unitary = _phased(polar(mixed))
        least = float(np.abs(np.linalg.eigvalsh(_hermitian(unitary))).min())
        if np.linalg.norm(mixed, ord=-2) < LEAST_RANK * np.linalg.norm(mixed, ord=2):
            least = 0.0  # the blocks leave some functions without an image
        if least > purity:
            best, purity = unitary, least
    return matrix_sign(_hermitian(best)), purity


def sign_alternatives(inversion: ComplexArray, vectors: ComplexArray) -> list[ComplexArray]:
    """Inversions that differ from the given one by the sign on one decoupled set each.

    Flipping one set at a time is enough to see whether an index depends on the signs: a Z2 index
    changes by a factor for each set, and kappa mod 4 by twice the kappa of the set.

    Parameters
    ----------
    inversion
        (n_orb, n_orb) P.
    vectors
        (n_solutions, n_orb, n_orb) solutions, P among their combinations.
    """
    rng = np.random.default_rng(1)
    draws = (_algebra_sets(inversion, vectors, rng) for _ in range(DRAWS))
    sets = max(draws, key=len)
    largest = max(range(len(sets)), key=lambda i: sets[i].shape[1])
    flipped = []
    for i, states in enumerate(sets):
        if i != largest:  # flipping all but one set is flipping that one and the overall sign
            projector = states @ states.conj().T
            flipped.append(matrix_sign(_hermitian(inversion - 2 * inversion @ projector)))
    return flipped


def _algebra_sets(
    inversion: ComplexArray, vectors: ComplexArray, rng: np.random.Generator
) -> list[ComplexArray]:
    """Eigenspaces (n_orb, n) of a random Hermitian element of the algebra that commutes with P."""
    weights = rng.normal(size=(len(vectors), 2)) @ np.array([1, 1j])
    element = inversion.conj().T @ np.tensordot(weights, vectors, axes=1)
    element = _hermitian(element)
    element = element + inversion @ element @ inversion.conj().T
    values, states = np.linalg.eigh(element)
    gaps = np.diff(values)
    widest = np.argsort(-gaps)[: len(vectors) - 1]  # no more sets than solutions
    breaks = np.sort(widest[gaps[widest] > CLUSTER_GAP * (values[-1] - values[0])]) + 1
    return np.split(states, breaks, axis=1)


def polar(matrix: ComplexArray) -> ComplexArray:
    """The unitary nearest to a matrix."""
    left, _, right = np.linalg.svd(matrix)
    return np.asarray(left @ right)


def matrix_sign(hermitian: ComplexArray) -> ComplexArray:
    """Sign of a Hermitian matrix: its eigenvalues become +1 and -1."""
    values, states = np.linalg.eigh(hermitian)
    return np.asarray((states * np.where(values < 0, -1.0, 1.0)) @ states.conj().T)


def _phased(unitary: ComplexArray) -> ComplexArray:
    """The unitary times the phase that makes the trace of its square real and positive."""
    return np.asarray(unitary * np.exp(-0.5j * np.angle(np.trace(unitary @ unitary))))


def _hermitian(matrix: ComplexArray) -> ComplexArray:
    return np.asarray((matrix + matrix.conj().T) / 2)
