"""Local axes of projections."""

from __future__ import annotations

import numpy as np
import pytest

from topovet.intake.wannier_input.local_axes import axes_of, unit_vector

X, Z = (1.0, 0.0, 0.0), (0.0, 0.0, 1.0)


@pytest.mark.parametrize("length", [1e-200, 1.0, 7.0, 1e200])
def test_unit_vector_of_any_length(length: float) -> None:
    assert unit_vector((3 * length, 0.0, -4 * length)) == pytest.approx((0.6, 0.0, -0.8))


def test_zero_has_no_direction() -> None:
    assert unit_vector((0.0, -0.0, 0.0)) is None


def test_right_angles_are_kept_exactly() -> None:
    assert axes_of(Z, X, about_z=False) == (Z, X)


@pytest.mark.parametrize(("cosine", "accepted"), [(9e-3, True), (-9e-3, True), (1.1e-2, False)])
def test_small_tilt_is_taken_out_and_a_large_one_refused(cosine: float, accepted: bool) -> None:
    tilted = (float(np.sqrt(1 - cosine**2)), 0.0, cosine)
    axes = axes_of(Z, tilted, about_z=False)
    assert (axes is not None) == accepted
    if axes is not None:
        assert axes[1] == pytest.approx(X, abs=1e-15)


@pytest.mark.parametrize("z", [X, (0.6, 0.0, 0.8), (3**-0.5, 3**-0.5, 3**-0.5)])
def test_round_functions_always_get_axes(z: tuple[float, float, float]) -> None:
    axes = axes_of(z, X, about_z=True)
    assert axes is not None
    frame = np.array(axes)
    assert frame @ frame.T == pytest.approx(np.eye(2), abs=1e-14)
    assert axes[0] == z
