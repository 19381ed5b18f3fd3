"""One operation against the Hamiltonian: violation over k and over R, and what the bands say."""

from __future__ import annotations

from dataclasses import dataclass
from math import gcd

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray, largest_spectral_norm
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.group_results import OperationTest
from topovet.symmetry.hopping import real_space_residual_mev, transformed_at
from topovet.symmetry.operators import WannierOperator
from topovet.symmetry.time_reversal import sampled_k
from topovet.units import MEV_PER_EV

HOLDS_MEV = 1.0
"""Largest violation with which an operator counts as a symmetry of the Hamiltonian. Practice:
projected Wannier functions of cubic crystals keep every operation to 0.02 meV, rounding to six
decimals included; broken ones start at 8 meV in our data. It is also time reversal's."""

BANDS_MEV = 1.0
"""Largest |E(gk) - E(k)| with which the occupied bands count as symmetric. Points of a coarse mesh
carry the first-principles energies, which keep the crystal's operations to 0.2 meV in our data."""

MOST_MESH_POINTS = 64
"""Mesh points on which operations are tested; all of a 4 x 4 x 4 mesh."""

LEAST_MESH_POINTS = 8
"""An operation that takes fewer of them to points of the mesh is judged on the sampled k."""


class _Levels:
    """Occupied energies, solved once for each k modulo 1: operations lead to the same k again."""

    def __init__(self, filling: int) -> None:
        self._filling, self._solved = filling, dict[bytes, FloatArray]()

    def at(self, k_frac: FloatArray, h_k: ComplexArray) -> FloatArray:
        """(n_k, filling) eV, ascending."""
        folded = np.round((k_frac + 1e-9) % 1.0, 6)
        keys = [k.tobytes() for k in folded]
        missing = [i for i, key in enumerate(keys) if key not in self._solved]
        solved = np.linalg.eigvalsh(h_k[missing])[:, : self._filling]
        self._solved.update(zip([keys[i] for i in missing], solved, strict=True))
        return np.array([self._solved[key] for key in keys]).reshape(len(keys), self._filling)


@dataclass(frozen=True, slots=True, eq=False)
class _Points:
    """Some k, the reading of the Hamiltonian to be used there, H(k), and energies if asked for."""

    k_frac: FloatArray
    bloch: BlochSum
    h_k: ComplexArray
    levels: _Levels | None

    def only(self, chosen: BoolArray) -> _Points:
        return _Points(self.k_frac[chosen], self.bloch, self.h_k[chosen], self.levels)


@dataclass(frozen=True, slots=True, eq=False)
class Probe:
    """A Hamiltonian, prepared for the test of many operations.

    Attributes
    ----------
    model
        H(R) with shifts.
    sampled
        TRIM and generic k.
    mesh
        Points of the coarse mesh, on the reading without shifts; empty where none is known.
    mp_grid
        Coarse mesh; None where unknown.
    filling
        Occupied bands; None where unknown.
    """

    model: TightBindingModel
    sampled: _Points
    mesh: _Points
    mp_grid: tuple[int, int, int] | None
    filling: int | None


def prepare_probe(
    model: TightBindingModel,
    bloch: BlochSum,
    unshifted: BlochSum | None,
    periodic: tuple[bool, bool, bool],
    mp_grid: tuple[int, int, int] | None,
    filling: int | None,
) -> Probe:
    """H(k) and energies at the points on which all operations are tested."""
    none = np.zeros((0, 3))
    mesh_k = none if mp_grid is None else mesh_sample(mp_grid)
    return Probe(
        model,
        _points(sampled_k(periodic), bloch, filling),
        _points(mesh_k, bloch if unshifted is None else unshifted, filling),
        mp_grid,
        filling,
    )


def mesh_sample(mp_grid: tuple[int, int, int]) -> FloatArray:
    """At most `MOST_MESH_POINTS` points (n, 3) of a mesh, spread evenly over it, Gamma first."""
    n_all = int(np.prod(mp_grid))
    # steps of about the golden section through the running index, without common divisor
    step = round(0.618 * n_all)
    while gcd(step, n_all) > 1:
        step += 1
    chosen = np.sort(np.arange(min(n_all, MOST_MESH_POINTS)) * step % n_all)
    index = np.stack(np.unravel_index(chosen, mp_grid), axis=1)
    return np.asarray(index / np.array(mp_grid), dtype=np.float64)


def _points(k_frac: FloatArray, bloch: BlochSum, filling: int | None) -> _Points:
    levels = None if filling is None else _Levels(filling)
    return _Points(k_frac, bloch, bloch.at(k_frac), levels)


def measure_operation(
    probe: Probe, operator: WannierOperator, name: str, *, kramers: bool = False
) -> OperationTest:
    """All numbers of one operation.

    Parameters
    ----------
    probe
        The Hamiltonian.
    operator
        The operation on its Wannier functions.
    name
        For the result.
    kramers
        Whether time reversal holds, with spin: pairs at every k are then part of the inversion's
        test.
    """
    on_mesh = _to_mesh(probe, operator)
    violation, shift = _differences(probe.sampled, operator, kramers)
    violation_mesh, shift_mesh = None, None
    if on_mesh.sum() >= LEAST_MESH_POINTS:
        violation_mesh, shift_mesh = _differences(probe.mesh.only(on_mesh), operator, kramers)
    judged, judged_shift = violation, shift
    if violation_mesh is not None:
        judged, judged_shift = violation_mesh, shift_mesh
    return OperationTest(
        name=name,
        rotation=operator.rotation,
        translation=operator.translation,
        antiunitary=operator.antiunitary,
        missing="",
        violation_mev=violation,
        violation_mesh_mev=violation_mesh,
        violation_r_mev=real_space_residual_mev(probe.model, operator),
        band_shift_mev=shift,
        band_shift_mesh_mev=shift_mesh,
        holds=judged <= HOLDS_MEV,
        in_bands=None if judged_shift is None else judged_shift <= BANDS_MEV,
    )


def quick_violation_mev(probe: Probe, operator: WannierOperator, n_k: int = 4) -> float:
    """Violation at a few points of the kind that decides: a lower bound, to sort out candidates."""
    on_mesh = _to_mesh(probe, operator)
    points = probe.sampled
    if on_mesh.sum() >= LEAST_MESH_POINTS:
        points = probe.mesh.only(on_mesh)
    last = np.arange(len(points.k_frac)) >= len(points.k_frac) - n_k  # TRIM and Gamma come first
    return _differences(points.only(last), operator, kramers=False)[0]


def untested(
    name: str,
    rotation: IntArray,
    translation: FloatArray,
    reason: str,
    *,
    antiunitary: bool = False,
) -> OperationTest:
    """The result for an operation that has no operator in the basis."""
    return OperationTest(
        name=name,
        rotation=rotation,
        translation=translation,
        antiunitary=antiunitary,
        missing=reason,
        violation_mev=None,
        violation_mesh_mev=None,
        violation_r_mev=None,
        band_shift_mev=None,
        band_shift_mesh_mev=None,
        holds=False,
        in_bands=None,
    )


def _to_mesh(probe: Probe, operator: WannierOperator) -> BoolArray:
    """(n_mesh,) which of the mesh points go to points of the mesh."""
    if probe.mp_grid is None:
        return np.zeros(0, dtype=bool)
    index = (probe.mesh.k_frac @ operator.k_rotation) * np.array(probe.mp_grid)
    return np.asarray(np.abs(index - np.round(index)).max(axis=1) < 1e-6)


def _differences(
    points: _Points, operator: WannierOperator, kramers: bool
) -> tuple[float, float | None]:
    """Largest violation and largest shift of an occupied band, meV."""
    k_image = points.k_frac @ operator.k_rotation
    image = points.bloch.at(k_image)
    difference = transformed_at(points.h_k, operator, points.k_frac) - image
    violation = MEV_PER_EV * largest_spectral_norm(difference, hermitian=True)
    if points.levels is None:
        return violation, None
    energies = points.levels.at(points.k_frac, points.h_k)
    shift = float(np.abs(points.levels.at(k_image, image) - energies).max(initial=0.0))
    if kramers and not operator.antiunitary and np.array_equal(operator.rotation, -np.eye(3)):
        pairs = energies[:, : energies.shape[1] // 2 * 2]
        shift = max(shift, float((pairs[:, 1::2] - pairs[:, ::2]).max(initial=0.0)))
    return violation, MEV_PER_EV * shift
