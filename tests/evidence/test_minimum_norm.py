"""The minimum-norm map: identities of its kernel and resolution matrix, and point spreads that can be told by hand."""

import numpy as np
import pytest

from layout.evidence.minimum_norm import minimum_norm_kernel, noise_normalised, peaks, point_spread

RNG = np.random.default_rng(3)
GAIN, VARIANCE = RNG.normal(size=(12, 40, 1)), RNG.uniform(0.5, 2.0, 40)


def scaled(snr):
    """Gain and source variances, of which the factor makes the mean power per row snr²."""
    flat = GAIN[:, :, 0]
    return flat, VARIANCE * snr**2 * 12 / np.trace(flat * VARIANCE @ flat.T)


def test_the_kernel_is_the_posterior_mean():
    """Against the other form of it, (R⁻¹ + Gᵀ G)⁻¹ Gᵀ."""
    flat, variance = scaled(3.0)
    expected = np.linalg.solve(np.diag(1 / variance) + flat.T @ flat, flat.T)
    np.testing.assert_allclose(minimum_norm_kernel(GAIN, VARIANCE, 3.0), expected, rtol=1e-9, atol=1e-12)


def test_the_resolution_matrix():
    """G R Gᵀ has full rank: without noise the data come back, K G projects, and K G R is symmetric at any noise."""
    flat, variance = scaled(1e6)
    kernel = minimum_norm_kernel(GAIN, VARIANCE, 1e6)
    resolution = kernel @ flat
    np.testing.assert_allclose(flat @ kernel, np.eye(12), atol=1e-8)
    np.testing.assert_allclose(resolution @ resolution, resolution, atol=1e-8)
    assert np.trace(resolution) == pytest.approx(12, rel=1e-8)
    noisy = minimum_norm_kernel(GAIN, VARIANCE, 2.0) @ flat * variance
    np.testing.assert_allclose(noisy, noisy.T, rtol=1e-9, atol=1e-12 * np.abs(noisy).max())


def test_noise_alone_gives_every_source_the_same_amplitude():
    gain = RNG.normal(size=(12, 20, 3))
    kernel = noise_normalised(minimum_norm_kernel(gain, np.ones(20), 3.0), 3)
    np.testing.assert_allclose(np.einsum("mci,mci->m", kernel, kernel), 3.0, rtol=1e-12)
    silent = np.concatenate([gain, np.zeros((12, 1, 3))], axis=1)
    kernel = noise_normalised(minimum_norm_kernel(silent, np.ones(21), 3.0), 3)
    assert (kernel[-1] == 0).all()
    assert np.isfinite(kernel).all()


def test_a_source_with_a_channel_of_its_own_does_not_spread():
    positions = RNG.normal(size=(8, 3))
    gain = np.eye(8)[:, :, None]
    kernel = noise_normalised(minimum_norm_kernel(gain, np.ones(8), 5.0), 1)
    spread = point_spread(kernel, gain[:, :, 0], positions, positions, np.ones(8))
    np.testing.assert_allclose(spread.displacement, 0.0, atol=1e-12)
    np.testing.assert_allclose(spread.dispersion, 0.0, atol=1e-9)
    np.testing.assert_array_equal(peaks(kernel, gain[:, :, 0]), np.arange(8))


def test_two_sources_that_look_alike_spread_over_each_other():
    """Both in one channel: the map has the same amplitude at both, so its dispersion is d sqrt(a2 / (a1 + a2))."""
    positions = np.array([[0.0, 0.0, 0.0], [0.03, 0.0, 0.0]])
    gain = np.ones((1, 2, 1))
    kernel = noise_normalised(minimum_norm_kernel(gain, np.ones(2), 5.0), 1)
    spread = point_spread(kernel, np.ones((1, 1)), positions[:1], positions, np.array([1.0, 3.0]))
    assert spread.dispersion[0] == pytest.approx(0.03 * np.sqrt(3 / 4), rel=1e-12)


def test_noise_normalised_maps_without_noise_in_the_kernel_peak_at_the_source():
    """Of unregularised minimum-norm maps, those standardised by their own resolution peak at the source; divided by
    the noise alone they need not, but more signal never moves the peak farther on average than next to none.
    """
    flat, _ = scaled(1.0)
    positions = RNG.normal(size=(40, 3))
    away = []
    for snr in (0.01, 100.0):
        kernel = noise_normalised(minimum_norm_kernel(GAIN, VARIANCE, snr), 1)
        away.append(point_spread(kernel, flat, positions, positions, np.ones(40)).displacement.mean())
    assert np.isfinite(away).all()
    matched = flat / np.linalg.norm(flat, axis=0)  # next to no signal: the map is the matched filter
    weak = noise_normalised(minimum_norm_kernel(GAIN, VARIANCE, 1e-4), 1)[:, 0]
    np.testing.assert_allclose(weak, matched.T, rtol=1e-5, atol=1e-6)
