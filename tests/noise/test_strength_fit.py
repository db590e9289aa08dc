"""Strengths fitted by maximum likelihood: against closed forms, brute force, finite differences and simulation."""

import numpy as np
import pytest
from recorded import NAMES, covariance_of, noise_parts, sample_covariance
from scipy.stats import chi2, sem, t, wishart

from layout.noise.signal_covariance import block_covariances
from layout.noise.strength_fit import fit_strengths
from layout.noise.variance_likelihood import WITHIN, Likelihood, best

ONE_REFERENCE = np.ones((len(NAMES), 1))
PLANTED = {"contacts": 1.7, "background": 1.3, "eyes": 0.6}


def fitted(covariance, samples, assumed=1.0, offsets=ONE_REFERENCE, **changed):
    parts = noise_parts()[0] | changed
    return fit_strengths(covariance, samples, parts, offsets, dict.fromkeys(parts, assumed))


def amplitudes(fit):
    return {name: one.amplitude for name, one in fit.strengths.items()}


def two_parts(n=6, samples=40, seed=1):
    """A likelihood of white and one correlated part."""
    rng = np.random.default_rng(seed)
    columns = rng.normal(size=(n, 3))
    parts = {"white": np.eye(n), "shared": columns @ columns.T}
    return Likelihood(sample_covariance(0.5 * parts["white"] + parts["shared"], samples, rng), samples, parts)


def minus_two_log_wishart(likelihood, variances):
    """By the general library, up to a constant."""
    scatter, model = likelihood.samples * likelihood.measured, likelihood.model(variances)
    return -2 * wishart(likelihood.samples, model).logpdf(scatter)


def test_likelihood_is_that_of_a_wishart_matrix():
    likelihood = two_parts()
    ones = [{"white": 0.5, "shared": 1.0}, {"white": 2.0, "shared": 0.1}]
    ours = [likelihood.value(one) for one in ones]
    theirs = [minus_two_log_wishart(likelihood, one) for one in ones]
    assert ours[1] - ours[0] == pytest.approx(theirs[1] - theirs[0], rel=1e-10)


def test_gradient_and_information_are_those_of_finite_differences():
    likelihood = two_parts()
    names = ["white", "shared"]

    def derivatives(logs, of=likelihood):
        return of.derivatives(dict(zip(names, np.exp(logs), strict=True)), names)

    at, step = np.array([-0.4, 0.3]), 1e-5
    gradient = [(derivatives(at + one)[0] - derivatives(at - one)[0]) / (2 * step) for one in step * np.eye(2)]
    np.testing.assert_allclose(derivatives(at)[1], gradient, rtol=1e-7)
    # where the sample covariance is the model's own, the information is the second derivative itself
    exact = Likelihood(likelihood.model(dict(zip(names, np.exp(at), strict=True))), 40, likelihood.parts)
    second = [
        (derivatives(at + one, exact)[1] - derivatives(at - one, exact)[1]) / (2 * step) for one in step * np.eye(2)
    ]
    np.testing.assert_allclose(derivatives(at, exact)[2], second, rtol=1e-7)


def test_maximum_and_interval_are_those_of_a_fine_grid():
    """Both by brute force over a grid of two log variances."""
    likelihood = two_parts(samples=12)
    steps = np.linspace(-2, 2, 51)
    white, shared = np.meshgrid(steps, steps, indexing="ij")
    values = np.array(
        [[minus_two_log_wishart(likelihood, {"white": w, "shared": s}) for s in np.exp(steps)] for w in np.exp(steps)]
    )
    found, least = best(likelihood, ["white", "shared"], {})
    i, j = np.unravel_index(values.argmin(), values.shape)
    pitch = steps[1] - steps[0]
    assert abs(np.log(found["white"]) - white[i, j]) <= pitch
    assert abs(np.log(found["shared"]) - shared[i, j]) <= pitch
    fit = fit_strengths(likelihood.measured, 12, likelihood.parts, np.zeros((6, 0)), {"white": 1.0, "shared": 1.0})
    for axis, name in enumerate(("white", "shared")):
        profile = values.min(axis=1 - axis) - values.min()
        inside = steps[profile <= WITHIN]
        one = fit.strengths[name]
        np.testing.assert_allclose(2 * np.log([one.low, one.high]), [inside[0], inside[-1]], atol=1.1 * pitch)
    assert least <= likelihood.value({"white": np.exp(-0.7), "shared": 1.0})


def test_one_variance_has_a_closed_form():
    """White noise alone: the mean variance, an interval where N p [log t + s/t] rises by the quantile."""
    n, samples = 5, 30
    covariance = sample_covariance(4.0 * np.eye(n), samples, np.random.default_rng(0))
    one = fit_strengths(covariance, samples, {"white": np.eye(n)}, np.zeros((n, 0)), {"white": 1.0}).strengths["white"]
    mean = np.trace(covariance) / n
    assert one.amplitude == pytest.approx(np.sqrt(mean), rel=1e-6)
    for end in (one.low, one.high):
        ratio = end**2 / mean
        assert n * samples * (np.log(ratio) + 1 / ratio - 1) == pytest.approx(chi2.ppf(0.95, 1), rel=1e-5)


def test_the_maximum_is_a_maximum_to_all_digits():
    likelihood = two_parts()
    found, _ = best(likelihood, ["white", "shared"], {})
    _, gradient, information = likelihood.derivatives(found, ["white", "shared"])
    assert np.abs(np.linalg.solve(information, gradient)).max() < 1e-13


def test_intervals_from_stretches_have_a_closed_form():
    """White noise alone: the standard error of the mean of the stretches' mean squares, Student's quantile."""
    n, n_blocks = 4, 15
    rng = np.random.default_rng(9)
    blocks = np.stack([size * sample_covariance(np.eye(n), 30, rng) for size in rng.uniform(0.5, 2, n_blocks)])
    arguments = {"white": np.eye(n)}, np.zeros((n, 0)), {"white": 1.0}
    few, many = (fit_strengths(blocks.mean(axis=0), samples, *arguments, blocks) for samples in (10, 1000))
    sizes = np.einsum("bii->b", blocks) / n
    reach = t.ppf(0.975, n_blocks - 1) * sem(sizes) / sizes.mean()
    one = few.strengths["white"]
    assert 2 * np.log([one.amplitude / one.low, one.high / one.amplitude]) == pytest.approx([reach, reach], rel=1e-8)
    assert (many.strengths["white"].low, many.strengths["white"].high) == pytest.approx((one.low, one.high), rel=1e-8)


def test_intervals_from_stretches_agree_with_the_likelihood_on_independent_samples():
    rng, n_blocks = np.random.default_rng(10), 400
    blocks = np.stack([sample_covariance(covariance_of(**PLANTED), 20, rng) for _ in range(n_blocks)])
    covariance, samples, parts = blocks.mean(axis=0), 20 * n_blocks, noise_parts()[0]
    assumed = dict.fromkeys(parts, 1.0)
    here = fitted(covariance, samples)
    there = fit_strengths(covariance, samples, parts, ONE_REFERENCE, assumed, blocks)
    for name, one in here.strengths.items():
        other = there.strengths[name]
        assert other.amplitude == one.amplitude
        # three standard errors of a standard deviation from 400 values
        assert np.log(other.high / other.low) == pytest.approx(np.log(one.high / one.low), rel=3 / np.sqrt(800))


def test_exact_covariance_gives_the_planted_strengths():
    fit = fitted(covariance_of(**PLANTED), 1000)
    assert amplitudes(fit) == pytest.approx(PLANTED, rel=1e-6)
    assert fit.deviance == pytest.approx(0, abs=1e-6)
    assert fit.variance_residual < 1e-6
    assert (fit.contrasts, fit.freedom) == (18, 18 * 19 // 2 - 3)


@pytest.mark.parametrize("kind", ["average", "named", "linked", "unknown"])
def test_the_reference_changes_nothing(kind):
    n = len(NAMES)
    covariance = sample_covariance(covariance_of(**PLANTED), 500, np.random.default_rng(3))
    weights = {
        "average": np.full(n, 1 / n),
        "named": np.eye(n)[NAMES.index("Cz")],
        "linked": (np.eye(n)[NAMES.index("T7")] + np.eye(n)[NAMES.index("T8")]) / 2,
        "unknown": np.zeros(n),
    }[kind]
    change = np.eye(n) - np.outer(np.ones(n), weights)
    other = change @ covariance @ change.T
    if kind == "unknown":  # a reference with a life of its own
        other = covariance + 1e-8 * np.ones((n, n))
    here, there = fitted(covariance, 500), fitted(other, 500)
    for name, one in here.strengths.items():
        same = there.strengths[name]
        assert (same.amplitude, same.low, same.high) == pytest.approx((one.amplitude, one.low, one.high), rel=1e-8)
    assert there.deviance == pytest.approx(here.deviance, rel=1e-8)
    assert there.variance_residual == pytest.approx(here.variance_residual, rel=1e-8)


def test_units_and_assumptions_change_nothing():
    covariance = sample_covariance(covariance_of(**PLANTED), 500, np.random.default_rng(4))
    here = fitted(covariance, 500)
    parts = {name: 1e12 * part for name, part in noise_parts()[0].items()}
    in_microvolts = fit_strengths(1e12 * covariance, 500, parts, ONE_REFERENCE, dict.fromkeys(parts, 30.0))
    assert amplitudes(in_microvolts) == pytest.approx(amplitudes(here), rel=1e-8)


def test_two_references_are_two_offsets():
    """Left electrodes against one ear, right ones against the other."""
    left = np.array([name[-1] in "13579z" for name in NAMES])
    sides = np.stack([left, ~left], axis=1).astype(float)
    covariance = covariance_of(**PLANTED)
    for side in sides.T:
        covariance = covariance + 5e-9 * np.outer(side, side)
    fit = fitted(covariance, 500, offsets=sides)
    assert amplitudes(fit) == pytest.approx(PLANTED, rel=1e-5)
    assert fit.contrasts == 17


def test_what_is_not_told_stays_assumed():
    """No eyes at all in the recording: assumed weak they stay, assumed strong they come down to what is allowed."""
    covariance = sample_covariance(covariance_of(contacts=1.7, background=1.3), 40, np.random.default_rng(2))
    weak, strong = fitted(covariance, 40, 0.05), fitted(covariance, 40, 3.0)
    assert (weak.strengths["eyes"].status, weak.strengths["eyes"].amplitude) == ("assumed", 0.05)
    upper = weak.strengths["eyes"].high
    assert 0.05 < upper < 3.0
    assert weak.strengths["eyes"].low == 0
    assert strong.strengths["eyes"].status == "limited"
    assert strong.strengths["eyes"].amplitude == pytest.approx(upper, rel=1e-4)
    assert {one.status for name, one in weak.strengths.items() if name != "eyes"} == {"fitted"}


def test_a_source_that_no_contrast_sees_is_absent():
    fit = fitted(covariance_of(**PLANTED), 100, assumed=2.5, offset=np.ones((19, 19)))
    one = fit.strengths["offset"]
    assert (one.status, one.amplitude, one.low, one.high) == ("absent", 2.5, 0.0, np.inf)
    assert amplitudes(fit) == pytest.approx(PLANTED | {"offset": 2.5}, rel=1e-6)


def test_of_two_alike_sources_one_is_assumed_and_the_other_fitted():
    fit = fitted(covariance_of(**PLANTED), 500, assumed=0.4, twin=noise_parts()[0]["background"])
    statuses = sorted(fit.strengths[name].status for name in ("background", "twin"))
    assert statuses == ["assumed", "fitted"]
    both = sum(fit.strengths[name].amplitude ** 2 for name in ("background", "twin"))
    assert both == pytest.approx(PLANTED["background"] ** 2, rel=1e-6)


def test_goodness_of_fit_flags_a_wrong_model():
    """Noise of one electrode three times that of the others: seen by both figures."""
    rng = np.random.default_rng(5)
    right = covariance_of(**PLANTED)
    wrong = right.copy()
    wrong[4, 4] += (8e-6) ** 2
    good, bad = (fitted(sample_covariance(one, 1000, rng), 1000) for one in (right, wrong))
    assert good.probability > 0.01
    assert bad.probability < 1e-6
    assert bad.variance_residual > 3 * good.variance_residual


def test_no_likelihood_ratio_where_it_means_nothing():
    rng = np.random.default_rng(6)
    few = fitted(sample_covariance(covariance_of(**PLANTED), 20, rng), 20)
    basis = np.linalg.qr(rng.normal(size=(19, 12)))[0]
    cleaned = fitted(basis @ basis.T @ covariance_of(**PLANTED) @ basis @ basis.T, 1000)
    for fit in (few, cleaned):
        assert (fit.deviance, fit.probability) == (None, None)
        assert all(np.isfinite(one.amplitude) for one in fit.strengths.values())


def test_no_contrast_is_an_error():
    with pytest.raises(ValueError, match="no contrast"):
        fit_strengths(np.ones((1, 1)), 10, {"white": np.eye(1)}, np.ones((1, 1)), {"white": 1.0})
    with pytest.raises(ValueError, match="no contrast"):
        fit_strengths(np.zeros((3, 3)), 10, {"white": np.eye(3)}, np.ones((3, 1)), {"white": 1.0})


@pytest.mark.slow
def test_deviance_of_a_right_model_is_chi_square():
    """Mean over 60 recordings within 3 standard errors of its degrees of freedom, at few samples per contrast."""
    rng, samples = np.random.default_rng(7), 60
    fits = [fitted(sample_covariance(covariance_of(**PLANTED), samples, rng), samples) for _ in range(60)]
    freedom = fits[0].freedom
    error = np.sqrt(2 * freedom / len(fits))
    assert abs(np.mean([fit.deviance for fit in fits]) - freedom) < 3 * error


@pytest.mark.slow
@pytest.mark.parametrize("samples", [80, 2340])
def test_intervals_hold_the_planted_strengths(samples):
    """In at least 90 of 100 simulated recordings, of 1 s and of 30 s in 1-40 Hz; 95 are expected."""
    rng = np.random.default_rng(8)
    held = dict.fromkeys(PLANTED, 0)
    for _ in range(100):
        fit = fitted(sample_covariance(covariance_of(**PLANTED), samples, rng), samples)
        for name, one in fit.strengths.items():
            held[name] += one.low <= PLANTED[name] <= one.high
    assert min(held.values()) >= 90, held


@pytest.mark.slow
def test_intervals_hold_where_sources_have_spectra_of_their_own():
    """Slow eyes, a background with a rhythm, white contacts, 60 s in 1-40 Hz: 95 of 100, less three standard errors."""
    rate, band, n = 100, (1.0, 40.0), 6000
    frequency = np.maximum(np.fft.rfftfreq(n, 1 / rate), 0.5)
    rhythm = 1 + 3 * np.exp(-((frequency - 10) ** 2) / 2)
    shapes = {"contacts": np.ones_like(frequency), "background": rhythm / np.sqrt(frequency), "eyes": 1 / frequency}
    inside = (frequency >= band[0]) & (frequency <= band[1])
    held = dict.fromkeys(PLANTED, 0)
    rng = np.random.default_rng(11)
    for _ in range(100):
        signals = 0.0
        for name, shape in shapes.items():
            cut = shape * inside / np.sqrt(2 * (shape[inside] ** 2).sum() / n)
            size, vectors = np.linalg.eigh(covariance_of(**{name: PLANTED[name]}))
            drawn = vectors * np.sqrt(np.maximum(size, 0)) @ rng.normal(size=(len(NAMES), n))
            signals = signals + np.fft.irfft(np.fft.rfft(drawn) * cut, n)
        blocks = block_covariances(signals, band, rate)
        parts, assumed = noise_parts()[0], dict.fromkeys(PLANTED, 1.0)
        fit = fit_strengths(signals @ signals.T / n, 1000, parts, ONE_REFERENCE, assumed, blocks)
        for name, one in fit.strengths.items():
            held[name] += one.low <= PLANTED[name] <= one.high
    assert min(held.values()) >= 95 - 3 * np.sqrt(100 * 0.95 * 0.05), held
