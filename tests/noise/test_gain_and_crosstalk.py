"""Gain errors and crosstalk: second moments against simulation, an upper estimate against every choice."""

from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np
import pytest
from references import gradiometers as ref
from studies import BAND, SPHERE, TWO_REGIONS, cups, problem_of, study_of

from layout.brief.objects_stock import ElectrodeBrief, MagnetometerBrief, SitesBrief
from layout.design.scenarios import own_scenario
from layout.noise.assemble import assemble_noise
from layout.noise.calibration import Calibration
from layout.noise.gain_and_crosstalk import REACH, SAME_PLACE, largest_near, with_gain_and_crosstalk
from layout.noise.model import NoiseModel

SITES = SitesBrief(grid_pitch=0.02)


@dataclass
class Few:
    """The parts of candidates that matter here."""

    kind: np.ndarray
    candidate_of_channel: np.ndarray
    positions: np.ndarray
    is_electrode: np.ndarray


def stock(gain=(0.0, 0.0), crosstalk=(0.0, 0.0)):
    cup = ElectrodeBrief("cup", 4, SITES, 1e-6, gain_error=gain[0], crosstalk=crosstalk[0])
    coil = MagnetometerBrief("coil", 4, SITES, 1e-14, gain_error=gain[1], crosstalk=crosstalk[1])
    return cup, coil


@pytest.fixture
def few():
    """Three electrodes and three sensors: the first of two channels, the others at one place, one of them alone."""
    positions = np.array(
        [[0, 0, 0], [30, 0, 0], [0, 90, 0], [0, 0, 8], [0, 0, 8], [40, 0, 8], [40, 0, 8.1], [0, 150, 8]]
    )
    kind = np.array([0, 0, 0, 1, 1, 1, 1])
    return Few(kind, np.array([0, 1, 2, 3, 3, 4, 5, 6]), positions * 1e-3, np.arange(8) < 3)


@pytest.fixture
def made():
    rng = np.random.default_rng(4)
    noise = NoiseModel(rng.uniform(0.5, 1, 8), rng.normal(size=(8, 5)), {"background": slice(0, 5)}, np.zeros(8))
    return noise, rng.normal(size=(8, 3))


def test_without_errors_nothing_changes(few, made):
    assert with_gain_and_crosstalk(*made, few, stock()) is made[0]


def test_gain_error_by_simulation(few, made):
    """Covariance of (1 + ε)(target + background) + own noise over many draws, all entries."""
    noise, target = made
    gain = np.where(few.is_electrode, 0.2, 0.4)
    found = with_gain_and_crosstalk(noise, target, few, stock(gain=(0.2, 0.4)))
    rng = np.random.default_rng(11)
    n = 400_000
    signal = np.hstack([target, noise.nuisance]) @ rng.normal(size=(8, n))
    read = (1 + gain[:, None] * rng.normal(size=(8, n))) * signal + noise.sensor_sd[:, None] * rng.normal(size=(8, n))
    simulated = read @ read.T / n
    stated = target @ target.T + found.nuisance @ found.nuisance.T + np.diag(found.sensor_sd**2)
    scale = np.sqrt(np.outer(np.diag(stated), np.diag(stated)))
    assert (np.abs(simulated - stated) / scale).max() < 5 * 2 / np.sqrt(n)  # fourth moments of products: under 4
    plain = np.diag(target @ target.T + noise.nuisance @ noise.nuisance.T) + noise.sensor_sd**2
    assert (np.abs(np.diag(simulated) / plain - 1) > 0.02).all()  # without the errors it would not fit
    np.testing.assert_array_equal(found.nuisance, noise.nuisance)


def test_crosstalk_is_never_less_than_any_choice_of_neighbours_gives(few, made):
    """Fractions of a given sum of squares, spread anyhow over any sensors that may be chosen together."""
    noise, target = made
    c = 0.3
    found = with_gain_and_crosstalk(noise, target, few, stock(crosstalk=(c, c)))
    added = found.sensor_sd**2 - noise.sensor_sd**2
    power = (target**2).sum(axis=1) + (noise.nuisance**2).sum(axis=1)
    rng = np.random.default_rng(2)
    met = np.zeros(8)
    allowed = [s for s in combinations(range(7), 4) if not {4, 5} <= set(s)]
    for chosen in allowed:
        rows = np.flatnonzero(np.isin(few.candidate_of_channel, chosen))
        for one in rows:
            away = np.linalg.norm(few.positions[rows] - few.positions[one], axis=1)
            others = rows[(rows != one) & (few.is_electrode[rows] == few.is_electrode[one]) & (away < REACH)]
            if len(others) == 0:
                continue
            for _ in range(5):
                shares = c**2 * rng.dirichlet(np.full(len(others), 0.3))
                assert shares @ power[others] <= added[one] * (1 + 1e-9)
            met[one] = max(met[one], c**2 * power[others].max())
    # and it is met where the neighbour of most power is chosen, so it is no more than needed
    np.testing.assert_allclose(added, met, rtol=1e-12)
    assert added[2] == pytest.approx(0, abs=1e-12)  # 90 mm away from all
    assert added[7] == pytest.approx(0, abs=1e-12)


def test_errors_add_as_variances(few, made):
    both = with_gain_and_crosstalk(*made, few, stock((0.1, 0.2), (0.3, 0.0)))
    one = with_gain_and_crosstalk(*made, few, stock(gain=(0.1, 0.2)))
    other = with_gain_and_crosstalk(*made, few, stock(crosstalk=(0.3, 0.0)))
    before = made[0].sensor_sd ** 2
    np.testing.assert_allclose(
        both.sensor_sd**2 - before, one.sensor_sd**2 + other.sensor_sd**2 - 2 * before, rtol=1e-9, atol=1e-12
    )
    assert (other.sensor_sd[3:] == made[0].sensor_sd[3:]).all()


def test_nearest_channels_by_brute_force():
    rng = np.random.default_rng(3)
    positions = rng.uniform(0, 0.12, (60, 3))
    positions[30:] = positions[:30] + rng.choice([0.0, 0.5e-3], (30, 1))
    candidate = np.arange(60)
    candidate[30:40] = np.arange(10)
    power = rng.uniform(1, 2, 60)
    expected = np.zeros(60)
    for one in range(60):
        for other in range(60):
            away = np.linalg.norm(positions[one] - positions[other])
            together = candidate[one] == candidate[other] or away >= SAME_PLACE
            if one != other and away <= REACH and together:
                expected[one] = max(expected[one], power[other])
    np.testing.assert_array_equal(largest_near(power, positions, candidate), expected)
    assert len(largest_near(np.zeros(0), np.zeros((0, 3)), np.zeros(0))) == 0


def test_more_averages_do_not_hide_a_gain_error(few, made):
    """With all noise averaged away, what is left is the error's share of the target."""
    noise, target = made
    quiet = replace(noise, sensor_sd=noise.sensor_sd * 1e-6, nuisance=noise.nuisance * 1e-6)
    found = with_gain_and_crosstalk(quiet, target, few, stock(gain=(0.01, 0.013)))
    expected = np.where(few.is_electrode, 0.01, 0.013) * np.linalg.norm(target, axis=1)
    np.testing.assert_allclose(found.sensor_sd, expected, rtol=1e-6)


PAIR = (
    '[[stock]]\nkind = "gradiometer"\nname = "pair"\ncount = 2\nsites = { family = "10-20" }\nform = "planar"\n'
    "baseline_mm = 17\nhousing_mm = [28, 28, 30]\ncoil_noise_ft_per_rthz = 10\n"
)
SURROUNDINGS = BAND + "[noise.surroundings]\nfield_ft_rms = 1e6\n"


@pytest.mark.slow
def test_a_brief_s_gain_errors_reach_the_engine_s_rows():
    """1.3 % of what each channel sees, read off the model without such errors."""
    few = cups(4, 'family = "10-20"')
    plain = problem_of(SPHERE, TWO_REGIONS, few, PAIR, SURROUNDINGS)
    error = f"gain_error_percent = {ref.CALIBRATION_GAIN_PERCENT}\n"
    off = problem_of(SPHERE, TWO_REGIONS, few, PAIR + error, SURROUNDINGS)
    power = ((plain.model.target**2).sum(axis=1) + (plain.model.nuisance**2).sum(axis=1)) * plain.sensor_sd**2
    share = np.where(plain.model.offset == 0, ref.CALIBRATION_GAIN_PERCENT / 100, 0.0)
    np.testing.assert_allclose(off.sensor_sd**2, plain.sensor_sd**2 + share**2 * power, rtol=1e-9)
    assert (off.sensor_sd[share > 0] > plain.sensor_sd[share > 0]).all()


def test_gradiometers_of_a_brief_do_not_see_a_homogeneous_field():
    """A field of 1 nT, five orders above the sensor noise."""
    study = study_of(SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"'), PAIR, SURROUNDINGS)
    sources = study.head.cortex
    scenario = own_scenario(study)
    channels = scenario.channels
    noise = assemble_noise(
        channels,
        scenario.cortex,
        study.brief.noise,
        Calibration(1.0, 0.0, 1.0, 1.0, 1.0, 1.0),
        np.zeros(len(sources), dtype=int),
        sources.areas,
        np.ones(len(channels)),
    )
    columns = noise.nuisance[:, noise.parts["surroundings"]]
    assert columns.shape == (len(channels), 3)
    assert np.abs(columns).max() < 1e-12 * study.brief.noise.field_rms
