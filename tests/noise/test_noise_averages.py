"""The noise of all channels in one model: averages, parts and rows."""

import numpy as np
import pytest

from layout.noise.model import noise_model


@pytest.fixture
def parts():
    rng = np.random.default_rng(5)
    return {"background": rng.standard_normal((4, 6)), "surroundings": np.zeros((4, 0)), "eyes": rng.random((4, 2))}


@pytest.mark.parametrize("averages", [1, 7, 100])
def test_averages_divide_every_covariance(parts, averages):
    sensor_sd = np.array([1.0, 2.0, 3.0, 0.5])
    noise = noise_model(sensor_sd, parts, np.array([True, True, False, False]), averages)
    np.testing.assert_allclose(noise.sensor_sd**2, sensor_sd**2 / averages, rtol=1e-14)
    for name, columns in parts.items():
        part = noise.nuisance[:, noise.parts[name]]
        np.testing.assert_allclose(part @ part.T, columns @ columns.T / averages, rtol=1e-13, atol=1e-15)
    np.testing.assert_array_equal(noise.offset, [1, 1, 0, 0])


def test_parts_are_found_by_name(parts):
    noise = noise_model(np.ones(4), parts, np.zeros(4, dtype=bool), 1)
    assert list(noise.parts) == list(parts)
    for name, columns in parts.items():
        np.testing.assert_array_equal(noise.nuisance[:, noise.parts[name]], columns)


def test_rows_are_divided_by_the_independent_noise(parts):
    sensor_sd = np.array([1.0, 2.0, 4.0, 0.5])
    noise = noise_model(sensor_sd, parts, np.array([True, True, False, False]), 1)
    target, nuisance, offset = noise.rows(np.ones((4, 3)))
    np.testing.assert_allclose(target, np.outer([1, 0.5, 0.25, 2], np.ones(3)))
    np.testing.assert_allclose(nuisance[2], noise.nuisance[2] / 4)
    np.testing.assert_allclose(offset, [1, 0.5, 0, 0])
