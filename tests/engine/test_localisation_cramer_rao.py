"""The linearised error with wide priors is the Cramér-Rao bound: derived table, scalings, published facts, fits."""

from dataclasses import replace

import numba
import numpy as np
import pytest
from references import cramer_rao as table
from scipy.optimize import least_squares

from layout.engine.localisation import LocalisationGoal, LocalisationModel
from layout.physics.layered_sphere import electric_lead_field
from layout.physics.sarvas import magnetic_lead_field

WIDE = 1e4  # prior standard deviations: so many times the scales below
POSITION_SCALE, MOMENT_SCALE = 0.02, 5e-9  # [m], [A·m]


def electric(positions):
    """Potentials [V/(A·m)] of the three unit moments at each position, at the 37 electrodes (37, m, 3)."""
    radius, conductivity = np.array([table.ELECTRIC_RADIUS]), np.array([table.ELECTRIC_CONDUCTIVITY])
    return electric_lead_field(table.ELECTRIC_RADIUS * table.directions(), positions, radius, conductivity)


def magnetic(positions, axes=None, points=None):
    """Fields [T/(A·m)] of the same at 37 radial magnetometers, or at others."""
    axes = table.directions() if axes is None else axes
    points = table.MAGNETIC_RADIUS * table.directions() if points is None else points
    return magnetic_lead_field(points, axes, positions)


def jacobian(lead_field, position, moment, components):
    """Central differences of the signal with respect to x, y, z [m] and some moment components [A·m] (n, 3 + c)."""
    step = 1e-5
    moves = np.vstack([np.zeros((1, 3)), step * np.eye(3), -step * np.eye(3)])
    fields = lead_field(position + moves)
    slopes = (fields[:, 1:4] - fields[:, 4:]) @ moment / (2 * step)
    return np.hstack([slopes, fields[:, 0, components]])


def model_of(jacobians, noise, offset=0.0):
    """A LocalisationModel with wide priors from jacobians (n, m, p) in SI and the noise's rms."""
    n, m, p = jacobians.shape
    prior = WIDE * np.array([POSITION_SCALE] * 3 + [MOMENT_SCALE] * (p - 3))
    return LocalisationModel(
        derivatives=jacobians * prior / noise,
        nuisance=np.zeros((n, 0)),
        offset=np.full(n, offset),
        candidate_of_channel=np.arange(n),
        spread=np.full((m, 3), WIDE * POSITION_SCALE),
        share=np.full(m, 1 / m),
        region=np.zeros(m, dtype=int),
    )


CASES = {
    "electric": (
        electric,
        [0, 1, 2],
        table.ELECTRIC_NOISE,
        1.0,
        table.ELECTRIC_POSITION_SD,
        table.ELECTRIC_POSITION_RSS,
        table.ELECTRIC_MOMENT_SD,
        table.ELECTRIC_SIGNAL_RMS,
    ),
    "magnetic": (
        magnetic,
        [0, 1],
        table.MAGNETIC_NOISE,
        0.0,
        table.MAGNETIC_POSITION_SD,
        table.MAGNETIC_POSITION_RSS,
        table.MAGNETIC_MOMENT_SD,
        table.MAGNETIC_SIGNAL_RMS,
    ),
}
CASE = pytest.mark.parametrize("case", sorted(CASES))
ALL = np.arange(37)


def _permuted(model, order):
    """The model with its unknowns in another order, so that others stand in the place of the position."""
    return replace(model, derivatives=model.derivatives[:, :, order])


@CASE
def test_derived_table(case):
    forward, components, noise, offset, position_sd, rss, moment_sd, signal = CASES[case]
    values = forward(table.SOURCE[None])[:, 0] @ table.MOMENT
    values = values - values.mean() if offset else values
    assert np.sqrt((values**2).mean()) == pytest.approx(signal, rel=table.REL_TOLERANCE, abs=0)
    model = model_of(jacobian(forward, table.SOURCE, table.MOMENT, components)[:, None, :], noise, offset)
    assert -LocalisationGoal(model).score(ALL) == pytest.approx(rss, rel=table.REL_TOLERANCE, abs=0)
    weights = np.ones(37)
    assert -LocalisationGoal(model).tangent(weights)[0] == pytest.approx(rss, rel=table.REL_TOLERANCE, abs=0)
    # each unknown alone: the others' spread in the trace made negligible
    p = model.derivatives.shape[2]
    scales = WIDE * np.array([POSITION_SCALE] * 3 + [MOMENT_SCALE] * (p - 3))
    for unknown, expected in enumerate([*position_sd, *moment_sd]):
        order = [unknown, *np.setdiff1d(np.arange(p), [unknown])]
        alone = replace(_permuted(model, order), spread=np.array([[scales[unknown], 1e-30, 1e-30]]))
        assert LocalisationGoal(alone).errors(ALL)[0] == pytest.approx(expected, rel=table.REL_TOLERANCE, abs=0)


@CASE
def test_error_grows_with_noise_and_falls_with_snapshots_and_moment(case):
    forward, components, noise, offset, *_ = CASES[case]

    def error(moment, noise):
        return -LocalisationGoal(
            model_of(jacobian(forward, table.SOURCE, moment, components)[:, None, :], noise, offset)
        ).score(ALL)

    one = error(table.MOMENT, noise)
    assert error(table.MOMENT, 3 * noise) == pytest.approx(3 * one, rel=1e-6, abs=0)
    assert error(table.MOMENT, noise / np.sqrt(25)) == pytest.approx(one / 5, rel=1e-6, abs=0)
    assert error(4 * table.MOMENT, noise) == pytest.approx(one / 4, rel=1e-6, abs=0)


def test_the_reference_makes_no_difference():
    """An average reference, one electrode as the reference, and an unknown offset are the same measurement."""
    derivatives = jacobian(electric, table.SOURCE, table.MOMENT, [0, 1, 2])
    flat = model_of(derivatives[:, None, :], table.ELECTRIC_NOISE, 1.0)
    error = -LocalisationGoal(flat).score(ALL)
    for reference in (0, 20):
        others = np.delete(ALL, reference)
        # differences to one electrode: its noise is common to all, one nuisance of unit size
        bipolar = replace(
            flat,
            derivatives=(flat.derivatives - flat.derivatives[reference])[others],
            nuisance=np.ones((36, 1)),
            offset=np.zeros(36),
            candidate_of_channel=np.arange(36),
        )
        assert -LocalisationGoal(bipolar).score(np.arange(36)) == pytest.approx(error, rel=1e-8, abs=0)


def test_radial_magnetometers_are_not_the_best():
    """For a dipole under the middle of the array, exchange over three axes at each site beats all radial sensors."""
    normals = table.directions()[:19]  # the cap within 60 degrees of the dipole
    helper = np.where(np.abs(normals[:, 2:]) < 0.9, [[0.0, 0.0, 1.0]], [[1.0, 0.0, 0.0]])
    first = np.cross(normals, helper)
    first /= np.linalg.norm(first, axis=1)[:, None]
    axes = np.stack([normals, first, np.cross(normals, first)], axis=1).reshape(-1, 3)
    points = np.repeat(table.MAGNETIC_RADIUS * normals, 3, axis=0)
    derivatives = jacobian(lambda r: magnetic(r, axes, points), table.SOURCE, table.MOMENT, [0, 1])
    goal = LocalisationGoal(model_of(derivatives[:, None, :], table.MAGNETIC_NOISE))
    chosen = 3 * np.arange(19)
    radial = -goal.score(chosen)
    site = np.arange(57) // 3
    while True:
        state = goal.priced(chosen)
        scores = np.where(site[None, :] == site[chosen][:, None], state.swaps(), -np.inf)
        place, arriving = np.unravel_index(np.argmax(scores), scores.shape)
        if scores[place, arriving] <= state.value + 1e-9:
            break
        chosen[place] = arriving
    assert (chosen % 3 != 0).any()
    assert -goal.score(chosen) < 0.8 * radial


def test_one_sensor_of_three_components_sees_three_unknowns():
    """Two three-axis sensors locate a dipole (5 unknowns, 6 signals) that two radial ones leave at its prior."""
    normals = table.directions()[[1, 8]]
    points, axes = np.repeat(table.MAGNETIC_RADIUS * normals, 3, axis=0), np.tile(np.eye(3), (2, 1))
    derivatives = jacobian(lambda r: magnetic(r, axes, points), table.SOURCE, table.MOMENT, [0, 1])
    vector = replace(
        model_of(derivatives[:, None, :], 1e-3 * table.MAGNETIC_NOISE), candidate_of_channel=np.arange(6) // 3
    )
    assert -LocalisationGoal(vector).score(np.arange(2)) < 0.01
    derivatives = jacobian(lambda r: magnetic(r, normals, points[::3]), table.SOURCE, table.MOMENT, [0, 1])
    radial = model_of(derivatives[:, None, :], 1e-3 * table.MAGNETIC_NOISE)
    assert -LocalisationGoal(radial).score(np.arange(2)) > 1.0  # wide priors: metres, nothing known


@pytest.fixture
def one_thread():
    """Thousands of tiny lead fields: more threads only wait for one another."""
    threads = numba.get_num_threads()
    numba.set_num_threads(1)
    yield
    numba.set_num_threads(threads)


@pytest.mark.slow
@pytest.mark.usefixtures("one_thread")
@CASE
def test_maximum_likelihood_fits_attain_it(case):
    """1000 fits at a twentieth of the table's noise: sample sd within 10 % (its own error is 2.2 %)."""
    forward, components, noise, offset, position_sd, *_ = CASES[case]
    rng, noise = np.random.default_rng(3), noise / 20
    clean = forward(table.SOURCE[None])[:, 0] @ table.MOMENT

    def projected(rows):
        return rows - rows.mean(axis=0) if offset else rows

    def position_and_moment(unknowns):
        moment = np.zeros(3)
        moment[components] = unknowns[3:] * MOMENT_SCALE
        return unknowns[:3] * POSITION_SCALE, moment

    def signal(unknowns):
        position, moment = position_and_moment(unknowns)
        return projected(forward(position[None])[:, 0] @ moment)

    truth = np.concatenate([table.SOURCE / POSITION_SCALE, table.MOMENT[components] / MOMENT_SCALE])
    scales = np.array([POSITION_SCALE] * 3 + [MOMENT_SCALE] * len(components))
    found = []
    for _ in range(1000):
        data = projected(clean + noise * rng.standard_normal(37))
        fit = least_squares(
            lambda u, data=data: (signal(u) - data) / noise,
            truth,
            jac=lambda u: projected(jacobian(forward, *position_and_moment(u), components)) * scales / noise,
            method="lm",
            xtol=1e-6,
        )
        found.append(fit.x[:3] * POSITION_SCALE)
    sample = np.std(found, axis=0, ddof=1)
    np.testing.assert_allclose(sample, position_sd / 20, rtol=0.1)
    model = model_of(jacobian(forward, table.SOURCE, table.MOMENT, components)[:, None, :], noise, offset)
    assert np.sqrt((sample**2).sum()) == pytest.approx(-LocalisationGoal(model).score(ALL), rel=0.1, abs=0)
