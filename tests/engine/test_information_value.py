"""The information of a set against exact small cases, against its other forms, and under a flat reference offset."""

import numpy as np
import pytest
from engine_instances import contrast_information, random_model, rows_of

from layout.engine.information import information
from layout.engine.model import LinearModel


def _single_channels(target, nuisance=None, offset=None):
    n = len(target)
    nuisance = np.zeros((n, 0)) if nuisance is None else nuisance
    return LinearModel(target, nuisance, np.zeros(n) if offset is None else offset, np.arange(n))


# Check values, section 6 (derived): independent channels, doubled sensors, mixing, monotony, posterior over prior.


@pytest.mark.parametrize("n", [1, 2, 7, 40])
def test_n_independent_channels_at_snr_3_give_n_bits(n):
    assert information(_single_channels(np.sqrt(3.0) * np.eye(n)), np.arange(n)) == pytest.approx(n, abs=1e-12 * n)


@pytest.mark.parametrize("power", [0.01, 1.0, 3.0, 1e4])
def test_two_identical_sensors_see_twice_the_power(power):
    model = _single_channels(np.full((2, 1), np.sqrt(power)))
    assert information(model, [0, 1]) == pytest.approx(0.5 * np.log2(1 + 2 * power), rel=1e-12)


def test_the_empty_set_carries_nothing():
    assert information(_single_channels(np.eye(3)), []) == 0.0


@pytest.mark.parametrize("seed", range(5))
def test_channel_mixing_changes_nothing(seed):
    rng = np.random.default_rng(seed)
    model = random_model(rng, [1] * 6)
    mixing = rng.standard_normal((6, 6))
    signal = mixing @ model.target @ model.target.T @ mixing.T
    noise = mixing @ (np.eye(6) + model.nuisance @ model.nuisance.T) @ mixing.T
    mixed = 0.5 * np.log2(np.linalg.det(np.eye(6) + np.linalg.solve(noise, signal)))
    assert information(model, np.arange(6)) == pytest.approx(mixed, rel=1e-9)


@pytest.mark.parametrize("electrodes", [(), range(9), range(4)])
def test_another_channel_never_hurts(electrodes):
    rng = np.random.default_rng(4)
    for _ in range(20):
        model = random_model(rng, [1] * 9, electrodes, scale=rng.choice([0.1, 1, 10]))
        order = rng.permutation(9)
        values = [information(model, order[:k]) for k in range(10)]
        assert (np.diff(values) >= -1e-12).all()


@pytest.mark.parametrize("seed", range(5))
def test_it_is_the_log_ratio_of_posterior_to_prior_volume(seed):
    rng = np.random.default_rng(seed)
    model = random_model(rng, [2, 1, 3, 1], n_target=4, n_nuisance=5)
    chosen = [0, 2, 3]
    rows = rows_of(model, chosen)
    everything = np.hstack([model.target, model.nuisance])[rows]
    posterior = np.linalg.inv(np.eye(9) + everything.T @ everything)[:4, :4]  # of the target; the prior is I
    assert information(model, chosen) == pytest.approx(-0.5 * np.log2(np.linalg.det(posterior)), rel=1e-10)


@pytest.mark.parametrize("electrodes", [(), range(8), (0, 3)])
def test_both_forms_agree(electrodes):
    rng = np.random.default_rng(8)
    for _ in range(20):
        model = random_model(rng, rng.integers(1, 4, 8), electrodes, scale=rng.choice([0.1, 1, 10]))
        chosen = rng.permutation(8)[:5]
        assert information(model, chosen) == pytest.approx(contrast_information(model, chosen), rel=1e-9)


# The flat reference offset.


def _electrodes(rng, n):
    """Potentials and background [arbitrary] and contact noise, physical; and the scaled model of them."""
    lead, background = rng.standard_normal((n, 3)), rng.standard_normal((n, 4))
    noise = rng.uniform(0.2, 3.0, n)
    return lead, background, noise, _single_channels(lead / noise[:, None], background / noise[:, None], 1 / noise)


@pytest.mark.parametrize("seed", range(4))
def test_naming_any_member_the_reference_changes_nothing(seed):
    lead, background, noise, model = _electrodes(np.random.default_rng(seed), 7)
    value = information(model, np.arange(7))
    for reference in range(7):
        difference = np.delete(np.eye(7), reference, axis=0)
        difference[:, reference] = -1.0
        covariance = difference @ (background @ background.T + np.diag(noise**2)) @ difference.T
        seen = difference @ lead
        referenced = 0.5 * np.log2(np.linalg.det(np.eye(6) + np.linalg.solve(covariance, seen @ seen.T)))
        assert abs(referenced - value) < 1e-8


def test_average_reference_gives_the_same_number():
    lead, background, noise, model = _electrodes(np.random.default_rng(9), 6)
    centring = np.eye(6) - 1 / 6
    volumes = []
    for covariance in (np.diag(noise**2) + background @ background.T + s for s in (lead @ lead.T, 0.0)):
        volumes.append(np.log2(np.linalg.eigvalsh(centring @ covariance @ centring)[1:]).sum())
    assert information(model, np.arange(6)) == pytest.approx(0.5 * (volumes[0] - volumes[1]), rel=1e-10)


def test_one_electrode_alone_carries_exactly_nothing():
    rng = np.random.default_rng(2)
    model = random_model(rng, [1] * 6 + [3] * 2, range(6), scale=5.0)
    magnetometers = information(model, [6, 7])
    for electrode in range(6):
        assert abs(information(model, [electrode])) < 1e-13
        assert information(model, [electrode, 6, 7]) == pytest.approx(magnetometers, rel=1e-12)


@pytest.mark.parametrize("magnetometers", [0, 2])
def test_the_offset_is_the_limit_of_a_wide_prior(magnetometers):
    rng = np.random.default_rng(3)
    model = random_model(rng, [1] * 5 + [3] * magnetometers, range(5))
    chosen = np.arange(5 + magnetometers)
    exact = information(model, chosen)
    excess = []
    for spread in (1e1, 1e2, 1e3):
        wide = LinearModel(
            model.target,
            np.hstack([model.nuisance, spread * model.offset[:, None]]),
            np.zeros(model.n_channels),
            model.candidate_of_channel,
        )
        excess.append(information(wide, chosen) - exact)
    assert min(excess) > 0  # a finite prior knows something about the reference
    assert np.divide(excess[:-1], excess[1:]) == pytest.approx(100.0, rel=0.05)  # falls with the prior variance
