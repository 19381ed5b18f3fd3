"""Surface levels that cross an energy curve, counted by the phases of a unitary matrix.

For E in the window between the projected bulk bands A = E - eps, the inverse of the Green's
function on the outermost layer, is Hermitian, and a surface level at E is a zero eigenvalue of it.
Its Cayley transform

    W = (A + i gamma)(A - i gamma)^-1,    phases 2 arccot(a / gamma) in [0, 2 pi]

is unitary and, unlike A, does not diverge: it is what an electron collects that a featureless lead,
coupled to the layer by gamma, sends against the crystal. An eigenvalue a that passes through 0 is a
phase that passes through pi, upwards where the level rises through E as k_par moves on; one that
passes through infinity, where the crystal without its last layer has a level at E, passes through 0
and does not count. The net number of passages through pi from one k_par to another is a spectral
flow: it depends on W at the ends and on the homotopy class of the path alone.

Between neighbouring points phases move by at most 2 arcsin(||W' - W|| / 2) when W is led along the
shortest path. A reference angle at least that far from all phases is crossed by none, and the flow
is the change of the number of phases from pi up to the reference. Both the step and the window are
refined until that, and `topovet.boundary.projected.largest_step`, leave no room for a level to
cross the window unseen.

References ---------- Spectral flow: Atiyah, Patodi, Singer, Math. Proc. Camb. Phil. Soc. 79, 71
(1976), doi:10.1017/S0305004100052105. Eigenvalues of unitaries: Bhatia, Davis, Lin. Multilin.
Algebra 15, 71 (1984). Scattering matrices and surface invariants: Fulga, Hassler, Akhmerov, PRB
85, 165409 (2012), doi:10.1103/PhysRevB.85.165409. (All from memory.)"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class SurfacePhases:
    """W and its eigenphases at one or more points.

    Attributes
    ----------
    unitary
        (n, size, size).
    phases
        (n, size) in [0, 2 pi], ascending.
    nearest_ev
        (n,) smallest |a|: how far the curve is from the next surface level, roughly.
    """

    unitary: ComplexArray
    phases: FloatArray
    nearest_ev: FloatArray


def surface_phases(inverse_green: ComplexArray, gamma_ev: float) -> SurfacePhases:
    """W of A = E - eps, Hermitian up to rounding, (n, size, size) in eV."""
    hermitian = 0.5 * (inverse_green + inverse_green.conj().transpose(0, 2, 1))
    a, vectors = np.linalg.eigh(hermitian)
    angles = 2 * np.arctan2(gamma_ev, a)
    unitary = (vectors * np.exp(1j * angles)[:, None, :]) @ vectors.conj().transpose(0, 2, 1)
    # arccot falls with a, so that the ascending order of angles is that of -a
    return SurfacePhases(unitary, angles[:, ::-1], np.abs(a).min(axis=1))


def largest_moves(before: ComplexArray, after: ComplexArray) -> FloatArray:
    """(n,) largest angle that a phase can move by on the shortest path between unitaries."""
    distance = np.linalg.norm(after - before, ord=2, axis=(1, 2))
    return np.asarray(2 * np.arcsin(np.minimum(distance / 2, 1.0)))


def reference_angle(phases: FloatArray) -> tuple[float, float]:
    """Middle of the widest interval free of phases on the circle, and its half-width.

    Parameters
    ----------
    phases
        (size,) ascending in [0, 2 pi].
    """
    following = np.append(phases[1:], phases[0] + 2 * np.pi)
    gaps = following - phases
    widest = int(gaps.argmax())
    middle = (phases[widest] + gaps[widest] / 2) % (2 * np.pi)
    return float(middle), float(gaps[widest] / 2)


def rising_levels(before: FloatArray, after: FloatArray, reference: float) -> int:
    """Net number of phases through pi, upwards, when none crosses the reference angle."""
    return _from_pi_to(after, reference) - _from_pi_to(before, reference)


def _from_pi_to(phases: FloatArray, reference: float) -> int:
    """Phases met on the way from pi, excluded, up to the reference."""
    turned, end = (phases - np.pi) % (2 * np.pi), (reference - np.pi) % (2 * np.pi)
    return int(((turned > 0) & (turned < end)).sum())
