"""How deep a state reaches: the slowest decaying Bloch wave at an energy in the window.

In the bulk psi_{j+1} = z psi_j solves (E - H - T z - T† / z) psi = 0, and in the window no |z| is
1. A surface state is a sum of those with |z| on one side of 1, so that far inside its amplitude
falls at least as fast as the slowest of them: exp(-depth / l) with l = -d / ln |z|.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import eig

from topovet.arrays import FloatArray
from topovet.boundary.layers import LayerStack, principal_blocks
from topovet.boundary.recut import Recut


def decay_length(stack: LayerStack, cut: Recut, k_par: FloatArray, energy_ev: float) -> float:
    """Largest length in angstrom over which the amplitude of a state at (k_par, E) can decay.

    Density decays twice as fast. A linear problem of twice the size of a principal layer.
    """
    inside, across = principal_blocks(stack.planes_at(np.asarray(k_par, dtype=float)[None]))
    h, t = inside[0], across[0]
    size = len(h)
    eye, zero = np.eye(size), np.zeros((size, size))
    # [0 1; -T† E-H] (psi, z psi) = z [1 0; 0 T] (psi, z psi)
    left = np.block([[zero, eye], [-t.conj().T, energy_ev * eye - h]])
    right = np.block([[eye, zero], [zero, t]])
    alpha, beta = eig(left, right, right=False, homogeneous_eigvals=True)
    inward = np.abs(alpha) < np.abs(beta)
    slowest = float((np.abs(alpha[inward]) / np.abs(beta[inward])).max(initial=0.0))
    if slowest <= 0:
        return 0.0
    depth = cut.spacing_ang * stack.reach
    return float(-depth / np.log(slowest))
