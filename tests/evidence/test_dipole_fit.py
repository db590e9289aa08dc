"""Dipole fits on a sphere: recovery, the scan by brute force, priors against a general solver, the Cramér-Rao table."""

import numpy as np
import pytest
from references import cramer_rao as table
from scipy.optimize import least_squares, minimize
from scipy.stats import chi2

from layout.evidence import dipole_fit
from layout.evidence.dipole_fit import Forward, Priors, cramer_rao_errors, explained, fit_dipoles, refine, scan
from layout.physics.layered_sphere import electric_lead_field
from layout.physics.sarvas import magnetic_lead_field
from layout.physics.sphere_derivatives import electric_derivatives, magnetic_derivatives

RADII, CONDUCTIVITIES = np.array([table.ELECTRIC_RADIUS]), np.array([table.ELECTRIC_CONDUCTIVITY])
DIRECTIONS = table.directions()
# contrasts that do not see the reference
BASIS = np.linalg.qr(np.ones((37, 1)), mode="complete")[0][:, 1:].T
BRAIN = 0.085


def hold(places):
    distance = np.linalg.norm(places, axis=1, keepdims=True)
    return places * np.minimum(1.0, BRAIN / np.maximum(distance, BRAIN))


def electric():
    electrodes, whiten = table.ELECTRIC_RADIUS * DIRECTIONS, BASIS / table.ELECTRIC_NOISE

    def gain(places):
        return np.tensordot(whiten, electric_lead_field(electrodes, places, RADII, CONDUCTIVITIES), 1)

    def slopes(places, moments, gain_there):
        return np.tensordot(whiten, electric_derivatives(electrodes, places, RADII, CONDUCTIVITIES, moments), 1)

    return Forward(gain, slopes, hold)


def magnetic():
    coils = table.MAGNETIC_RADIUS * DIRECTIONS

    def gain(places):
        return magnetic_lead_field(coils, DIRECTIONS, places) / table.MAGNETIC_NOISE

    def slopes(places, moments, gain_there):
        return magnetic_derivatives(coils, DIRECTIONS, places, moments) / table.MAGNETIC_NOISE

    return Forward(gain, slopes, hold)


FORWARDS = {"electric": electric(), "magnetic": magnetic()}
BOUNDS = {"electric": table.ELECTRIC_POSITION_RSS, "magnetic": table.MAGNETIC_POSITION_RSS}
KIND = pytest.mark.parametrize("kind", sorted(FORWARDS))


def lattice(spacing):
    axis = np.arange(-BRAIN, BRAIN, spacing)
    points = np.stack(np.meshgrid(axis, axis, axis[axis > -0.02], indexing="ij"), axis=-1).reshape(-1, 3)
    return points[(np.linalg.norm(points, axis=1) < BRAIN) & (np.linalg.norm(points, axis=1) > 0.02)]


GRID = lattice(0.01)


def planted(count, seed):
    """Tangential dipoles of 10 nA·m at random places 30 to 75 mm from the centre, upper half."""
    rng = np.random.default_rng(seed)
    directions = rng.normal(size=(count, 3))
    directions[:, 2] = np.abs(directions[:, 2])
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    places = rng.uniform(0.03, 0.075, (count, 1)) * directions
    moments = np.cross(directions, rng.normal(size=(count, 3)))
    return places, 1e-8 * moments / np.linalg.norm(moments, axis=1, keepdims=True)


def signals(forward, places, moments):
    return np.einsum("ink,nk->in", forward.gain(places), moments)


@KIND
def test_without_noise_places_and_moments_come_back(kind):
    forward = FORWARDS[kind]
    places, moments = planted(40, 1)
    fits = fit_dipoles(forward, GRID, forward.gain(GRID), signals(forward, places, moments))
    np.testing.assert_allclose(fits.places, places, atol=1e-6)
    np.testing.assert_allclose(fits.moments, moments, atol=1e-11)
    assert fits.misfit.max() < 1e-6
    assert np.linalg.norm(GRID[fits.grid] - places, axis=1).mean() > 1e-3  # the grid alone cannot


@KIND
def test_the_refinement_beats_the_grid(kind):
    forward, rng = FORWARDS[kind], np.random.default_rng(2)
    places, moments = planted(200, 2)
    clean = signals(forward, places, 10 * moments)
    fits = fit_dipoles(forward, GRID, forward.gain(GRID), clean + rng.normal(size=clean.shape))
    refined, coarse = (np.linalg.norm(found - places, axis=1) for found in (fits.places, GRID[fits.grid]))
    assert np.median(refined) < 0.5 * np.median(coarse)
    at_grid = signals(forward, GRID[fits.grid], np.zeros_like(places))
    basis, _ = explained(np.moveaxis(forward.gain(GRID[fits.grid]), 1, 0))
    data = clean + np.random.default_rng(2).normal(size=clean.shape) - at_grid
    on_grid = (data**2).sum(axis=0) - (np.einsum("nik,in->nk", basis, data) ** 2).sum(axis=1)
    assert (fits.misfit <= on_grid + 1e-9).all()


@KIND
@pytest.mark.parametrize("known", [False, True])
def test_the_scan_finds_what_least_squares_at_every_point_finds(kind, known):
    forward, rng = FORWARDS[kind], np.random.default_rng(4)
    grid = GRID[::40]
    places, moments = planted(6, 4)
    data = signals(forward, places, moments) + rng.normal(size=(forward.gain(grid[:1]).shape[0], 6))
    priors = Priors(places + 0.02, 0.03, moments, 1e-8) if known else None
    gain = forward.gain(grid)
    misfit = np.empty((len(grid), 6))
    for j in range(len(grid)):
        rows, seen, far = gain[:, j], data, np.zeros(6)
        if known:
            rows, seen = np.vstack([rows, np.eye(3) / 1e-8]), np.vstack([data, moments.T / 1e-8])
            far = ((grid[j] - priors.places) ** 2).sum(axis=1) / 0.03**2
        best = np.linalg.lstsq(rows, seen, rcond=1e-6)[0]
        misfit[j] = ((seen - rows @ best) ** 2).sum(axis=0) + far
    np.testing.assert_array_equal(scan(grid, gain, data, priors), misfit.argmin(axis=0))


def test_with_priors_the_fit_is_that_of_a_general_solver(monkeypatch):
    monkeypatch.setattr(dipole_fit, "NEGLIGIBLE", 0.0)  # go on to the very minimum
    monkeypatch.setattr(dipole_fit, "CONVERGED", 1e-7)
    forward, rng = FORWARDS["electric"], np.random.default_rng(5)
    places, moments = planted(3, 5)
    clean = signals(forward, places, moments)
    data = clean + rng.normal(size=clean.shape)
    priors = Priors(places + 0.01 * rng.normal(size=(3, 3)), 0.01, moments + 3e-9 * rng.normal(size=(3, 3)), 3e-9)
    found, strengths, misfit, _ = refine(forward, places, data, priors)

    def residuals(unknown, k):
        place, moment = unknown[:3] / 1e3, unknown[3:] / 1e9
        left = data[:, k] - forward.gain(place[None])[:, 0] @ moment
        return np.concatenate([left, (place - priors.places[k]) / 0.01, (moment - priors.moments[k]) / 3e-9])

    for k in range(3):
        start = np.concatenate([1e3 * places[k], 1e9 * moments[k]])
        best = least_squares(residuals, start, args=(k,), xtol=1e-12, ftol=1e-14, gtol=1e-12)
        np.testing.assert_allclose(found[k], best.x[:3] / 1e3, atol=3e-6)
        np.testing.assert_allclose(strengths[k], best.x[3:] / 1e9, atol=1e-11)
        assert misfit[k] == pytest.approx(2 * best.cost, rel=1e-5)


@KIND
def test_a_fit_drawn_out_of_the_brain_ends_at_the_best_place_of_its_surface(kind):
    """Dipoles beyond the surface of the brain: against a general solver over the two angles of the sphere."""
    forward = FORWARDS[kind]
    places, moments = (part[:5] for part in planted(6, 9))
    outside = 0.0875 * places / np.linalg.norm(places, axis=1, keepdims=True)
    data = signals(forward, outside, 10 * moments)
    data = data + np.random.default_rng(9).normal(size=data.shape)
    best = scan(GRID, forward.gain(GRID), data)
    found, _, misfit, rounds = refine(forward, GRID[best], data)
    assert rounds < dipole_fit.ROUNDS
    held = np.flatnonzero(np.linalg.norm(found, axis=1) > BRAIN - 1e-9)
    assert len(held) >= 3

    def on_sphere(angles, k):
        place = BRAIN * np.array(
            [np.sin(angles[0]) * np.cos(angles[1]), np.sin(angles[0]) * np.sin(angles[1]), np.cos(angles[0])]
        )
        basis, _ = explained(np.moveaxis(forward.gain(place[None]), 1, 0))
        return (data[:, k] ** 2).sum() - ((basis[0].T @ data[:, k]) ** 2).sum()

    for k in held:
        x, y, z = found[k] / BRAIN
        start = np.array([np.arccos(z), np.arctan2(y, x)]) + 0.02
        least = minimize(on_sphere, start, args=(k,), method="Nelder-Mead", options={"xatol": 1e-7, "fatol": 1e-9})
        assert misfit[k] == pytest.approx(least.fun, abs=0.01)  # of unit variance: a tenth of a standard error


@KIND
def test_the_cramer_rao_bound_is_that_of_the_table(kind):
    forward, place, moment = FORWARDS[kind], table.SOURCE[None], table.MOMENT[None]
    gain = forward.gain(place)
    bound = cramer_rao_errors(gain, forward.slopes(place, moment, gain))
    assert bound[0] == pytest.approx(BOUNDS[kind], rel=table.REL_TOLERANCE, abs=0)


def test_no_bound_where_the_place_cannot_be_told():
    forward, place = FORWARDS["magnetic"], table.SOURCE[None]
    gain = forward.gain(place)
    assert np.isinf(cramer_rao_errors(gain, forward.slopes(place, np.zeros((1, 3)), gain)))
    radial = forward.slopes(place, 1e-8 * table.SOURCE[None] / 0.07, gain)  # silent outside a sphere
    assert np.isinf(cramer_rao_errors(gain, radial)) or cramer_rao_errors(gain, radial)[0] > 1
    few = gain[:4]
    assert np.isinf(cramer_rao_errors(few, forward.slopes(place, table.MOMENT[None], gain)[:4]))


def test_fits_that_end_in_another_minimum_start_again(monkeypatch):
    """Few sensors and little noise: from the best grid point alone some fits end far off, and their misfit says so."""
    few = np.arange(0, 37, 3)
    forward = Forward(
        lambda places: FORWARDS["magnetic"].gain(places)[few],
        lambda places, moments, gain: FORWARDS["magnetic"].slopes(places, moments, gain)[few],
        hold,
    )
    grid = lattice(0.02)
    places, moments = planted(2000, 8)
    data = signals(forward, places, moments) + 0.005 * np.random.default_rng(8).normal(size=(len(few), 2000))
    with_more = fit_dipoles(forward, grid, forward.gain(grid), data, 0.005)
    monkeypatch.setattr(dipole_fit, "MORE_STARTS", 0)
    once = fit_dipoles(forward, grid, forward.gain(grid), data, 0.005)
    usual = chi2.isf(1e-4, len(few) - 5)
    assert np.count_nonzero(once.misfit > usual) >= 3
    assert np.count_nonzero(with_more.misfit > usual) < 0.5 * np.count_nonzero(once.misfit > usual)
    assert (with_more.misfit <= once.misfit).all()


@pytest.mark.parametrize("rows", [1, 3, 4, 5])
def test_fewer_rows_than_unknowns_end_in_a_finite_place(rows):
    forward = Forward(
        lambda places: FORWARDS["electric"].gain(places)[:rows],
        lambda places, moments, gain: FORWARDS["electric"].slopes(places, moments, gain)[:rows],
        hold,
    )
    places, moments = planted(50, 7)
    data = signals(forward, places, moments) + np.random.default_rng(7).normal(size=(rows, 50))
    fits = fit_dipoles(forward, GRID, forward.gain(GRID), data)
    assert np.isfinite(fits.places).all()
    assert np.linalg.norm(fits.places, axis=1).max() <= BRAIN + 1e-12
    gain = forward.gain(places)
    assert np.isinf(cramer_rao_errors(gain, forward.slopes(places, moments, gain))).all()


@pytest.mark.slow
@KIND
def test_at_a_twentieth_of_the_noise_a_thousand_fits_attain_the_table(kind):
    """Scan and refinement from nothing known; the rms error's own error is under 2.5 %."""
    forward, rng = FORWARDS[kind], np.random.default_rng(6)
    clean = signals(forward, table.SOURCE[None], table.MOMENT[None])
    data = clean + rng.normal(size=(len(clean), 1000)) / 20
    fits = fit_dipoles(forward, GRID, forward.gain(GRID), data, 1 / 20)
    error = np.sqrt(((fits.places - table.SOURCE) ** 2).sum(axis=1).mean())
    assert error == pytest.approx(BOUNDS[kind] / 20, rel=0.1, abs=0)
    # misfits are chi-squared: as many rows as unknowns less (5 where the radial moment is silent)
    unknowns = 6 if kind == "electric" else 5
    assert fits.misfit.mean() == pytest.approx(len(clean) - unknowns, rel=0.05)
