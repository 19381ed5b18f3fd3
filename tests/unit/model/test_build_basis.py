"""Declared functions in the crystal's frame: local axes, spin states, names."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from topovet.intake.records import DeclaredOrbital
from topovet.model.build_basis import build_basis, name_sites, spinor
from topovet.model.crystal import Crystal
from topovet.model.hybrids import harmonic_coefficients
from topovet.model.real_harmonics import compute_harmonics

CRYSTAL = Crystal(
    4.0 * np.eye(3), ("Bi", "Se", "Bi"), np.array([[0, 0, 0.1], [0.5, 0.5, 0.5], [0, 0, -0.1]])
)
PAULI = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])

Vector = tuple[float, float, float]


@st.composite
def unit_vectors(draw: st.DrawFn) -> Vector:
    vector = np.random.default_rng(draw(st.integers(0, 2**32 - 1))).normal(size=3)
    x, y, z = (float(v) for v in vector / np.linalg.norm(vector))
    return (x, y, z)


def test_names_sites_and_spins() -> None:
    bond = (0.25, 0.25, 0.3)
    basis = build_basis(
        (
            DeclaredOrbital((0.0, 0.0, 0.1), 0, 1, 1, spin=1),
            DeclaredOrbital((0.0, 0.0, 0.1), 0, 1, 1, spin=-1),
            DeclaredOrbital((0.0, 0.0, 0.9), 2, -3, 2, radial=2),
            DeclaredOrbital(bond, None, 0, 1),
            DeclaredOrbital((0.5, 0.5, 0.5), 1, 2, 4),
            DeclaredOrbital((0.25, 0.25, 0.7), None, 0, 1),
            DeclaredOrbital((1.25, 0.25, 0.3), None, 3, 4),
        ),
        CRYSTAL,
    )
    assert basis.labels == (
        "Bi1 pz up",
        "Bi1 pz down",
        "Bi2 sp3-2 r2",
        "site1 s",
        "Se1 dx2-y2",
        "site2 s",
        "site1 fz(x2-y2)",
    )
    assert basis.positions_frac[2].tolist() == [0.0, 0.0, 0.9]  # not moved into another cell
    assert basis.shells.tolist() == [1, 1, 2, 1, 1, 1, 1]
    assert basis.spinors[:4].tolist() == [[1, 0], [0, 1], [1, 0], [1, 0]]
    assert basis.harmonics[0].tolist() == [0, 1] + 14 * [0]


def test_sites_without_any_atom() -> None:
    empty = Crystal(np.eye(3), (), np.zeros((0, 3)))
    positions = np.array([[0, 0, 0], [0.5, 0, 0], [1, 1, 1.0]])
    assert name_sites(positions, empty) == ("site1", "site2", "site1")


def test_empty_basis() -> None:
    basis = build_basis((), CRYSTAL)
    assert basis.n_orb == 0
    assert basis.harmonics.shape == (0, 16)
    assert basis.spinors.shape == (0, 2)


@pytest.mark.parametrize(
    ("l", "mr", "expected"),
    [(1, 1, {2: 1.0}), (1, 2, {3: 1.0}), (1, 3, {1: 1.0}), (2, 2, {8: 1.0}), (3, 5, {13: 1.0})],
)
def test_cyclic_axes(l: int, mr: int, expected: dict[int, float]) -> None:
    """Local z, x, y along the crystal's x, y, z: pz is px there, dxz is dxy, fxyz is itself."""
    axes: dict[str, Vector] = {"z_axis": (1.0, 0.0, 0.0), "x_axis": (0.0, 1.0, 0.0)}
    (row,) = build_basis((DeclaredOrbital((0, 0, 0), None, l, mr, **axes),), CRYSTAL).harmonics
    # fxyz (column 13) is even under the cyclic exchange of x, y and z
    assert row == pytest.approx([expected.get(column, 0.0) for column in range(16)], abs=1e-14)


@given(z=unit_vectors(), other=unit_vectors(), l=st.integers(-5, 3))
@settings(max_examples=30, deadline=None)
def test_local_axes_turn_the_function(z: Vector, other: Vector, l: int) -> None:
    x = np.cross(z, other)
    assume(np.linalg.norm(x) > 1e-3)
    x /= np.linalg.norm(x)
    orbital = DeclaredOrbital(
        (0, 0, 0), None, l, 1, z_axis=z, x_axis=(float(x[0]), float(x[1]), float(x[2]))
    )
    (row,) = build_basis((orbital,), CRYSTAL).harmonics
    local = np.random.default_rng(0).normal(size=(20, 3))
    local /= np.linalg.norm(local, axis=1)[:, None]
    cartesian = local @ np.array([x, np.cross(z, x), z])
    expected = compute_harmonics(local) @ harmonic_coefficients(l, 1)
    assert compute_harmonics(cartesian) @ row == pytest.approx(expected, abs=1e-13)


@given(axis=unit_vectors(), pole=st.sampled_from([None, 1.0, -1.0]))
@settings(max_examples=50, deadline=None)
def test_spinors_are_eigenvectors_and_time_reversed_partners(
    axis: Vector, pole: float | None
) -> None:
    axis = axis if pole is None else (0.0, 0.0, pole)
    along = np.tensordot(np.array(axis), PAULI, axes=1)
    up, down = spinor(1, axis), spinor(-1, axis)
    assert along @ up == pytest.approx(up, abs=1e-14)
    assert along @ down == pytest.approx(-down, abs=1e-14)
    assert np.linalg.norm(up) == pytest.approx(1, abs=1e-14)
    theta_up = np.array([[0, 1], [-1, 0]]) @ up.conj()  # i sigma_y K, the sign of U = i sigma_y
    theta_down = np.array([[0, 1], [-1, 0]]) @ down.conj()
    assert theta_up == pytest.approx(-down, abs=1e-14)
    assert theta_down == pytest.approx(up, abs=1e-14)


def test_spin_along_z_is_exact() -> None:
    assert spinor(1, (0.0, 0.0, 1.0)).tolist() == [1, 0]
    assert spinor(-1, (0.0, 0.0, 1.0)).tolist() == [0, 1]
    assert spinor(0, (1.0, 0.0, 0.0)).tolist() == [1, 0]
