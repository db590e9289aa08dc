"""The lead field of a whole head: rows in order, moments turned rightly, eyes placed as stated."""

import dataclasses

import numpy as np
import pytest
from references.sphere_potentials import homogeneous_closed_form

from layout.physics.layered_sphere import electric_lead_field
from layout.physics.lead_field import compute_lead_field, eye_field
from layout.physics.nearest_point import nearest_on_surface
from layout.physics.sarvas import magnetic_lead_field
from layout.physics.sphere_model import fit_sphere_model, map_magnetometers, map_sources

FOUR, THREE = (0.33, 1.79, 0.33 / 80, 0.33), (0.33, 0.33 / 80, 0.33)


def channels(head, seed=1, n=40):
    """Mixed channels on the upper scalp: positions, axes, is_electrode, normals."""
    rng = np.random.default_rng(seed)
    sites = rng.choice(np.flatnonzero(head.scalp.vertices[:, 2] > 0.02), n, replace=False)
    is_electrode = rng.random(n) < 0.5
    normals = head.scalp.normals[sites]
    positions = head.scalp.vertices[sites] + np.where(is_electrode, 0, 6.5e-3)[:, None] * normals
    axes = rng.normal(size=(n, 3))
    axes /= np.linalg.norm(axes, axis=1, keepdims=True)
    axes[is_electrode] = 0
    return positions, axes, is_electrode, normals


def field_of(model, head, setting, sources, moments):
    """Lead field of the channels to sources given in the head, placed on the model."""
    return compute_lead_field(model, head, *setting, map_sources(model, head, sources, moments))


def test_sphere_head_rows_are_the_kernels_rows(sphere_head):
    model = fit_sphere_model(sphere_head, THREE)
    positions, axes, is_electrode, normals = channels(sphere_head)
    sources = sphere_head.cortex.positions[::50]
    field = field_of(model, sphere_head, (positions, axes, is_electrode, normals), sources, None)
    assert field.gain.shape == (40, len(sources), 3)
    for row in range(40):
        point = positions[row : row + 1] - model.centre
        if is_electrode[row]:
            expected = electric_lead_field(point, sources - model.centre, model.radii, model.conductivities)
        else:
            expected = magnetic_lead_field(point, axes[row : row + 1], sources - model.centre)
        np.testing.assert_allclose(field.gain[row], expected[0], rtol=0, atol=1e-12 * np.abs(expected).max())
    assert field.displacements.sources_max == field.displacements.magnetometers_max == 0
    assert field.displacements.electrodes_max < 1e-12


def test_free_times_normal_equals_fixed(ellipsoid_head):
    """The mapped frame is turned back into the head's: moments are given in the head frame either way."""
    model = fit_sphere_model(ellipsoid_head, FOUR)
    setting = channels(ellipsoid_head)
    rng = np.random.default_rng(2)
    sources = ellipsoid_head.cortex.positions[::20]
    moments = rng.normal(size=sources.shape)
    free = field_of(model, ellipsoid_head, setting, sources, None).gain
    fixed = field_of(model, ellipsoid_head, setting, sources, moments).gain
    for rows in (setting[2], ~setting[2]):
        np.testing.assert_allclose(
            np.einsum("nmk,mk->nm", free[rows], moments),
            fixed[rows],
            rtol=0,
            atol=1e-12 * np.abs(fixed[rows]).max(),
        )


def test_moments_along_the_skull_normal_are_magnetically_silent(ellipsoid_head):
    model = fit_sphere_model(ellipsoid_head, FOUR)
    positions, axes, is_electrode, normals = channels(ellipsoid_head)
    sources = ellipsoid_head.cortex.positions[::20]
    skull = nearest_on_surface(ellipsoid_head.inner_skull, sources).normals
    silent = field_of(model, ellipsoid_head, (positions, axes, is_electrode, normals), sources, skull)
    across = np.cross(skull, [0.1, 0.2, 0.97])
    heard = field_of(model, ellipsoid_head, (positions, axes, is_electrode, normals), sources, across)
    coils = ~is_electrode
    assert np.abs(silent.gain[coils]).max() < 1e-12 * np.abs(heard.gain[coils]).max()
    assert np.abs(silent.gain[is_electrode]).max() > np.abs(heard.gain[is_electrode]).max()


def test_spheres_given_as_surfaces_agree_with_spheres_declared(round_head, sphere_head):
    """The same geometry through the mapping: only the polygons' sagitta (under 0.1 mm) is between."""
    positions, axes, is_electrode, normals = channels(sphere_head)
    sources = sphere_head.cortex.positions[::50]
    moments = np.random.default_rng(3).normal(size=sources.shape)
    setting = (positions, axes, is_electrode, normals)
    declared = field_of(fit_sphere_model(sphere_head, THREE), sphere_head, setting, sources, moments)
    mapped = field_of(fit_sphere_model(round_head, THREE), round_head, setting, sources, moments)
    report = mapped.displacements
    assert max(report.sources_max, report.magnetometers_max) < 1e-4
    assert report.electrodes_max < 2e-4
    assert report.sources_clipped == 0
    for rows in (is_electrode, ~is_electrode):
        difference = np.linalg.norm(mapped.gain[rows] - declared.gain[rows])
        assert difference < 0.01 * np.linalg.norm(declared.gain[rows])


def test_one_kind_only_and_displacements(ellipsoid_head):
    model = fit_sphere_model(ellipsoid_head, FOUR)
    positions, axes, is_electrode, normals = channels(ellipsoid_head)
    sources, moments = ellipsoid_head.cortex.positions[::100], ellipsoid_head.cortex.normals[::100]
    both = field_of(model, ellipsoid_head, (positions, axes, is_electrode, normals), sources, moments)
    for rows in (is_electrode, ~is_electrode):
        setting = (positions[rows], axes[rows], is_electrode[rows], normals[rows])
        part = field_of(model, ellipsoid_head, setting, sources, moments)
        np.testing.assert_array_equal(part.gain, both.gain[rows])
    report = both.displacements
    moved = np.linalg.norm(map_sources(model, ellipsoid_head, sources, None).positions - sources, axis=1)
    assert report.sources_rms == pytest.approx(np.sqrt(np.mean(moved**2)))
    assert report.sources_max == pytest.approx(moved.max())
    assert report.electrodes_rms > 0
    assert report.magnetometers_max >= report.magnetometers_rms > 0


def test_eyes_by_the_closed_forms(ellipsoid_head):
    """Electrodes: homogeneous sphere of the scalp's conductivity; magnetometers: the spherical formula."""
    head = ellipsoid_head
    model = fit_sphere_model(head, (0.33, 1.79, 0.33 / 80, 0.43))
    positions, axes, is_electrode, normals = channels(head)
    found = eye_field(model, head, positions, axes, is_electrode, normals)
    assert found.shape == (40, 2, 3)
    depth = np.maximum(nearest_on_surface(head.scalp, head.eyes).inside_depth, 10e-3)
    towards = head.eyes - model.centre
    eyes = (model.outer_radius - depth)[:, None] * towards / np.linalg.norm(towards, axis=1, keepdims=True)
    scalp = positions[is_electrode] - model.centre
    scalp = model.outer_radius * scalp / np.linalg.norm(scalp, axis=1, keepdims=True)
    expected = homogeneous_closed_form(scalp, eyes, model.outer_radius, 0.43)
    np.testing.assert_allclose(found[is_electrode], expected, rtol=0, atol=1e-8 * np.abs(expected).max())
    coils = ~is_electrode
    points, turned = map_magnetometers(model, head, positions[coils], axes[coils], normals[coils])
    field = magnetic_lead_field(points - model.centre, turned, eyes)
    np.testing.assert_allclose(found[coils], field, rtol=0, atol=1e-13 * np.abs(field).max())


def test_eye_near_the_scalp_is_held_ten_millimetres_under(sphere_head):
    model = fit_sphere_model(sphere_head, THREE)

    def field(radius):
        eyes = model.centre + np.array([[0, radius, 0], [0, 0.07, 0]])
        return eye_field(model, dataclasses.replace(sphere_head, eyes=eyes), *channels(sphere_head))

    held, at_limit, deeper = field(0.12), field(0.083), field(0.0825)
    np.testing.assert_allclose(held, at_limit, rtol=1e-12, atol=1e-18)
    assert np.abs(deeper - at_limit)[:, 0].max() > 1e-3 * np.abs(at_limit).max()


def test_eye_beyond_a_magnetometer_is_clipped_for_the_magnetic_rows(sphere_head):
    model = fit_sphere_model(sphere_head, THREE)
    head = dataclasses.replace(sphere_head, eyes=model.centre + np.array([[-0.03, 0.075, 0], [0.03, 0.05, 0]]))
    points = model.centre + np.array([[0, 0, 0.0805], [0, 0, 0.1], [0, 0, 0.093]])
    axes, is_electrode = np.array([[1.0, 0, 0], [1.0, 0, 0], [0, 0, 0]]), np.array([False, False, True])
    normals = np.tile([0, 0, 1.0], (3, 1))
    found = eye_field(model, head, points, axes, is_electrode, normals)
    eyes = head.eyes - model.centre
    inward = eyes * [[0.9 * 0.08 / np.linalg.norm(eyes[0])], [1.0]]  # the second is under the limit already
    clipped = magnetic_lead_field(points[:2] - model.centre, axes[:2], inward)
    np.testing.assert_allclose(found[:2], clipped, rtol=0, atol=1e-13 * np.abs(clipped).max())
    electric = homogeneous_closed_form(points[2:] - model.centre, eyes, 0.093, 0.33)
    np.testing.assert_allclose(found[2:], electric, rtol=0, atol=1e-8 * np.abs(electric).max())
