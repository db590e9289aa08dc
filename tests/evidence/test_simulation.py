"""Planting, noise and whitening, the comparison with the bound, and the whole simulation on a sphere."""

from dataclasses import replace

import numpy as np
import pytest
from studies import BAND, SPHERE, TWO_REGIONS, brief_of, coils, cups, problem_of, study_of

from layout.design.simulate import simulate
from layout.evidence.simulation import ChannelNoise, compare, depth_bands, drawn_priors, marked_crossings, plant
from layout.evidence.simulation_forward import fields_at, forward_of, held_inside, some_channels, volume_grid

ELECTRIC = (SPHERE, TWO_REGIONS, cups(12), BAND + "averages = 100\n", "[search]\nstarts = 3\n")
MAGNETIC = (SPHERE, TWO_REGIONS, coils(12), BAND + "averages = 100\n", "[search]\nstarts = 3\n")
RNG = np.random.default_rng(1)
NOISE = ChannelNoise(np.array([1.0, 2.0, 0.5, 1.0]), RNG.normal(size=(4, 3)), 1 / np.array([1.0, 2.0, 0.5, 1.0]))


def test_the_whitener_leaves_unit_noise_and_no_reference():
    whitener = NOISE.whitener()
    sd = NOISE.sensor_sd[:, None]
    covariance = sd * (np.eye(4) + NOISE.nuisance @ NOISE.nuisance.T) * sd.T
    np.testing.assert_allclose(whitener @ covariance @ whitener.T, np.eye(3), atol=1e-12)
    np.testing.assert_allclose(whitener @ np.ones(4), 0.0, atol=1e-12)
    known = ChannelNoise(NOISE.sensor_sd, NOISE.nuisance, np.zeros(4)).whitener()
    np.testing.assert_allclose(known @ covariance @ known.T, np.eye(4), atol=1e-12)


def test_drawn_noise_has_the_covariance_of_the_model():
    draws = ChannelNoise(NOISE.sensor_sd, NOISE.nuisance, np.zeros(4)).draw(200_000, np.random.default_rng(2))
    sd = NOISE.sensor_sd[:, None]
    expected = sd * (np.eye(4) + NOISE.nuisance @ NOISE.nuisance.T) * sd.T
    np.testing.assert_allclose(np.cov(draws), expected, atol=0.03 * np.diag(expected).max())
    whitened = NOISE.whitener() @ NOISE.draw(200_000, np.random.default_rng(3))
    np.testing.assert_allclose(np.cov(whitened), np.eye(3), atol=0.02)


def test_the_reference_makes_no_difference_to_what_fits_see():
    """Readings against one electrode, and their covariance worked out by hand, give the same misfit of any signal."""
    signal = RNG.normal(size=4)
    ours = ((NOISE.whitener() @ signal) ** 2).sum()
    against = np.hstack([np.eye(3), -np.ones((3, 1))])
    sd = NOISE.sensor_sd[:, None]
    covariance = against @ (sd * (np.eye(4) + NOISE.nuisance @ NOISE.nuisance.T) * sd.T) @ against.T
    assert ours == pytest.approx(against @ signal @ np.linalg.solve(covariance, against @ signal), rel=1e-10)


def test_plants_lie_at_the_regions_sources():
    study = study_of(*ELECTRIC)
    plants = plant(study.head, study.regions, 301, 2e-3, np.random.default_rng(5))
    for number, region in enumerate(study.regions):
        mine = plants.region == number
        assert abs(np.count_nonzero(mine) - 150.5) <= 0.5
        sources = study.head.cortex.positions[region.members]
        away = np.linalg.norm(plants.places[mine, None] - sources, axis=2).min(axis=1)
        assert 1e-3 < away.max() <= 2e-3
    np.testing.assert_allclose(np.linalg.norm(plants.moments, axis=1), 10e-9, rtol=1e-12)
    assert set(np.abs(plants.moments).argmax(axis=1)) == {0, 1, 2}
    again = plant(study.head, study.regions, 301, 2e-3, np.random.default_rng(5))
    np.testing.assert_array_equal(again.places, plants.places)


def test_priors_are_measurements_with_the_spreads_asked_for():
    study = study_of(*ELECTRIC)
    plants = plant(study.head, study.regions, 20_000, 0.0, np.random.default_rng(5))
    for number, prior in enumerate(drawn_priors(plants, study.regions, 0.03, 0.5, np.random.default_rng(6))):
        mine = plants.region == number
        assert (prior.places - plants.places[mine]).std() == pytest.approx(0.03, rel=0.03)
        assert (prior.moments - plants.moments[mine]).std() == pytest.approx(5e-9, rel=0.03, abs=0)
        assert prior.moment_sd == pytest.approx(5e-9, rel=1e-12, abs=0)


def drawn_errors(factor, count=1000):
    bounds = np.random.default_rng(7).uniform(1e-3, 5e-3, count)
    vectors = np.random.default_rng(8).normal(size=(count, 3)) / np.sqrt(3)
    return factor * bounds * np.linalg.norm(vectors, axis=1), bounds


def test_errors_are_told_apart_from_the_bound():
    for factor, standing in ((1.0, "follows"), (1.3, "above"), (0.7, "below")):
        errors, bounds = drawn_errors(factor)
        found = compare(errors, errors, bounds, bounds)
        assert found.standing == standing
        assert found.low < factor < found.high
        assert found.high - found.low < 0.1
    errors, bounds = drawn_errors(1.0)
    strayed = errors.copy()
    strayed[:20] = 0.0
    strayed[:15] = 3.1 * bounds[:15]  # one in seventy ends elsewhere: the ratio hardly moves
    found = compare(strayed, errors, bounds, bounds)
    assert found.ratio < 1.1
    assert found.far == pytest.approx(0.015)
    assert found.standing == "above"
    bounds[3] = np.inf
    assert compare(errors, errors, bounds, bounds).standing == "no bound"


def test_errors_that_only_pass_by_the_bound_are_not_said_to_follow_it():
    follows, above, below = (
        compare(errors, errors, bounds, bounds) for errors, bounds in map(drawn_errors, (1.0, 1.3, 0.7))
    )
    marked = marked_crossings([follows, above, follows, below])
    assert [one.standing for one in marked] == ["follows", "above", "crosses", "below"]


def test_bands_of_depth_hold_every_plant_once():
    depth = np.random.default_rng(1).uniform(0.0, 0.08, 500)
    bands = depth_bands(depth)
    assert np.sum(list(bands.values()), axis=0).tolist() == [1] * 500
    assert depth[bands["20-30 mm"]].min() >= 0.02
    assert depth[bands["20-30 mm"]].max() < 0.03
    assert list(depth_bands(np.array([0.031, 0.032]))) == ["30-40 mm"]


@pytest.mark.parametrize("tables", [ELECTRIC, MAGNETIC])
def test_some_channels_read_what_they_read_among_all(tables):
    problem, study = problem_of(*tables), study_of(*tables)
    channels = problem.scenario.channels
    rows = np.array([7, 2, 11])
    members = np.arange(0, len(study.head.cortex), 50)
    whole = channels.lead_field(study.cortex, members, free=True).gain
    part = some_channels(channels, rows)
    forward = forward_of(part, study.cortex, np.eye(3))
    np.testing.assert_allclose(forward.gain(study.head.cortex.positions[members]), whole[rows], rtol=1e-9)
    moments = np.tile([0.0, 1e-8, 0.0], (len(members), 1))
    both = fields_at(part, study.cortex, study.head.cortex.positions[members], moments)
    slopes = forward.slopes(study.head.cortex.positions[members], moments, both.gain)
    np.testing.assert_allclose(slopes, both.slopes, rtol=1e-9)


def test_some_channels_keep_their_integration_points():
    tables = (SPHERE, TWO_REGIONS, cups(6, 'family = "10-20"', "disc_mm = 10\n"), BAND)
    study = study_of(*tables)
    channels = problem_of(*tables).scenario.channels
    rows = np.array([5, 0])
    part = some_channels(channels, rows).lead_field(study.cortex, np.arange(9), free=True).gain
    np.testing.assert_allclose(part, channels.lead_field(study.cortex, np.arange(9), free=True).gain[rows], rtol=1e-9)


def test_dipoles_are_held_in_the_brain():
    study = study_of(*ELECTRIC)
    radius = study.cortex.sphere.brain_radius
    places = np.array([[0.0, 0.0, 0.2], [0.0, 0.0, radius - 2e-3], [0.01, 0.0, 0.0]])
    held = held_inside(study.cortex, places)
    np.testing.assert_allclose(held[1:], places[1:], atol=1e-15)
    np.testing.assert_allclose(held[0], [0.0, 0.0, radius - 1e-3], atol=1e-12)
    grid = volume_grid(study.cortex, 0.01)
    assert len(grid) == pytest.approx(4 / 3 * np.pi * (radius - 1e-3) ** 3 / 1e-6, rel=0.05)
    assert np.linalg.norm(grid, axis=1).max() <= radius - 1e-3 + 1e-9


def whole_rows(result, layout):
    return {row.noise_factor: row.figures for row in result.errors if row.over == "all" and row.layout == layout}


@pytest.mark.slow
@pytest.mark.parametrize("tables", [ELECTRIC, MAGNETIC])
def test_a_small_simulation(tables):
    brief = brief_of(*tables)
    result = simulate(brief, fits=60, noise_factors=(1, 0.05, 1e-3))
    assert [layout.name for layout in result.layouts] == ["layout 1", "even spread", "standard positions"]
    for layout in result.layouts:
        figures = whole_rows(result, layout.name)
        assert list(figures) == [1.0, 0.05, 1e-3]
        errors = [one.rms for one in figures.values()]
        assert errors == sorted(errors, reverse=True)
        assert figures[1e-3].rms < 0.1 * figures[1e-3].grid_rms  # next to no noise: exact, off the grid
        assert figures[1.0].bound_rms == pytest.approx(20 * figures[0.05].bound_rms, rel=1e-9)
        assert figures[1e-3].linearised_rms == pytest.approx(figures[1e-3].bound_rms, rel=1e-4)
        assert figures[1.0].linearised_rms < figures[1.0].bound_rms
    assert len(result.spreads) == 6
    assert all(0 < one.displacement < 0.1 and 0 < one.dispersion < 0.15 for one in result.spreads)
    again = simulate(brief, fits=60, noise_factors=(1, 0.05, 1e-3))
    assert again.errors == result.errors
    other = simulate(replace(brief, search=replace(brief.search, seed=9)), fits=60, noise_factors=(1,))
    assert other.errors[0] != result.errors[0]


@pytest.mark.slow
@pytest.mark.parametrize("in_volume", [False, True])
def test_with_priors_errors_go_beside_the_linearised_error(in_volume):
    result = simulate(brief_of(*ELECTRIC), fits=200, noise_factors=(1, 0.1), with_priors=True, in_volume=in_volume)
    for figures in whole_rows(result, "layout 1").values():
        assert figures.bound_rms == figures.linearised_rms
        assert figures.rms < 1.5 * figures.bound_rms
    assert whole_rows(result, "layout 1")[0.1].standing == "follows"


TWENTY = ((*ELECTRIC[:2], cups(20), *ELECTRIC[3:]), (*MAGNETIC[:2], coils(20), *MAGNETIC[3:]))


@pytest.mark.slow
@pytest.mark.parametrize("tables", TWENTY)
def test_at_a_twentieth_of_the_noise_errors_are_within_ten_percent_of_the_bound(tables):
    """1000 fits, for the layout and the baselines; and they rise with the noise."""
    result = simulate(brief_of(*tables), fits=1000, noise_factors=(3, 1, 0.3, 0.1, 0.05))
    for layout in result.layouts:
        figures = whole_rows(result, layout.name)
        assert figures[0.05].rms == pytest.approx(figures[0.05].bound_rms, rel=0.1)
        assert figures[0.05].ratio == pytest.approx(1, rel=0.1)
        assert figures[0.05].standing == "follows"
        assert layout.threshold >= 0.05
        errors = [one.rms for one in figures.values()]
        assert errors == sorted(errors, reverse=True)
    even = next(layout for layout in result.layouts if layout.name == "even spread")
    assert even.threshold < 3
    assert whole_rows(result, "even spread")[3].standing != "follows"
