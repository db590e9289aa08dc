"""Surroundings: fields without sources or curl at the strengths stated."""

import numpy as np
import pytest

from layout.noise.surroundings import surroundings_columns

FIELD, GRADIENT = 3e-13, 5e-12


def field(column, point):
    """The column as a vector field: what three orthogonal magnetometers at the point measure (3,)."""
    return surroundings_columns(np.tile(point, (3, 1)), np.eye(3), FIELD, GRADIENT)[:, column]


def jacobian(column, point, step=1e-3):
    """d field_i / d x_j by central differences."""
    return np.stack(
        [(field(column, point + step * e) - field(column, point - step * e)) / (2 * step) for e in np.eye(3)], axis=1
    )


@pytest.mark.parametrize("column", range(8))
def test_fields_have_no_divergence_and_no_curl(column):
    slope = jacobian(column, np.array([0.03, -0.05, 0.08]))
    assert abs(np.trace(slope)) < 1e-10 * GRADIENT
    np.testing.assert_allclose(slope, slope.T, atol=1e-10 * GRADIENT)


def test_strengths_are_as_stated():
    somewhere = np.array([0.01, 0.07, 0.05])
    homogeneous = np.stack([field(column, somewhere) for column in range(3)])
    np.testing.assert_allclose(homogeneous, FIELD * np.eye(3), rtol=1e-14)
    slopes = np.stack([jacobian(column, somewhere).ravel() for column in range(3, 8)])
    np.testing.assert_allclose(slopes @ slopes.T, GRADIENT**2 * np.eye(5), atol=1e-9 * GRADIENT**2)
    np.testing.assert_allclose([field(column, np.zeros(3)) for column in range(3, 8)], 0, atol=0)


def test_no_direction_of_the_room_is_special():
    """Turning the head about its origin leaves the covariance between channels as it was."""
    rng = np.random.default_rng(8)
    positions, axes = rng.standard_normal((9, 3)) / 10, rng.standard_normal((9, 3))
    turn = np.linalg.qr(rng.standard_normal((3, 3)))[0]
    before = surroundings_columns(positions, axes, FIELD, GRADIENT)
    after = surroundings_columns(positions @ turn.T, axes @ turn.T, FIELD, GRADIENT)
    np.testing.assert_allclose(after @ after.T, before @ before.T, rtol=1e-10, atol=1e-12 * FIELD**2)


def test_electrodes_are_silent_and_zero_strengths_leave_nothing():
    positions = np.full((2, 3), 0.05)
    axes = np.array([[0, 0, 0.0], [0, 0, 1.0]])
    columns = surroundings_columns(positions, axes, FIELD, GRADIENT)
    assert (columns[0] == 0).all()
    assert np.abs(columns[1]).max() > 0
    assert surroundings_columns(positions, axes, 0.0, 0.0).shape == (2, 0)
    assert surroundings_columns(positions, axes, FIELD, 0.0).shape == (2, 3)
    assert surroundings_columns(positions, axes, 0.0, GRADIENT).shape == (2, 5)
