"""Integration points: exact for the polynomials they are made for, in the order of the channels, on the scalp."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from synthetic_head import electrodes, magnetometers

from layout.anatomy.scalp_points import project
from layout.brief.objects_stock import GradiometerBrief, SitesBrief
from layout.sensing.pickup import Pickup, box_points, disc_points, point_pickup, sensor_pickup

GRID = SitesBrief(grid_pitch=0.025)


def gradiometers(**changes) -> GradiometerBrief:
    settings = {"sites": GRID, "noise_density": 1e-14, "baseline": 0.02, "shape": "planar", **changes}
    return GradiometerBrief(name="grads", count=4, **settings)


def made_pickup(head, stock, kind, baselines=None, seed=0):
    """Pickup of channels of the given kinds at random places of the scalp, housings turned at random."""
    rng = np.random.default_rng(seed)
    n = len(kind)
    at = rng.choice(np.flatnonzero(head.scalp.vertices[:, 2] > 0.02), n, replace=False)
    frames = np.linalg.qr(rng.normal(size=(n, 3, 3)))[0]
    positions, normals = head.scalp.vertices[at], head.scalp.normals[at]
    axes = frames[:, :, 2].copy()
    electrode = np.array([stock[k].kind == "electrode" for k in kind])
    axes[electrode] = 0
    baselines = np.zeros((n, 3)) if baselines is None else baselines
    pickup = sensor_pickup(stock, np.array(kind), positions, axes, frames, baselines, normals, head.scalp)
    return pickup, positions, axes, frames, normals


@given(st.tuples(*[st.integers(0, 3)] * 3), st.tuples(*[st.floats(1e-3, 3.0)] * 3))
@settings(max_examples=60, deadline=None)
def test_box_average_is_exact_to_degree_three(powers, edges):
    """The average of x^a over [-e/2, e/2] is (e/2)^a / (a+1) for even a, 0 for odd a."""
    points, weights = box_points(edges)
    exact = np.prod([(e / 2) ** a / (a + 1) if a % 2 == 0 else 0.0 for a, e in zip(powers, edges, strict=True)])
    scale = np.prod([(e / 2) ** a for a, e in zip(powers, edges, strict=True)])
    assert abs(weights @ np.prod(points**powers, axis=1) - exact) <= 1e-14 * scale


def test_flat_edges_take_one_point():
    points, weights = box_points((0.01, 0.02, 0.0))
    assert points.shape == (4, 3)
    assert (points[:, 2] == 0).all()
    assert weights.sum() == pytest.approx(1, abs=1e-15)


@pytest.mark.parametrize(("a", "b"), [(a, b) for a in range(6) for b in range(6 - a)])
def test_disc_average_is_exact_to_degree_five(a, b):
    """The average of x^a y^b over the unit disc, a and b even: (a-1)!!(b-1)!! 2 / ((a+b+2) (a+b)!!)."""
    points, weights = disc_points(2.0)

    def double_factorial(n):
        return np.prod(np.arange(n, 0, -2)) if n > 0 else 1.0

    exact = 0.0
    if a % 2 == 0 and b % 2 == 0:
        both = double_factorial(a - 1) * double_factorial(b - 1) / double_factorial(a + b)
        exact = 2 * both / (a + b + 2)
    assert abs(weights @ (points[:, 0] ** a * points[:, 1] ** b) - exact) < 1e-15


def test_points_without_extent_need_no_pickup(head):
    stock = (electrodes(), magnetometers())
    assert made_pickup(head, stock, [0, 1, 0])[0] is None


def test_mixed_stock_in_the_order_of_the_channels(head):
    stock = (electrodes(disc_diameter=0.01), magnetometers(), gradiometers(cell=(3e-3, 3e-3, 3e-3)))
    kind = [2, 0, 1, 2, 0]
    along = np.zeros((5, 3))
    along[[0, 3]] = [[0.02, 0, 0], [0, 0.02, 0]]
    pickup, positions, axes, frames, _ = made_pickup(head, stock, kind, along)
    np.testing.assert_array_equal(np.bincount(pickup.channel), [16, 7, 1, 16, 7])
    assert (np.diff(pickup.channel) >= 0).all()
    np.testing.assert_array_equal(pickup.starts, [0, 16, 23, 24, 40, 47])
    np.testing.assert_array_equal(pickup.axes, axes[pickup.channel])
    sums = pickup.combine(np.ones((47, 1)))[:, 0]
    np.testing.assert_allclose(sums, [0, 1, 1, 0, 1], atol=1e-15)
    # the first moment about the centre is the baseline of a gradiometer, nothing for an average
    first = pickup.combine(pickup.positions - positions[pickup.channel])
    np.testing.assert_allclose(first[[0, 2, 3]], along[[0, 2, 3]], atol=1e-16)
    # the cell's edges are the housing's
    inside = np.einsum("nd,dk->nk", pickup.positions[:8] - positions[0] - along[0] / 2, frames[0])
    np.testing.assert_allclose(np.abs(inside), 3e-3 / (2 * np.sqrt(3)), rtol=1e-12)


def test_axial_gradiometer_counts_its_near_coil_positive(head):
    stock = (gradiometers(shape="axial"),)
    axes = made_pickup(head, stock, [0])[2]
    pickup, positions, *_ = made_pickup(head, stock, [0], -0.05 * axes)
    np.testing.assert_array_equal(pickup.weights, [1, -1])
    np.testing.assert_allclose(pickup.positions, [positions[0], positions[0] + 0.05 * axes[0]], atol=1e-16)


def test_coil_lies_across_the_axis(head):
    pickup, positions, axes, *_ = made_pickup(head, (magnetometers(coil_diameter=0.012),), [0, 0])
    away = pickup.positions - positions[pickup.channel]
    assert np.abs(np.einsum("pd,pd->p", away, axes[pickup.channel])).max() < 1e-16
    np.testing.assert_allclose(np.linalg.norm(away, axis=1).max(), 6e-3 * np.sqrt(2 / 3), rtol=1e-12)


def test_disc_points_lie_on_the_scalp(head):
    pickup, positions, *_ = made_pickup(head, (electrodes(disc_diameter=0.01),), [0] * 5)
    np.testing.assert_allclose(project(head.scalp, pickup.positions).positions, pickup.positions, atol=1e-9)
    away = np.linalg.norm(pickup.positions - positions[pickup.channel], axis=1)
    assert away.max() == pytest.approx(5e-3 * np.sqrt(2 / 3), rel=0.02, abs=0)
    assert (pickup.axes == 0).all()


@given(st.lists(st.integers(1, 4), min_size=1, max_size=7), st.integers(0, 99))
@settings(max_examples=40, deadline=None)
def test_combining_is_the_weighted_sum(sizes, seed):
    rng = np.random.default_rng(seed)
    channel = np.repeat(np.arange(len(sizes)), sizes)
    pickup = Pickup(
        rng.normal(size=(len(channel), 3)), np.zeros((len(channel), 3)), rng.normal(size=len(channel)), channel
    )
    rows = rng.normal(size=(len(channel), 2, 3))
    whole = pickup.combine(rows)
    for one in range(len(sizes)):
        mine = channel == one
        expected = sum(w * row for w, row in zip(pickup.weights[mine], rows[mine], strict=True))
        np.testing.assert_allclose(whole[one], expected, atol=1e-12)
    first, last = sorted(rng.integers(0, len(sizes) + 1, 2))
    if first < last:
        some = rows[pickup.starts[first] : pickup.starts[last]]
        np.testing.assert_array_equal(pickup.combine(some, first, last), whole[first:last])
    blocks = pickup.blocks(3)
    assert blocks[0] == 0
    assert blocks[-1] == len(sizes)
    assert (np.diff(blocks) > 0).all()


def test_point_pickup_changes_nothing():
    rows = np.arange(12.0).reshape(4, 3)
    np.testing.assert_array_equal(point_pickup(rows, rows).combine(rows), rows)
