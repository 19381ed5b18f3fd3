"""Real harmonics and their rotation matrices, against textbook identities and scipy."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.polynomial import legendre
from scipy.spatial.transform import Rotation
from scipy.special import sph_harm_y

from topovet.arrays import FloatArray
from topovet.model.real_harmonics import (
    HARMONIC_L,
    compute_harmonics,
    harmonic_rotation,
    sphere_quadrature,
)

# (l, m) of the 16 functions; m > 0 of cosine kind, m < 0 of sine kind
LM = [
    (0, 0),
    (1, 0), (1, 1), (1, -1),
    (2, 0), (2, 1), (2, -1), (2, 2), (2, -2),
    (3, 0), (3, 1), (3, -1), (3, 2), (3, -2), (3, 3), (3, -3),
]  # fmt: skip


def random_directions(n: int, seed: int) -> FloatArray:
    points = np.random.default_rng(seed).normal(size=(n, 3))
    return np.asarray(points / np.linalg.norm(points, axis=1)[:, None])


@st.composite
def orthogonal(draw: st.DrawFn) -> FloatArray:
    quaternion = np.random.default_rng(draw(st.integers(0, 2**32 - 1))).normal(size=4)
    rotation = Rotation.from_quat(quaternion).as_matrix()
    return np.asarray(draw(st.sampled_from([1, -1])) * rotation)


def test_orthonormal_on_a_finer_quadrature_than_the_modules_own() -> None:
    cosines, weights = legendre.leggauss(12)
    phi = 2 * np.pi * (np.arange(24) + 0.3) / 24
    theta, phi = np.meshgrid(np.arccos(cosines), phi, indexing="ij")
    directions = np.stack(
        [np.sin(theta) * np.cos(phi), np.sin(theta) * np.sin(phi), np.cos(theta)], axis=-1
    ).reshape(-1, 3)
    y = compute_harmonics(directions)
    overlaps = (y * np.repeat(weights * 2 * np.pi / 24, 24)[:, None]).T @ y
    assert overlaps == pytest.approx(np.eye(16), abs=1e-13)


def test_own_quadrature_is_exact_up_to_degree_six() -> None:
    # surface integral of x^a y^b z^c for even a, b, c: 2 G((a+1)/2) G((b+1)/2) G((c+1)/2) /
    # G((a+b+c+3)/2); Folland, Am. Math. Mon. 108, 446 (2001), doi:10.1080/00029890.2001.11919774
    from math import gamma

    directions, weights = sphere_quadrature()
    x, y, z = directions.T
    for a in range(7):
        for b in range(7 - a):
            for c in range(7 - a - b):
                exact = 0.0
                if not (a % 2 or b % 2 or c % 2):
                    exact = 2 * gamma((a + 1) / 2) * gamma((b + 1) / 2) * gamma((c + 1) / 2)
                    exact /= gamma((a + b + c + 3) / 2)
                assert weights @ (x**a * y**b * z**c) == pytest.approx(exact, abs=1e-14)


def test_addition_theorem() -> None:
    """sum_m Y_m(a) Y_m(b) = (2l+1)/4pi P_l(a.b): Jackson, Classical Electrodynamics, eq. 3.62."""
    a, b = random_directions(40, 1), random_directions(40, 2)
    products = compute_harmonics(a) * compute_harmonics(b)
    for l in range(4):
        expected = (2 * l + 1) / (4 * np.pi) * legendre.Legendre.basis(l)((a * b).sum(axis=1))
        assert products[:, l == HARMONIC_L].sum(axis=1) == pytest.approx(expected, abs=1e-14)


def test_signs_and_order_against_complex_harmonics() -> None:
    """Cosine kind sqrt(2) (-1)^m Re Y_lm, sine kind with Im: scipy's Y_lm is independent code."""
    directions = random_directions(50, 3)
    theta, phi = np.arccos(directions[:, 2]), np.arctan2(directions[:, 1], directions[:, 0])
    for column, (l, m) in enumerate(LM):
        value = sph_harm_y(l, abs(m), theta, phi)
        factor = 1.0 if m == 0 else np.sqrt(2) * (-1) ** m
        expected = factor * (value.imag if m < 0 else value.real)
        assert compute_harmonics(directions)[:, column] == pytest.approx(expected, abs=1e-14)


@given(r=orthogonal(), seed=st.integers(0, 1000))
@settings(max_examples=30, deadline=None)
def test_rotation_matrix_turns_the_functions(r: FloatArray, seed: int) -> None:
    directions = random_directions(20, seed)
    turned = compute_harmonics(directions @ r)  # f(R^-1 r) at the rows of `directions`
    assert compute_harmonics(directions) @ harmonic_rotation(r) == pytest.approx(turned, abs=1e-13)


@given(r1=orthogonal(), r2=orthogonal())
@settings(max_examples=30, deadline=None)
def test_representation(r1: FloatArray, r2: FloatArray) -> None:
    d1, d2 = harmonic_rotation(r1), harmonic_rotation(r2)
    assert harmonic_rotation(r1 @ r2) == pytest.approx(d1 @ d2, abs=1e-13)
    assert d1.T @ d1 == pytest.approx(np.eye(16), abs=1e-12)
    assert np.all(d1[HARMONIC_L[:, None] != HARMONIC_L[None, :]] == 0)


@given(r=orthogonal())
@settings(max_examples=20, deadline=None)
def test_p_functions_turn_as_the_vector(r: FloatArray) -> None:
    xyz = [2, 3, 1]  # columns of px, py, pz
    assert harmonic_rotation(r)[np.ix_(xyz, xyz)] == pytest.approx(r, abs=1e-14)


@given(seed=st.integers(0, 2**32 - 1), angle=st.floats(-np.pi, np.pi))
@settings(max_examples=20, deadline=None)
def test_character_of_a_rotation(seed: int, angle: float) -> None:
    """sin((l+1/2) a) / sin(a/2), written as 1 + 2 sum cos(m a): Varshalovich et al., ch. 4.14."""
    axis = random_directions(1, seed)[0]
    d = harmonic_rotation(Rotation.from_rotvec(angle * axis).as_matrix())
    for l in range(4):
        expected = 1 + 2 * np.cos(np.arange(1, l + 1) * angle).sum()
        assert np.trace(d[np.ix_(l == HARMONIC_L, l == HARMONIC_L)]) == pytest.approx(
            expected, abs=1e-12
        )


def test_inversion_is_minus_one_to_the_l() -> None:
    assert harmonic_rotation(-np.eye(3)) == pytest.approx(np.diag((-1.0) ** HARMONIC_L), abs=1e-14)


def test_rounded_rotation_gives_an_orthogonal_matrix() -> None:
    rounded = np.round(Rotation.from_rotvec([0, 0, 2 * np.pi / 3]).as_matrix(), 4)
    d = harmonic_rotation(rounded)
    assert d.T @ d == pytest.approx(np.eye(16), abs=1e-12)


@pytest.mark.parametrize("matrix", [1.01 * np.eye(3), np.zeros((3, 3)), np.full((3, 3), np.nan)])
def test_what_is_no_rotation_is_refused(matrix: FloatArray) -> None:
    with pytest.raises(ValueError, match="not a rotation"):
        harmonic_rotation(matrix)
