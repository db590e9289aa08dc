"""Sensors with an extent in the quick model: gradiometers are differences, averages converge, planar pairs add."""

from dataclasses import replace

import numpy as np
import pytest
from references import gradiometers as ref
from scipy.spatial.transform import Rotation

from layout.anatomy.scalp_points import tangents_at
from layout.brief.objects_stock import ElectrodeBrief, GradiometerBrief, MagnetometerBrief, SitesBrief
from layout.noise.surroundings import surroundings_columns
from layout.physics import lead_field
from layout.physics.channels import Channels, electrodes_at, joined, normal_magnetometers_above
from layout.physics.derivatives import lead_field_derivatives
from layout.physics.differences import central_differences
from layout.physics.layered_sphere import electric_lead_field
from layout.physics.sarvas import magnetic_lead_field
from layout.physics.sphere_model import fit_sphere_model, map_cortex, map_sources
from layout.sensing.pickup import box_points, disc_points, sensor_pickup

SITES = SitesBrief(grid_pitch=0.02)
THREE = (0.33, 0.33 / 80, 0.33)
SOME = np.arange(0, 2000, 40)


def coil(**changes):
    return MagnetometerBrief("coil", 1, SITES, 1e-14, **changes)


def gradiometer(shape, baseline, **changes):
    return GradiometerBrief("pair", 1, SITES, shape, baseline, 1e-14, **changes)


def channels_of(entry, positions, normals, scalp, along=(0,)):
    """One channel per site and entry of `along`: an axial gradiometer, or a baseline along that tangent."""
    frames = np.concatenate([np.cross(tangents_at(normals)[:, :1], normals[:, None]), tangents_at(normals)[:, :1]], 1)
    frames = np.concatenate([frames, normals[:, None]], axis=1).transpose(0, 2, 1)
    baselines = np.zeros((len(along), *positions.shape))
    if entry.kind == "gradiometer":
        tangents = tangents_at(normals)
        for row, which in enumerate(along):
            baselines[row] = (
                -entry.baseline * normals if entry.shape == "axial" else entry.baseline * tangents[:, which]
            )
    n = len(along)
    positions, normals, frames = np.tile(positions, (n, 1)), np.tile(normals, (n, 1)), np.tile(frames, (n, 1, 1))
    electrode = np.full(len(positions), entry.kind == "electrode")
    axes = np.where(electrode[:, None], 0.0, normals)
    kinds = np.zeros(len(positions), int)
    pickup = sensor_pickup((entry,), kinds, positions, axes, frames, baselines.reshape(-1, 3), normals, scalp)
    return Channels(positions, axes, electrode, normals, pickup)


def cortex_of(head):
    return map_cortex(fit_sphere_model(head, THREE), head)


def over(head, gap=6.5e-3, n=12, seed=1):
    """Places `gap` above the upper scalp, and its normals."""
    upper = np.flatnonzero(head.scalp.vertices[:, 2] > 0.05)
    at = np.random.default_rng(seed).choice(upper, n, replace=False)
    return head.scalp.vertices[at] + gap * head.scalp.normals[at], head.scalp.normals[at]


def points_as_magnetometers(channels, positions):
    return replace(channels, positions=positions, pickup=None)


@pytest.mark.parametrize("free", [True, False])
@pytest.mark.parametrize("shape", ["axial", "planar"])
def test_gradiometer_is_the_difference_of_its_magnetometers(sphere_head, shape, free):
    cortex = cortex_of(sphere_head)
    places, normals = over(sphere_head)
    pair = channels_of(gradiometer(shape, 0.02), places, normals, sphere_head.scalp)
    shift = 0.02 * (normals if shape == "axial" else tangents_at(normals)[:, 0])
    plus = places if shape == "axial" else places + shift / 2
    minus = places + shift if shape == "axial" else places - shift / 2
    apart = [points_as_magnetometers(pair, at).lead_field(cortex, SOME, free).gain for at in (plus, minus)]
    found = pair.lead_field(cortex, SOME, free).gain
    np.testing.assert_allclose(found, apart[0] - apart[1], rtol=0, atol=1e-12 * np.abs(apart[0]).max())
    # and the eyes' field alike
    eyes = [points_as_magnetometers(pair, at).eye_gain(cortex) for at in (plus, minus)]
    found = pair.eye_gain(cortex)
    np.testing.assert_allclose(found, eyes[0] - eyes[1], rtol=0, atol=1e-12 * np.abs(eyes[0]).max())


def test_a_sensor_moves_onto_the_spheres_as_a_rigid_body(ellipsoid_head):
    """Its coils keep their distance and stay parallel, so that on the spheres too it is blind to even fields."""
    model = fit_sphere_model(ellipsoid_head, THREE)
    places, normals = over(ellipsoid_head)
    pair = channels_of(gradiometer("planar", 0.03, cell=(3e-3, 3e-3, 3e-3)), places, normals, ellipsoid_head.scalp)
    arrays = (pair.positions, pair.axes, pair.is_electrode, pair.normals)
    centres = lead_field.place_channels(model, ellipsoid_head, *arrays)
    points = lead_field.place_pickup(model, ellipsoid_head, places, normals, centres, pair.pickup)
    assert np.linalg.norm(centres.coils - places, axis=1).max() > 1e-3  # the map does move them
    for channel in range(len(pair)):
        mine = pair.pickup.channel == channel
        before, after = pair.pickup.positions[mine] - places[channel], points.coils[mine] - centres.coils[channel]
        turn, _ = Rotation.align_vectors(after, before)
        np.testing.assert_allclose(turn.apply(before), after, atol=1e-12)
        np.testing.assert_allclose(turn.apply(pair.axes[[channel]]), points.axes[mine][:1], atol=1e-9)
        np.testing.assert_allclose(points.axes[mine], np.tile(centres.axes[channel], (mine.sum(), 1)), atol=1e-12)


def test_vanishing_extent_is_the_point_on_a_mapped_head(ellipsoid_head):
    """The mapped lead field of a tiny cell is that of the point, rotations of free moments included."""
    cortex = cortex_of(ellipsoid_head)
    places, normals = over(ellipsoid_head)
    tiny = channels_of(coil(cell=(1e-6, 1e-6, 1e-6)), places, normals, ellipsoid_head.scalp)
    for free in (True, False):
        point = replace(tiny, pickup=None).lead_field(cortex, SOME, free).gain
        np.testing.assert_allclose(tiny.lead_field(cortex, SOME, free).gain, point, atol=1e-8 * np.abs(point).max())


def orders(error_of, sizes):
    """Observed orders of convergence between neighbouring sizes."""
    errors = np.array([error_of(size) for size in sizes])
    return np.log2(errors[:-1] / errors[1:])


@pytest.mark.parametrize(
    ("keys", "order"),
    [
        (lambda s: {"cell": (s, s, 0.0)}, 2),
        (lambda s: {"cell": (s, s, 2 * s)}, 2),
        (lambda s: {"coil_diameter": s}, 2),
        # outside the head the field is harmonic: its average over a cube differs from the centre's value by s⁴ only
        (lambda s: {"cell": (s, s, s)}, 4),
    ],
)
def test_finite_cell_converges_to_the_point(sphere_head, keys, order):
    cortex = cortex_of(sphere_head)
    places, normals = over(sphere_head)
    point = normal_magnetometers_above(places, normals, 0.0).lead_field(cortex, SOME, True).gain

    def error(size):
        extended = channels_of(coil(**keys(size)), places, normals, sphere_head.scalp)
        return np.linalg.norm(extended.lead_field(cortex, SOME, True).gain - point)

    np.testing.assert_allclose(orders(error, [8e-3, 4e-3, 2e-3, 1e-3]), order, atol=0.1)


def test_disc_electrode_converges_to_the_point_with_order_two(sphere_head):
    cortex = cortex_of(sphere_head)
    places, normals = over(sphere_head, gap=0.0)
    point = electrodes_at(places).lead_field(cortex, SOME, True).gain

    def error(size):
        entry = ElectrodeBrief("disc", 1, SITES, 1e-6, disc_diameter=size)
        return np.linalg.norm(
            channels_of(entry, places, normals, sphere_head.scalp).lead_field(cortex, SOME, True).gain - point
        )

    np.testing.assert_allclose(orders(error, [16e-3, 8e-3, 4e-3, 2e-3]), 2.0, atol=0.15)


SOURCE, MOMENT = np.array([[0, 0, 70e-3]]), np.array([[10e-9, 0, 0]])


def gauss(n, edge):
    x, w = np.polynomial.legendre.leggauss(n)
    return edge / 2 * x, w / 2


@pytest.mark.parametrize("edges", [(3e-3, 3e-3, 3e-3), (10e-3, 10e-3, 0), (20e-3, 20e-3, 0)])
def test_box_points_against_a_fine_average(edges):
    """Radial field 6.5 mm over a scalp of 90 mm, source 20 mm under it.

    The error of two Gauss points along an edge e is e⁴ f/4320, and 1/d² has f/f = 120/d⁴ at d = 26.5 mm.
    """

    def field(points):
        axes = np.tile([0, 0, 1.0], (len(points), 1))
        return magnetic_lead_field(points, axes, SOURCE, moments=MOMENT)[:, 0]

    grids = [gauss(10, edge) if edge else (np.zeros(1), np.ones(1)) for edge in edges]
    fine = np.stack(np.meshgrid(*(g[0] for g in grids), indexing="ij"), -1).reshape(-1, 3)
    weights = np.einsum("i,j,k->ijk", *(g[1] for g in grids)).ravel()
    coarse, coarse_weights = box_points(edges)
    errors, sizes = [], []
    for y in np.linspace(0, 0.05, 26):
        centre = np.array([0, y, 0.0965])
        exact = weights @ field(centre + fine)
        errors.append(abs(coarse_weights @ field(centre + coarse) - exact))
        sizes.append(abs(exact))
    assert max(errors) < sum((edge / 26.5e-3) ** 4 * 120 / 4320 for edge in edges) * max(sizes)


def test_disc_electrode_against_a_fine_average():
    """10 mm disc on a 90 mm sphere, radial source 20 mm under it (homogeneous sphere)."""

    def potential(flat):
        points = np.column_stack([flat, np.full(len(flat), 90e-3)])
        return electric_lead_field(points, SOURCE, np.array([90e-3]), np.array([0.33]))[:, 0, 2]

    radius, along = np.polynomial.legendre.leggauss(12)
    r, w = (radius + 1) / 2 * 5e-3, along * (radius + 1) / 2
    angles = np.arange(24) * 2 * np.pi / 24
    fine = np.stack([np.outer(r, np.cos(angles)), np.outer(r, np.sin(angles))], -1).reshape(-1, 2)
    exact = np.repeat(w, 24) / 24 @ potential(fine)
    points, weights = disc_points(10e-3)
    assert weights @ potential(points) == pytest.approx(exact, rel=1e-4, abs=0)
    assert abs(potential(np.zeros((1, 2)))[0] / exact - 1) > 0.01  # the average is not the point


def above_dipole(polar, azimuth, radius):
    """Sites at polar angles [rad] from straight above the dipole, and their normals."""
    normals = np.stack([np.sin(polar) * np.cos(azimuth), np.sin(polar) * np.sin(azimuth), np.cos(polar)], axis=-1)
    return radius * normals, normals


def sensed(channels):
    """Reading (n,) [T] of channels about a sphere at the origin, from the tangential dipole."""
    points = channels.points
    return channels.combine(magnetic_lead_field(points.positions, points.axes, SOURCE, moments=MOMENT))[:, 0]


def test_planar_gradiometer_peaks_above_a_tangential_source_where_a_normal_magnetometer_reads_nothing(sphere_head):
    polar, azimuth = np.meshgrid(np.radians(np.arange(0, 61, 2)), np.radians(np.arange(0, 360, 15)), indexing="ij")
    places, normals = above_dipole(polar.ravel(), azimuth.ravel(), 96.5e-3)
    pair = channels_of(gradiometer("planar", 4e-3), places, normals, sphere_head.scalp, along=(0, 1))
    gradients = sensed(pair).reshape(2, *polar.shape)
    size = np.linalg.norm(gradients, axis=0)
    assert np.argmax(size) // polar.shape[1] == 0  # straight above
    slope = ref.slope_above(96.5e-3, 70e-3, 10e-9)
    np.testing.assert_allclose(size[0] / 4e-3, slope, rtol=0.01)
    assert (np.diff(size.max(axis=1)[:15]) < 0).all()
    normal = np.abs(sensed(replace(channels_of(coil(), places, normals, sphere_head.scalp), pickup=None)))
    normal = normal.reshape(polar.shape)
    assert normal[0].max() < 1e-9 * normal.max()
    assert np.argmax(normal) // polar.shape[1] in (6, 7)  # 12.96°, see references/sarvas_field


def test_slope_converges_to_the_closed_form_with_order_two(sphere_head):
    place, normal = above_dipole(np.zeros(1), np.zeros(1), 96.5e-3)
    slope = ref.slope_above(96.5e-3, 70e-3, 10e-9)

    def error(baseline):
        # at the apex the first tangent is +y: across the dipole
        pair = channels_of(gradiometer("planar", baseline), place, normal, sphere_head.scalp)
        return abs(abs(sensed(pair)[0]) / baseline - slope)

    np.testing.assert_allclose(orders(error, [8e-3, 4e-3, 2e-3, 1e-3]), 2.0, atol=0.1)


def test_normal_field_and_two_crossed_gradients_are_three_channels(sphere_head):
    """Common practice of helmets with three coils to a place; two like gradients would be two channels only."""
    cortex = cortex_of(sphere_head)
    places, normals = over(sphere_head, gap=0.02, n=1)
    crossed = channels_of(gradiometer("planar", 0.017), places, normals, sphere_head.scalp, along=(0, 1))
    alike = channels_of(gradiometer("planar", 0.017), places, normals, sphere_head.scalp, along=(0, 0))
    single = normal_magnetometers_above(places, normals, 0.0)
    shares = []
    for pair in (crossed, alike):
        rows = joined(single, pair).lead_field(cortex, np.arange(2562), True).gain.reshape(3, -1)
        values = np.linalg.svd(rows / np.linalg.norm(rows, axis=1, keepdims=True), compute_uv=False)
        shares.append(values[2] / values[0])
    assert shares[0] > 0.3
    assert shares[1] < 1e-12


def test_gradiometers_are_blind_to_a_homogeneous_field_and_read_its_slope(sphere_head):
    """The surroundings' five constant gradients: b · G n exactly, whatever the place."""
    places, normals = over(sphere_head)
    field, slope = 1e-12, 1e-11
    for shape, along in (("axial", -normals), ("planar", tangents_at(normals)[:, 0])):
        pair = channels_of(gradiometer(shape, 0.02, cell=(3e-3,) * 3), places, normals, sphere_head.scalp)
        points = pair.points
        columns = pair.combine(surroundings_columns(points.positions, points.axes, field, slope))
        assert np.abs(columns[:, :3]).max() < 1e-14 * field
        one = surroundings_columns(places + 0.02 * along, normals, 0.0, slope)
        other = surroundings_columns(places, normals, 0.0, slope)
        np.testing.assert_allclose(columns[:, 3:], one - other, rtol=0, atol=1e-13 * slope)
        assert np.abs(columns[:, 3:]).max() > 1e-3 * slope


def test_blocks_of_points_change_nothing(sphere_head, monkeypatch):
    cortex = cortex_of(sphere_head)
    places, normals = over(sphere_head)
    disc = ElectrodeBrief("disc", 1, SITES, 1e-6, disc_diameter=0.01)
    scalp = sphere_head.scalp
    mixed = joined(
        channels_of(disc, *over(sphere_head, 0.0, seed=2), scalp),
        channels_of(gradiometer("axial", 0.05), places, normals, scalp),
        electrodes_at(places),
    )
    assert len(mixed) == len(mixed.combine(mixed.points.positions)) == 36
    whole = mixed.lead_field(cortex, SOME, True).gain
    monkeypatch.setattr(lead_field, "POINT_GAIN_AT_ONCE", 3 * len(SOME) * 10)
    np.testing.assert_allclose(mixed.lead_field(cortex, SOME, True).gain, whole, rtol=1e-12, atol=0)


def test_derivative_of_extended_sensors(sphere_head):
    cortex = cortex_of(sphere_head)
    scalp = sphere_head.scalp
    disc = ElectrodeBrief("disc", 1, SITES, 1e-6, disc_diameter=0.01)
    mixed = joined(
        channels_of(disc, *over(sphere_head, 0.0, seed=2), scalp),
        channels_of(gradiometer("planar", 0.02), *over(sphere_head), scalp),
    )
    moments = np.random.default_rng(1).normal(size=(len(SOME), 3))
    found = lead_field_derivatives(mixed, cortex, SOME, moments)
    np.testing.assert_array_equal(found.gain, mixed.lead_field(cortex, SOME, True).gain)

    def gain(positions):
        *setting, pickup = vars(mixed).values()
        sources = map_sources(cortex.sphere, sphere_head, positions, None)
        return lead_field.compute_lead_field(cortex.sphere, sphere_head, *setting, sources, pickup).gain

    expected = central_differences(gain, sphere_head.cortex.positions[SOME], moments, 0.5e-3)
    for rows in (mixed.is_electrode, ~mixed.is_electrode):
        size = np.abs(expected[rows]).max()
        np.testing.assert_allclose(found.slopes[rows], expected[rows], rtol=0, atol=1e-5 * size)


def test_a_moved_sensor_takes_its_points_along(sphere_head):
    rng = np.random.default_rng(7)
    places, normals = over(sphere_head)
    pair = channels_of(gradiometer("planar", 0.02, cell=(3e-3,) * 3), places, normals, sphere_head.scalp)
    turns = rng.normal(0, 0.3, places.shape)
    moved = pair.moved(places + 1e-3, turns, normals)
    for channel in range(len(pair)):
        mine = pair.pickup.channel == channel
        turn = Rotation.from_rotvec(turns[channel])
        expected = places[channel] + 1e-3 + turn.apply(pair.pickup.positions[mine] - places[channel])
        np.testing.assert_allclose(moved.pickup.positions[mine], expected, atol=1e-15)
        np.testing.assert_allclose(moved.pickup.axes[mine], turn.apply(pair.pickup.axes[mine]), atol=1e-14)
        np.testing.assert_allclose(moved.axes[channel], turn.apply(normals[channel]), atol=1e-14)
    single = replace(pair, pickup=None).moved(places, 0 * turns, normals)
    np.testing.assert_array_equal(single.axes, pair.axes)
    assert single.pickup is None
