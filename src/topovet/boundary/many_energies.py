"""Half-crystals at many energies: one diagonalisation for each k_par, then small matrices only.

Neighbouring principal layers are coupled by T = A B†, A and B of rank r much below the size of a
layer: bonds across a layer's face are few. Of a stretch of layers only its Green's function
between the ends matters, projected on B at its first and on A at its last layer: four r x r
matrices. For one layer they follow from its eigenstates at any energy; two equal stretches joined
give one of twice the length,

    D = 1 - g_aa g_bb,   P = D^-1 g_ab,   Q = D^-1 g_aa g_ba,
    g_bb += g_ba g_bb P,   g_aa += g_ab Q,   g_ab <- g_ab P,   g_ba <- g_ba (g_ba + g_bb Q),

so that the cost of a decimation falls by (size / r)^3. In the end g_bb and g_aa are those of the
upper and of the lower half-crystal, and the outermost layer, coupled to the next half-crystal, is

    G = G_0 + G_0 A (1 - g_bb g_aa^0)^-1 g_bb A† G_0   for the upper half,

and the same with B, g_aa and g_bb^0 for the lower.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.boundary.greens import decimate, greens_functions

PLAIN_FROM = 0.7
"""Rank over size of a layer from which whole layers are decimated: that takes some 50 size^3
operations a step, the four matrices between the ends some 70 r^3, and more to begin with."""

MAX_DOUBLINGS = 40
CONVERGED = 1e-9


@dataclass(frozen=True, slots=True, eq=False)
class FaceDensity:
    """Density matrix of the outermost plane, as much of it as density and spin need.

    Attributes
    ----------
    same
        (n_e, n_orb) -Im G_mm / pi, 1/eV.
    flip
        (n_e, n_orb / 2) the element rho_(down, up) of the spectral density matrix
        rho = i (G - G†) / (2 pi) of every spin pair, 1/eV; empty for an odd number of orbitals.
    """

    same: FloatArray
    flip: ComplexArray


def face_densities(
    inside: ComplexArray,
    across: ComplexArray,
    energy: ComplexArray,
    n_orb: int,
    *,
    negligible_ev: float,
) -> tuple[FaceDensity, FaceDensity]:
    """Spectral density on the outermost plane of both half-crystals, at one k_par.

    Parameters
    ----------
    inside, across
        (size, size) H and T of principal layers, eV.
    energy
        (n_e,) with positive imaginary parts.
    n_orb
        Orbitals of a plane.
    negligible_ev
        Singular values of T up to this are left out; levels move by at most twice as much.
    """
    a, b = factors(across, negligible_ev)
    if a.shape[1] > PLAIN_FROM * len(inside):
        return _by_decimation(inside, across, energy, n_orb)
    levels, states = np.linalg.eigh(inside)
    at_a, at_b = states.conj().T @ a, states.conj().T @ b
    propagator = 1 / (energy[:, None] - levels)
    ends = _Ends(*(_between(x, propagator, y) for x, y in _pairs(at_a, at_b)))
    joined = _deep(ends)
    size = len(inside)
    upper = _face(states[:n_orb], propagator, at_a, joined.bb, ends.aa)
    lower = _face(states[size - n_orb :], propagator, at_b, joined.aa, ends.bb)
    return upper, lower


class HalfCrystals:
    """Both half-crystals at one k_par, ready for energies: the layer is diagonalised once.

    Parameters
    ----------
    inside, across, negligible_ev
        As in `face_densities`.
    """

    def __init__(self, inside: ComplexArray, across: ComplexArray, *, negligible_ev: float) -> None:
        self._whole = inside, across
        a, b = factors(across, negligible_ev)
        self._plain = a.shape[1] > PLAIN_FROM * len(inside)
        if not self._plain:
            self._levels, states = np.linalg.eigh(inside)
            at_a, at_b = states.conj().T @ a, states.conj().T @ b
            self._pairs = _pairs(at_a, at_b)

    def end_functions(self, energy: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
        """Green's functions (n_e, r, r), as much of them as shows every level there is.

        Of the upper and of the lower half-crystal, on their outermost layer projected on the bonds
        that would lead on; on the whole layer where these are many.
        """
        if self._plain:
            many = [np.broadcast_to(m, (len(energy), *m.shape)) for m in self._whole]
            found = decimate(many[0], many[1], energy)
            return greens_functions(energy, found.upper), greens_functions(energy, found.lower)
        propagator = 1 / (energy[:, None] - self._levels)
        joined = _deep(_Ends(*(_between(x, propagator, y) for x, y in self._pairs)))
        return joined.bb, joined.aa


def _by_decimation(
    inside: ComplexArray, across: ComplexArray, energy: ComplexArray, n_orb: int
) -> tuple[FaceDensity, FaceDensity]:
    """The same from whole layers, which is less work where they are coupled by many bonds."""
    many = (len(energy), *inside.shape)
    found = decimate(np.broadcast_to(inside, many), np.broadcast_to(across, many), energy)
    upper = greens_functions(energy, found.upper)[:, :n_orb, :n_orb]
    first = len(inside) - n_orb
    lower = greens_functions(energy, found.lower)[:, first:, first:]
    return _from_block(upper), _from_block(lower)


def _from_block(g: ComplexArray) -> FaceDensity:
    same = -np.diagonal(g, axis1=1, axis2=2).imag / np.pi
    n = g.shape[1]
    if n % 2:
        return FaceDensity(same, np.empty((len(g), 0), dtype=complex))
    up, down = np.arange(0, n, 2), np.arange(1, n, 2)
    return FaceDensity(same, 1j * (g[:, down, up] - g[:, up, down].conj()) / (2 * np.pi))


def factors(across: ComplexArray, negligible_ev: float) -> tuple[ComplexArray, ComplexArray]:
    """A and B with T = A B† up to singular values that are negligible."""
    left, values, right = np.linalg.svd(across)
    rank = int((values > negligible_ev).sum())
    root = np.sqrt(values[:rank])
    return left[:, :rank] * root, right[:rank].conj().T * root


@dataclass(frozen=True, slots=True, eq=False)
class _Ends:
    """Green's functions between the ends of a stretch, (n_e, r, r): aa, ab = A† G B, ba, bb."""

    aa: ComplexArray
    ab: ComplexArray
    ba: ComplexArray
    bb: ComplexArray

    def doubled(self) -> _Ends:
        aa, ab, ba, bb = self.aa, self.ab, self.ba, self.bb
        rank = aa.shape[1]
        solved = np.linalg.solve(np.eye(rank) - aa @ bb, np.concatenate([ab, aa @ ba], axis=2))
        p, q = solved[:, :, :rank], solved[:, :, rank:]
        return _Ends(aa + ab @ q, ab @ p, ba @ (ba + bb @ q), bb + ba @ (bb @ p))


def _deep(ends: _Ends) -> _Ends:
    """The stretch doubled until its two ends do not see each other."""
    scale = np.abs(ends.ab).max(initial=0.0)
    for _ in range(MAX_DOUBLINGS):
        if np.abs(ends.ab).max(initial=0.0) <= CONVERGED * scale:
            break
        ends = ends.doubled()
    return ends


def _pairs(a: ComplexArray, b: ComplexArray) -> tuple[tuple[ComplexArray, ComplexArray], ...]:
    return (a, a), (a, b), (b, a), (b, b)


def _between(x: ComplexArray, propagator: ComplexArray, y: ComplexArray) -> ComplexArray:
    """x† G_0 y for every energy, with x and y in the layer's eigenbasis."""
    product: ComplexArray = x.conj().T @ (propagator[:, :, None] * y)
    return product


def _face(
    states: ComplexArray,
    propagator: ComplexArray,
    at_face: ComplexArray,
    beyond: ComplexArray,
    own: ComplexArray,
) -> FaceDensity:
    """Density of the rows `states` of a layer coupled through `at_face` to what lies beyond."""
    rank = at_face.shape[1]
    dressed = np.linalg.solve(np.eye(rank) - beyond @ own, beyond)
    out = states @ (propagator[:, :, None] * at_face) @ dressed
    back = (states.conj() @ (propagator[:, :, None] * at_face.conj())).transpose(0, 2, 1)
    bare = propagator @ (np.abs(states) ** 2).T
    diagonal = bare + np.einsum("emr,erm->em", out, back)
    same = -diagonal.imag / np.pi
    n = len(states)
    if n % 2:
        return FaceDensity(same, np.empty((len(propagator), 0), dtype=complex))
    up, down = states[0::2], states[1::2]
    down_up = propagator @ (down * up.conj()).T
    down_up += np.einsum("emr,erm->em", out[:, 1::2], back[:, :, 0::2])
    up_down = propagator @ (up * down.conj()).T
    up_down += np.einsum("emr,erm->em", out[:, 0::2], back[:, :, 1::2])
    return FaceDensity(same, 1j * (down_up - up_down.conj()) / (2 * np.pi))
