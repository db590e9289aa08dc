"""The magnetic lead field against derived figures, exact identities and Biot-Savart."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from references import sarvas_field as ref
from scipy.spatial.transform import Rotation

from layout.errors import LayoutError
from layout.physics.layered_sphere import electric_lead_field
from layout.physics.sarvas import magnetic_lead_field
from layout.units import FT


def random_directions(rng, n):
    v = rng.normal(size=(n, 3))
    return v / np.linalg.norm(v, axis=1, keepdims=True)


def vector_field(point, source, moment):
    """B (3,) [T] through three channels at one point."""
    return magnetic_lead_field(np.tile(point, (3, 1)), np.eye(3), [source], moments=[moment])[:, 0]


@pytest.mark.parametrize("radius", ref.ON_AXIS)
def test_field_straight_above(radius):
    field = vector_field([0, 0, radius], [0, 0, ref.DIPOLE_HEIGHT], [ref.MOMENT, 0, 0]) / FT
    assert abs(field[1] + ref.ON_AXIS[radius]) <= ref.TOLERANCE_FT
    assert np.abs(field[[0, 2]]).max() <= ref.TOLERANCE_FT


@pytest.mark.parametrize("radius", ref.PEAK_RADIAL)
def test_largest_radial_field(radius):
    degrees, peak = ref.PEAK_RADIAL[radius]
    angles = np.radians(degrees + np.linspace(-5, 5, 200_001))
    radial = np.stack([0 * angles, np.sin(angles), np.cos(angles)], axis=1)
    source, moment = [[0, 0, ref.DIPOLE_HEIGHT]], [[ref.MOMENT, 0, 0]]
    field = np.abs(magnetic_lead_field(radius * radial, radial, source, moments=moment))[:, 0] / FT
    assert abs(field.max() - peak) <= ref.TOLERANCE_FT
    assert abs(np.degrees(angles[np.argmax(field)]) - degrees) <= 5e-5  # the grid's pitch
    at = np.radians(degrees + np.array([-1e-3, 0, 1e-3]))
    around = np.stack([0 * at, np.sin(at), np.cos(at)], axis=1)
    left, top, right = np.abs(magnetic_lead_field(radius * around, around, source, moments=moment))[:, 0]
    vertex = 0.5 * (left - right) / (left - 2 * top + right) * 1e-3
    assert abs(vertex) <= ref.TOLERANCE_DEG


def test_matches_the_printed_formula_and_biot_savart_along_the_radius():
    rng = np.random.default_rng(1)
    for _ in range(20):
        point = rng.uniform(0.095, 0.13) * random_directions(rng, 1)[0]
        source = rng.uniform(0, 0.09) * random_directions(rng, 1)[0]
        moment = rng.normal(size=3)
        found = vector_field(point, source, moment)
        expected = ref.sarvas(point, source, moment)
        np.testing.assert_allclose(found, expected, rtol=0, atol=1e-12 * np.linalg.norm(expected))
        along = ref.primary_field(point, source, moment) @ point
        assert found @ point == pytest.approx(along, rel=1e-10, abs=1e-12 * np.linalg.norm(found))


def test_fixed_equals_free_times_moment():
    rng = np.random.default_rng(2)
    directions, axes = random_directions(rng, 50), random_directions(rng, 50)
    sources, moments = 0.08 * random_directions(rng, 30), rng.normal(size=(30, 3))
    free = magnetic_lead_field(0.1 * directions, axes, sources)
    fixed = magnetic_lead_field(0.1 * directions, axes, sources, moments=moments)
    np.testing.assert_allclose(fixed, np.einsum("nmk,mk->nm", free, moments), rtol=0, atol=1e-14 * np.abs(fixed).max())


def test_radial_and_central_sources_are_silent():
    rng = np.random.default_rng(3)
    directions, axes = random_directions(rng, 80), random_directions(rng, 80)
    sources = 0.07 * random_directions(rng, 25)
    free = magnetic_lead_field(0.1 * directions, axes, sources)
    radial = magnetic_lead_field(0.1 * directions, axes, sources, moments=sources / 0.07)
    assert np.abs(radial).max() < 1e-14 * np.abs(free).max()
    assert not magnetic_lead_field(0.1 * directions, axes, np.zeros((1, 3))).any()


def test_field_outside_has_no_divergence_and_no_curl(jacobian):
    rng = np.random.default_rng(4)
    for _ in range(4):
        source, moment = 0.06 * random_directions(rng, 1)[0], rng.normal(size=3)
        slope = jacobian(
            lambda point, s=source, q=moment: vector_field(point, s, q),
            0.11 * random_directions(rng, 1)[0],
            2e-4,
        )
        size = np.linalg.norm(slope)
        assert abs(np.trace(slope)) < 1e-7 * size
        assert np.linalg.norm(slope - slope.T) < 1e-7 * size


def test_lead_field_is_across_the_radius_and_divergence_free_in_the_source(jacobian):
    rng = np.random.default_rng(5)
    points, axes = 0.1 * random_directions(rng, 12), random_directions(rng, 12)

    def lead(source):
        return magnetic_lead_field(points, axes, source[None])[:, 0]

    for source in 0.06 * random_directions(rng, 3):
        gain, slope = lead(source), jacobian(lead, source, 2e-4)
        assert np.abs(gain @ source).max() < 1e-14 * np.abs(gain).max()
        traces = np.trace(slope, axis1=1, axis2=2)
        assert np.all(np.abs(traces) < 1e-7 * np.linalg.norm(slope, axis=(1, 2)))


def test_equals_primary_and_volume_currents_of_the_electric_solution():
    """Geselowitz 1970, IEEE Trans Magn 6:346 (memory): the surface potential's part added to
    Biot-Savart's."""
    radius, conductivity = 0.09, 0.33
    source, moment = np.array([0.01, 0.03, 0.05]), np.array([0.4, -0.7, 0.5])
    z, weights = np.polynomial.legendre.leggauss(160)
    phi = 2 * np.pi * np.arange(320) / 320
    rho = np.sqrt(1 - z**2)[:, None]
    normals = np.stack([rho * np.cos(phi), rho * np.sin(phi), np.repeat(z[:, None], 320, 1)], -1).reshape(-1, 3)
    areas = np.repeat(weights, 320) * radius**2 * 2 * np.pi / 320
    potential = electric_lead_field(normals, source[None], [radius], [conductivity], moments=moment[None])[:, 0]
    for point in 0.11 * random_directions(np.random.default_rng(6), 3):
        apart = point - radius * normals
        kernel = np.cross(normals, apart) / np.linalg.norm(apart, axis=1, keepdims=True) ** 3
        volume = -1e-7 * conductivity * (areas * potential) @ kernel
        expected = ref.primary_field(point, source, moment) + volume
        found = vector_field(point, source, moment)
        np.testing.assert_allclose(found, expected, rtol=0, atol=1e-8 * np.linalg.norm(expected))


@pytest.mark.parametrize("tilt", [0.0, 0.5])
def test_closed_loop_is_seen_magnetically_and_not_electrically(tilt):
    """Common practice: a current loop as dipoles along its turns, on a shell, then tilted out of it.

    On the shell any sum of tangential gradients is silent; tilted, radial and tangential parts must cancel.
    """
    turns = 2 * np.pi * np.arange(240) / 240
    circle = np.stack([np.cos(turns), np.sin(turns), 0 * turns], axis=1)
    along = np.stack([-np.sin(turns), np.cos(turns), 0 * turns], axis=1)
    tilted = Rotation.from_rotvec([tilt, 0, 0]).as_matrix()
    frame = Rotation.from_rotvec([0.4, -0.3, 0.2]).as_matrix()
    sources = (0.022 * circle @ tilted.T + [0, 0, 0.058]) @ frame.T
    moments = along @ tilted.T @ frame.T
    directions = random_directions(np.random.default_rng(7), 60)
    electric = electric_lead_field(
        directions,
        sources,
        [0.079, 0.08, 0.085, 0.09],
        [0.3, 1.5, 0.015, 0.3],
        moments=moments,
        tolerance=1e-14,
    )
    magnetic = magnetic_lead_field(0.1 * directions, directions, sources, moments=moments)
    assert np.abs(electric.sum(axis=1)).max() < 1e-11 * np.abs(electric).max()
    assert np.abs(magnetic.sum(axis=1)).max() > 5 * np.abs(magnetic).max()


def test_axes_straight_above_a_tangential_source():
    """Normal and parallel axes read zero, the perpendicular tangent reads more than any other axis."""
    up = np.array([0.48, 0.6, 0.64])
    moment = np.cross(up, [1.0, 0, 0])
    moment /= np.linalg.norm(moment)
    across = np.cross(up, moment)
    axes = np.concatenate([[up, moment, across], random_directions(np.random.default_rng(8), 500)])
    points = np.tile(0.1 * up, (len(axes), 1))
    reading = np.abs(magnetic_lead_field(points, axes, 0.07 * up[None], moments=moment[None]))[:, 0]
    assert reading[:2].max() < 1e-13 * reading[2]
    assert np.all(reading[3:] < reading[2])


def test_radial_field_covariance_depends_on_angle_and_product_of_radii():
    """Lütkenhöner 1994, J Appl Phys 75:7204 (memory): random dipoles on a shell, evenly spread."""
    z, weights = np.polynomial.legendre.leggauss(120)
    phi = 2 * np.pi * np.arange(240) / 240
    rho = np.sqrt(1 - z**2)[:, None]
    shell = np.stack([rho * np.cos(phi), rho * np.sin(phi), np.repeat(z[:, None], 240, 1)], -1).reshape(-1, 3)
    spread = np.repeat(weights, 240)[:, None]
    turns = Rotation.random(6, rng=np.random.default_rng(9)).as_matrix()
    radii = [(0.11, 0.11), (0.10, 0.121), (0.1375, 0.088)]
    values = []
    for turn, (one, two) in zip(turns, radii * 2, strict=True):
        directions = np.array([[0, 0, 1.0], [np.sin(0.6), 0, np.cos(0.6)]]) @ turn.T
        gain = magnetic_lead_field(directions * [[one], [two]], directions, 0.06 * shell)
        values.append(np.sum(gain[0] * gain[1] * spread))
    np.testing.assert_allclose(values, values[0], rtol=1e-8)
    other = magnetic_lead_field(directions * [[0.11], [0.12]], directions, 0.06 * shell)
    assert abs(np.sum(other[0] * other[1] * spread) / values[0] - 1) > 0.05


@settings(max_examples=30, deadline=None)
@given(
    angles=st.tuples(*[st.floats(-3.1, 3.1)] * 3),
    place=st.tuples(*[st.floats(-0.05, 0.05)] * 3),
)
def test_rotating_everything_changes_nothing(angles, place):
    turn = Rotation.from_rotvec(angles).as_matrix()
    rng = np.random.default_rng(10)
    points, axes, source = 0.1 * random_directions(rng, 20), random_directions(rng, 20), np.array([place])
    plain = magnetic_lead_field(points, axes, source)[:, 0]
    turned = magnetic_lead_field(points @ turn.T, axes @ turn.T, source @ turn.T)[:, 0]
    np.testing.assert_allclose(turned, plain @ turn.T, rtol=0, atol=1e-11 * np.abs(plain).max() + 1e-30)


@pytest.mark.parametrize(
    ("points", "axes", "moments", "words"),
    [
        ([[0, 0, 0.07]], [[0, 0, 1.0]], None, "farther from the sphere's centre"),
        ([[0, 0, 0.1], [0.06, 0, 0]], [[0, 0, 1.0], [1.0, 0, 0]], None, "farther from the sphere's centre"),
        ([[0, 0, np.nan]], [[0, 0, 1.0]], None, "farther from the sphere's centre"),
        ([[0, 0, 0.1]], [[0, 0, 1.1]], None, "unit vector, got length 1.1"),
        ([[0, 0, 0.1]], [[0, 0, 1.0], [1.0, 0, 0]], None, "one row per channel"),
        ([[0, 0, 0.1]], [[0, 0, 1.0]], np.ones((2, 3)), "one row per source"),
    ],
)
def test_impossible_input_is_one_sentence(points, axes, moments, words):
    with pytest.raises(LayoutError, match=words):
        magnetic_lead_field(points, axes, [[0, 0.07, 0]], moments=moments)
