"""Tolerances on drop curves whose crossings are known in closed form."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from layout.evidence.tolerance import crossing, drops, mean_drop, tolerance

AT = np.array([0.5, 1, 2, 3, 5, 8, 12, 17, 23, 30])


@given(st.floats(1e-4, 0.01), st.floats(0, 2e-3))
def test_crossings_of_parabolas(linear, square):
    drop = linear * AT + square * AT**2
    for level in (0.01, 0.05, 0.1):
        found = crossing(AT, drop, level)
        if drop[-1] < level:
            assert found == np.inf
        else:
            assert linear * found + square * found**2 == pytest.approx(level, rel=0.02)


def test_the_first_crossing_counts_and_gains_do_not():
    drop = np.array([-0.02, -0.03, 0.0, 0.06, 0.2, 0.02, 0.01, -0.1, 0.5, 0.9])
    assert 2 < crossing(AT, drop, 0.05) < 3
    assert 12 < crossing(AT[5:], drop[5:], 0.3) < 23


def test_worst_and_mean_direction():
    slopes = np.array([0.001, 0.004, 0.002, 0.0])
    found = tolerance(AT, slopes[:, None] * AT)
    np.testing.assert_allclose(found.worst, np.array([0.01, 0.05, 0.1]) / 0.004, rtol=1e-9)
    assert found.worst_direction == (1, 1, 1)
    np.testing.assert_allclose(found.mean[:2], np.array([0.01, 0.05]) / slopes.mean(), rtol=1e-9)
    assert found.mean[2] == np.inf
    flat = tolerance(AT, np.zeros((2, len(AT))))
    assert flat.worst == (np.inf,) * 3
    assert flat.worst_direction == (-1,) * 3


def test_the_mean_goes_as_far_as_every_direction_was_tried():
    along = np.stack([AT, 0.8 * AT])
    at, mean = mean_drop(along, 0.01 * along)
    assert at[-1] == pytest.approx(24)
    np.testing.assert_allclose(mean, 0.01 * at, rtol=1e-9)


def test_drops_are_shares_of_bits_and_of_errors():
    np.testing.assert_allclose(drops(4.0, np.array([4.0, 3.0, 5.0])), [0, 0.25, -0.25])
    np.testing.assert_allclose(drops(-0.02, np.array([-0.02, -0.025])), [0, 0.25])  # an error of 20 mm grown to 25
