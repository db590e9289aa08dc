"""Derivatives of the lead field by the source's position: against differences, identities and exact spheres.

The oracle is the lead field itself by fourth-order central differences; the identities are those of check-values
section 1 (derived by reciprocity): EEG curl-free and divergence-free, spherical MEG divergence-free.
"""

import dataclasses

import numpy as np
import pytest
from made_heads import make_head

from layout.physics.channels import Channels
from layout.physics.derivatives import lead_field_derivatives
from layout.physics.differences import central_differences
from layout.physics.layered_sphere import electric_lead_field
from layout.physics.lead_field import compute_lead_field
from layout.physics.sarvas import magnetic_lead_field
from layout.physics.sphere_derivatives import electric_derivatives, magnetic_derivatives
from layout.physics.sphere_model import MappedSources, fit_sphere_model, map_cortex, map_sources, smallest_rotations

RADII, SIGMA = np.array([79e-3, 80e-3, 85e-3, 90e-3]), np.array([0.3, 1.5, 0.015, 0.3])
SEMI_AXES, CENTRE = np.array([0.068, 0.084, 0.072]), np.array([0.001, 0.004, 0.04])
THREE, FOUR = (0.33, 0.33 / 80, 0.33), (0.33, 1.79, 0.33 / 80, 0.33)


def unit(rng, n):
    v = rng.normal(size=(n, 3))
    return v / np.linalg.norm(v, axis=1, keepdims=True)


@pytest.fixture(scope="module")
def setting():
    """Channels' directions and axes, sources from the centre to 2 mm under the brain's radius, moments."""
    rng = np.random.default_rng(5)
    sources = rng.uniform(0.05, 77 / 79, (40, 1)) * RADII[0] * unit(rng, 40)
    sources[0] = 0
    return unit(rng, 25), unit(rng, 25), sources, rng.normal(size=(40, 3))


def worst(found, expected):
    """Largest relative difference of any source's derivatives, over all channels."""
    return (np.linalg.norm(found - expected, axis=(0, 2)) / np.linalg.norm(expected, axis=(0, 2))).max()


def channels_on(head, seed=4, n=40):
    rng = np.random.default_rng(seed)
    sites = rng.choice(np.flatnonzero(head.scalp.vertices[:, 2] > 0.02), n, replace=False)
    is_electrode = rng.random(n) < 0.5
    normals = head.scalp.normals[sites]
    positions = head.scalp.vertices[sites] + np.where(is_electrode, 0, 6.5e-3)[:, None] * normals
    axes = unit(rng, n)
    axes[is_electrode] = 0
    return Channels(positions, axes, is_electrode, normals)


def at_head_positions(head, model, channels):
    """The free lead field as a function of positions in the head, map included."""

    def lead_field(positions):
        *setting, pickup = vars(channels).values()
        return compute_lead_field(model, head, *setting, map_sources(model, head, positions, None), pickup).gain

    return lead_field


def test_electric_closed_form_against_differences_of_the_series(setting):
    electrodes, _, sources, moments = setting
    found = electric_derivatives(electrodes, sources, RADII, SIGMA, moments)

    def series(positions):
        return electric_lead_field(electrodes, positions, RADII, SIGMA, tolerance=1e-13)

    assert worst(found, central_differences(series, sources, moments, 1e-4)) < 1e-8


def test_magnetic_closed_form_against_differences_of_the_formula(setting):
    directions, axes, sources, moments = setting
    points = 0.0965 * directions
    found = magnetic_derivatives(points, axes, sources, moments)
    expected = central_differences(lambda r: magnetic_lead_field(points, axes, r), sources, moments, 1e-4)
    assert worst(found, expected) < 1e-8


def test_step_study(setting):
    """Fourth order down to a plateau of rounding: the default step of 1 mm leaves 2e-5, far from either end."""
    directions, axes, sources, moments = setting
    points = 0.0965 * directions
    exact = magnetic_derivatives(points, axes, sources, moments)
    steps = np.array([2e-3, 1e-3, 5e-4])
    errors = [
        worst(central_differences(lambda r: magnetic_lead_field(points, axes, r), sources, moments, step), exact)
        for step in steps
    ]
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    np.testing.assert_allclose(orders, 4, atol=0.3)
    assert errors[1] < 2e-5
    tiny = central_differences(lambda r: magnetic_lead_field(points, axes, r), sources, moments, 1e-7)
    assert 1e-10 < worst(tiny, exact) < 2e-5


def test_identities_of_the_position_derivative(setting):
    """EEG: ∂_iG_j = ∂_jG_i and Σ ∂_iG_i = 0. MEG of a sphere: Σ ∂_iL_i = 0 and d(r0·L) = 0."""
    directions, axes, sources, _ = setting
    points = 0.0965 * directions
    electric, magnetic = (
        np.stack([part(np.tile(axis, (len(sources), 1))) for axis in np.eye(3)], axis=2)
        for part in (
            lambda q: electric_derivatives(directions, sources, RADII, SIGMA, q),
            lambda q: magnetic_derivatives(points, axes, sources, q),
        )
    )  # (n, m, moment, direction)
    size = np.abs(electric).max()
    np.testing.assert_allclose(electric, np.swapaxes(electric, 2, 3), rtol=0, atol=1e-12 * size)
    assert np.abs(np.trace(electric, axis1=2, axis2=3)).max() < 1e-10 * size
    size = np.abs(magnetic).max()
    assert np.abs(np.trace(magnetic, axis1=2, axis2=3)).max() < 1e-12 * size
    field = magnetic_lead_field(points, axes, sources)
    silent = field + np.einsum("mj,nmjk->nmk", sources, magnetic)
    assert np.abs(silent).max() < 1e-12 * np.abs(field).max()


def test_differences_are_exact_for_a_cubic_and_keep_channels_apart():
    rng = np.random.default_rng(8)
    a, positions, moments = rng.normal(size=(4, 3)), rng.normal(size=(6, 3)), rng.normal(size=(6, 3))
    found = central_differences(lambda r: (a @ r.T)[:, :, None] ** 3 * [1, 2, 3], positions, moments, 0.1)
    expected = 3 * (a @ positions.T)[:, :, None] ** 2 * (moments @ [1, 2, 3])[:, None] * a[:, None]
    np.testing.assert_allclose(found, expected, rtol=1e-9, atol=1e-9)


def test_a_declared_sphere_is_differentiated_where_it_stands(sphere_head):
    model = fit_sphere_model(sphere_head, THREE)
    channels, members = channels_on(sphere_head), np.arange(0, 2562, 60)
    moments = np.random.default_rng(1).normal(size=(len(members), 3))
    gain, slopes = lead_field_derivatives(channels, map_cortex(model, sphere_head), members, moments)
    lead_field = at_head_positions(sphere_head, model, channels)
    positions = sphere_head.cortex.positions[members]
    np.testing.assert_allclose(gain, lead_field(positions), rtol=1e-12, atol=1e-12 * np.abs(gain).max())
    expected = central_differences(lead_field, positions, moments, 1e-3)
    for rows in (channels.is_electrode, ~channels.is_electrode):
        assert worst(slopes[rows], expected[rows]) < 2e-4


def test_spheres_given_as_surfaces_approach_the_exact_sphere_s_derivative():
    """Through map and curvature, only the polygons are between, and halved edges halve that: the normals of facets are
    of first order. Differences of the polygonal map, which jumps from facet to facet, are useless.
    """
    centre, radii = np.array([0.002, -0.003, 0.045]), np.array([0.08, 0.086, 0.093])
    errors = []
    for subdivisions in (4, 5):
        rounded = make_head(np.full(3, 0.08), centre, subdivisions=subdivisions)
        declared = dataclasses.replace(rounded, sphere=(centre, radii))
        channels, members = channels_on(declared), np.arange(0, len(rounded.cortex), len(rounded.cortex) // 40)
        moments = np.random.default_rng(1).normal(size=(len(members), 3))
        exact, mapped = (
            lead_field_derivatives(channels, map_cortex(fit_sphere_model(head, THREE), head), members, moments).slopes
            for head in (declared, rounded)
        )
        relative = np.linalg.norm(mapped - exact, axis=(0, 2)) / np.linalg.norm(exact, axis=(0, 2))
        errors.append(np.median(relative))
    assert errors[0] < 0.02
    assert errors[1] < 0.6 * errors[0]
    lead_field = at_head_positions(rounded, fit_sphere_model(rounded, THREE), channels)
    jumping = central_differences(lead_field, rounded.cortex.positions[members], moments, 1e-4)
    assert worst(jumping, exact) > 1


def on_spheres_of_an_exact_ellipsoid(model, positions):
    """`map_sources` for the smooth inner skull of `ellipsoid_head`: nearest point by Newton's method, no mesh."""
    r = positions - CENTRE
    t = np.full((len(r), 1), -0.5 * SEMI_AXES.min() ** 2)  # nearest point = a² r/(a² + t), the root nearest to 0
    for _ in range(60):
        part = SEMI_AXES * r / (SEMI_AXES**2 + t)
        value = (part**2).sum(axis=1, keepdims=True) - 1
        slope = -2 * (part**2 / (SEMI_AXES**2 + t)).sum(axis=1, keepdims=True)
        t = t - value / slope
    foot = SEMI_AXES**2 * r / (SEMI_AXES**2 + t)
    assert np.abs(((foot / SEMI_AXES) ** 2).sum(axis=1) - 1).max() < 1e-12
    normals = foot / SEMI_AXES**2
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    wanted = model.inner_skull_radius - np.linalg.norm(foot - r, axis=1)
    radius = np.minimum(wanted, model.brain_radius - 0.5e-3)
    u = positions - model.centre
    u /= np.linalg.norm(u, axis=1, keepdims=True)
    return MappedSources(
        positions, model.centre + radius[:, None] * u, None, smallest_rotations(normals, u), wanted > radius
    )


@pytest.mark.parametrize("conductivities", [THREE, FOUR], ids=["free to move", "held under the fluid"])
def test_mapped_ellipsoid_against_differences_of_the_exact_map(conductivities):
    """Within 2 % of the smooth surface that the mesh stands for, 1.2 % with halved edges (medians; curvature of a mesh
    with stretched triangles keeps some error however fine it is).
    """
    medians = []
    for subdivisions in (4, 5):
        head = make_head(SEMI_AXES, CENTRE, subdivisions=subdivisions)
        if conductivities == FOUR:  # 1 to 1.3 mm deep, all held at one radius
            positions = CENTRE + 0.985 * (head.inner_skull.vertices - CENTRE)
            head = dataclasses.replace(head, cortex=dataclasses.replace(head.cortex, positions=positions))
        model = fit_sphere_model(head, conductivities)
        channels, members = channels_on(head), np.arange(0, len(head.cortex), len(head.cortex) // 40)
        cortex = map_cortex(model, head)
        assert cortex.sources.held[members].all() == (conductivities == FOUR)
        moments = np.random.default_rng(1).normal(size=(len(members), 3))
        found = lead_field_derivatives(channels, cortex, members, moments).slopes
        setting = channels.positions, channels.axes, channels.is_electrode, channels.normals

        def lead_field(positions, model=model, head=head, setting=setting):
            sources = on_spheres_of_an_exact_ellipsoid(model, positions)
            return compute_lead_field(model, head, *setting, sources).gain

        expected = central_differences(lead_field, head.cortex.positions[members], moments, 1e-4)
        for rows in (channels.is_electrode, ~channels.is_electrode):
            errors = np.linalg.norm((found - expected)[rows], axis=(0, 2))
            medians.append(np.median(errors / np.linalg.norm(expected[rows], axis=(0, 2))))
    coarse, fine = np.array(medians).reshape(2, 2)
    assert (coarse < 0.02).all()
    assert (fine < 0.012).all()
