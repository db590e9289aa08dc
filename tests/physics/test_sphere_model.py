"""The quick model: the fit recovers known spheres, the mappings keep what they promise."""

import dataclasses

import numpy as np
import pytest
import trimesh
from hypothesis import given, settings
from hypothesis import strategies as st

from layout.errors import LayoutError
from layout.physics.nearest_point import nearest_on_surface
from layout.physics.sphere_model import (
    SphereModel,
    displacements,
    fit_sphere_model,
    map_electrodes,
    map_magnetometers,
    map_sources,
    smallest_rotations,
)

THREE, FOUR = (0.33, 0.33 / 80, 0.33), (0.33, 1.79, 0.33 / 80, 0.33)


def unit(vectors):
    return vectors / np.linalg.norm(vectors, axis=-1, keepdims=True)


def library_distance(surface, points):
    """Distances [m] by trimesh, asked in mm (in m its ties are as wide as 0.1 mm)."""
    library = trimesh.Trimesh(1e3 * surface.vertices, surface.faces, process=False)
    return np.asarray(trimesh.proximity.closest_point(library, 1e3 * points)[1]) / 1e3


def test_fit_recovers_known_spheres(round_head):
    """Vertices lie on a sphere exactly; the gaps to polygons are short of the sphere by the sagitta, under
    0.06 mm."""
    model = fit_sphere_model(round_head, THREE)
    np.testing.assert_allclose(model.centre, [0.002, -0.003, 0.045], rtol=0, atol=1e-9)
    assert model.radii[0] == pytest.approx(0.08, abs=1e-9)
    for found, wanted, polygons in zip(model.radii[1:], (0.086, 0.093), (1, 2), strict=True):
        assert -polygons * 1e-4 < found - wanted < 0
    four = fit_sphere_model(round_head, FOUR)
    np.testing.assert_allclose(four.radii[1:], model.radii, rtol=0, atol=1e-15)
    assert four.radii[1] - four.radii[0] == pytest.approx(2e-3, abs=1e-12)
    assert four.inner_skull_radius == four.radii[1]
    assert model.inner_skull_radius == model.radii[0] == model.brain_radius


def test_fit_looks_at_the_upper_part_only(round_head):
    """Denting the skull base changes nothing."""
    vertices = round_head.inner_skull.vertices.copy()
    vertices[vertices[:, 2] < 0.005] += [0, 0, 0.004]
    dented = dataclasses.replace(round_head, inner_skull=dataclasses.replace(round_head.inner_skull, vertices=vertices))
    found = fit_sphere_model(dented, THREE)
    np.testing.assert_allclose(found.centre, fit_sphere_model(round_head, THREE).centre, rtol=0, atol=1e-9)


def test_fit_is_a_least_squares_sphere(ellipsoid_head):
    """No nearby sphere has smaller area-weighted squared distances (areas by trimesh)."""
    surface = ellipsoid_head.inner_skull
    upper = surface.vertices[:, 2] > 0.01
    areas = np.bincount(surface.faces.ravel(), np.repeat(surface.mesh.area_faces / 3, 3))[upper]

    def cost(centre, radius):
        return areas @ (np.linalg.norm(surface.vertices[upper] - centre, axis=1) - radius) ** 2

    model = fit_sphere_model(ellipsoid_head, THREE)
    best = cost(model.centre, model.radii[0])
    for step in np.concatenate([np.eye(4), -np.eye(4)]) * 1e-5:
        assert cost(model.centre + step[:3], model.radii[0] + step[3]) > best


def test_sphere_head_is_taken_as_it_is(sphere_head):
    model = fit_sphere_model(sphere_head, THREE)
    np.testing.assert_array_equal(model.radii, sphere_head.sphere[1])
    rng = np.random.default_rng(1)
    points = model.centre + 0.1 * unit(rng.normal(size=(20, 3)))
    axes, normals = unit(rng.normal(size=(2, 20, 3)))
    moved, turned = map_magnetometers(model, sphere_head, points, axes, normals)
    np.testing.assert_array_equal(moved, points)
    np.testing.assert_array_equal(turned, axes)
    inside = model.centre + 0.07 * normals
    sources = map_sources(model, sphere_head, inside, normals)
    np.testing.assert_array_equal(sources.positions, inside)
    np.testing.assert_array_equal(sources.normals, normals)
    np.testing.assert_array_equal(sources.rotations, np.broadcast_to(np.eye(3), (20, 3, 3)))
    on_scalp = model.centre + 0.093 * normals
    np.testing.assert_allclose(map_electrodes(model, on_scalp), on_scalp, rtol=0, atol=1e-16)


@pytest.mark.parametrize("conductivities", [THREE, FOUR])
def test_sources_keep_depth_and_angle(ellipsoid_head, conductivities):
    head = ellipsoid_head
    model = fit_sphere_model(head, conductivities)
    rng = np.random.default_rng(2)
    shares = rng.uniform(0.3, 1.0, size=(600, 1))
    middle = head.inner_skull.vertices.mean(axis=0)
    positions = middle + shares * (head.inner_skull.vertices[rng.integers(0, 2562, 600)] - middle)
    normals = unit(rng.normal(size=(600, 3)))
    mapped = map_sources(model, head, positions, normals)
    distance = library_distance(head.inner_skull, positions)
    offset = mapped.positions - model.centre
    radius, u = np.linalg.norm(offset, axis=1), unit(offset)
    limit = model.brain_radius - 0.5e-3
    free = model.inner_skull_radius - distance < limit
    assert 0 < np.count_nonzero(free) < 600
    assert mapped.clipped == np.count_nonzero(~free)
    np.testing.assert_allclose((model.inner_skull_radius - radius)[free], distance[free], rtol=0, atol=1e-11)
    np.testing.assert_allclose(radius[~free], limit, rtol=0, atol=1e-12)
    np.testing.assert_allclose(u, unit(positions - model.centre), rtol=0, atol=1e-12)
    local = nearest_on_surface(head.inner_skull, positions).normals
    np.testing.assert_allclose(np.sum(mapped.normals * u, axis=1), np.sum(normals * local, axis=1), rtol=0, atol=1e-12)
    np.testing.assert_allclose(mapped.normals, np.einsum("mij,mj->mi", mapped.rotations, normals), rtol=0, atol=1e-14)


def test_source_outside_the_skull_is_pulled_in_and_counted(ellipsoid_head):
    model = fit_sphere_model(ellipsoid_head, FOUR)
    mapped = map_sources(model, ellipsoid_head, [[0, 0.02, 0.12], [0, 0, 0.05]], None)
    assert mapped.clipped == 1
    assert mapped.normals is None
    assert np.linalg.norm(mapped.positions[0] - model.centre) == pytest.approx(model.brain_radius - 0.5e-3)


def test_electrodes_land_on_the_outer_radius_in_their_direction(ellipsoid_head):
    model = fit_sphere_model(ellipsoid_head, THREE)
    scalp = ellipsoid_head.scalp.vertices
    offset = map_electrodes(model, scalp) - model.centre
    np.testing.assert_allclose(np.linalg.norm(offset, axis=1), model.outer_radius, rtol=1e-13)
    np.testing.assert_allclose(unit(offset), unit(scalp - model.centre), rtol=0, atol=1e-13)


def test_magnetometers_keep_their_gap_and_normal_axes_become_radial(ellipsoid_head):
    head = ellipsoid_head
    model = fit_sphere_model(head, FOUR)
    normals = head.scalp.normals[::7]
    points = head.scalp.vertices[::7] + 6.5e-3 * normals
    moved, axes = map_magnetometers(model, head, points, normals, normals)
    offset = moved - model.centre
    gap = library_distance(head.inner_skull, points)
    np.testing.assert_allclose(np.linalg.norm(offset, axis=1) - model.inner_skull_radius, gap, rtol=0, atol=1e-11)
    np.testing.assert_allclose(unit(offset), unit(points - model.centre), rtol=0, atol=1e-12)
    np.testing.assert_allclose(axes, unit(offset), rtol=0, atol=1e-12)
    tangents = unit(np.cross(normals, [0.3, 0.2, 0.9]))
    _, turned = map_magnetometers(model, head, points, tangents, normals)
    assert np.abs(np.sum(turned * axes, axis=1)).max() < 1e-12
    with pytest.raises(LayoutError, match="outside the inner skull"):
        map_magnetometers(model, head, [[0, 0, 0.04]], [[0, 0, 1.0]], [[0, 0, 1.0]])


vectors = st.tuples(*[st.floats(-1, 1)] * 3).filter(lambda v: np.linalg.norm(v) > 0.1)


@settings(max_examples=200, deadline=None)
@given(start=vectors, end=vectors, opposite=st.sampled_from([None, 0.0, 1e-13, 1e-9, 1e-5]))
def test_smallest_rotation(start, end, opposite):
    """A rotation, takes start to end, and by no more than the angle between them (also near half a turn)."""
    start, end = unit(np.array(start)), unit(np.array(end))
    if opposite is not None:
        end = unit(-start + opposite * end)
    turn = smallest_rotations(start, end)[0]
    np.testing.assert_allclose(turn @ turn.T, np.eye(3), rtol=0, atol=1e-13)
    assert np.linalg.det(turn) == pytest.approx(1, abs=1e-13)
    np.testing.assert_allclose(turn @ start, end, rtol=0, atol=1e-13)
    assert np.trace(turn) == pytest.approx(1 + 2 * start @ end, abs=1e-12)


def test_displacements_by_hand():
    zero = np.zeros((2, 3))
    report = displacements((zero, [[3e-3, 0, 0], [0, 4e-3, 0]]), (zero, zero), (zero[:0], zero[:0]), 5)
    assert report.sources_rms == pytest.approx(np.sqrt(12.5) * 1e-3)
    assert report.sources_max == pytest.approx(4e-3)
    assert report.electrodes_rms == report.electrodes_max == report.magnetometers_rms == 0
    assert "sources 3.5 mm (at most 4.0)" in report.summary()
    assert "5 sources are held" in report.summary()
    assert "electrodes" not in report.summary()
    assert "magnetometers" not in report.summary()


def test_impossible_models_are_one_sentence(round_head, sphere_head):
    with pytest.raises(LayoutError, match=r"need 3 .* or 4 .* got 2"):
        fit_sphere_model(round_head, (0.33, 0.33))
    with pytest.raises(LayoutError, match="sphere of 3 radii"):
        fit_sphere_model(sphere_head, FOUR)
    low = dataclasses.replace(
        round_head,
        inner_skull=dataclasses.replace(round_head.inner_skull, vertices=round_head.inner_skull.vertices - [0, 0, 0.2]),
    )
    with pytest.raises(LayoutError, match="at least 12 vertices"):
        fit_sphere_model(low, THREE)


def test_five_layers_have_their_fluid_second():
    model = SphereModel(np.zeros(3), np.array([0.077, 0.079, 0.082, 0.086, 0.092]), np.ones(5))
    assert (model.brain_radius, model.inner_skull_radius, model.outer_radius) == (0.077, 0.079, 0.092)
