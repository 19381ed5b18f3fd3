"""Inversion operators out of the solutions of the block problem, also where there are several.

Where sets of functions are not coupled to each other, any combination of the solutions solves the
equations: if P is an inversion, the others are P X with X from the matrices that keep every site
and commute with every H(R). This algebra holds the projectors on the decoupled sets, and up to
equivalence the inversions differ by the signs of P on them.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import schur

from topovet.arrays import ComplexArray

TRIES = 16
"""Random combinations of several solutions, of which the one with the clearest phases is taken."""

LEAST_RANK = 0.02
"""Least ratio of smallest to largest singular value of blocks that map every function."""

DRAWS = 32
"""Random elements of the algebra; the one that tells most sets apart is used."""

CLUSTER_GAP = 0.02
"""Eigenvalues of a random element of the algebra that are nearer than this share of their range
belong to one set."""


def involution(vectors: ComplexArray) -> tuple[ComplexArray, float]:
    """A unitary P with P^2 = 1 from the solutions of the block problem.

    Polar decomposition of a solution U, then P = U (U^2)^(-1/2): where several sets of functions
    are decoupled, U^2 has a phase on each of them, and the root takes each to 1. The cut of the
    root is put into the widest gap between the phases. Each step keeps the blocks.

    Parameters
    ----------
    vectors
        (n_solutions, n_orb, n_orb).

    Returns
    -------
    tuple
        P, and its overlap with the space of the solutions: 1 if P is one of them.
    """
    rng = np.random.default_rng(0)
    best, widest = polar(vectors[0]), -1.0
    for _ in range(1 if len(vectors) == 1 else TRIES):
        mixed = vectors[0]
        if len(vectors) > 1:  # a single solution may live on one decoupled set alone
            weights = rng.normal(size=(len(vectors), 2)) @ np.array([1, 1j])
            mixed = np.tensordot(weights, vectors, axes=1)
        if np.linalg.norm(mixed, ord=-2) < LEAST_RANK * np.linalg.norm(mixed, ord=2):
            continue  # the blocks leave some functions without an image
        found, gap = _root_of_one(polar(mixed))
        if gap > widest:
            best, widest = found, gap
    if widest < 0:
        return matrix_sign(_hermitian(best)), 0.0
    return best, _overlap(best, vectors)


def _root_of_one(unitary: ComplexArray) -> tuple[ComplexArray, float]:
    """U (U^2)^(-1/2), Hermitian and unitary, and the widest gap between the phases of U^2."""
    triangle, states = schur(unitary @ unitary, output="complex")
    phases = np.sort(np.angle(np.diag(triangle)))
    gaps = np.diff(np.append(phases, phases[0] + 2 * np.pi))
    cut = phases[gaps.argmax()] + gaps.max() / 2
    # angles counted from the cut, so that their halves do not jump within a set
    angles = np.mod(np.angle(np.diag(triangle)) - cut, 2 * np.pi) + cut
    root = (states * np.exp(-0.5j * angles)) @ states.conj().T
    return matrix_sign(_hermitian(unitary @ root)), float(gaps.max())


def _overlap(inversion: ComplexArray, vectors: ComplexArray) -> float:
    """Norm of the part of P in the space of the solutions, relative to that of P."""
    basis = np.linalg.qr(vectors.reshape(len(vectors), -1).T)[0]
    part = basis.conj().T @ inversion.reshape(-1)
    return float(np.linalg.norm(part) / np.linalg.norm(inversion))


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


def _hermitian(matrix: ComplexArray) -> ComplexArray:
    return np.asarray((matrix + matrix.conj().T) / 2)
