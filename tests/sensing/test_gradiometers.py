"""Candidates of extended sensors: choices at a site, poses, baselines and integration points together."""

import numpy as np
import pytest
from synthetic_head import brief, electrodes, magnetometers

from layout.brief.objects_stock import GradiometerBrief, SitesBrief
from layout.sensing.lay_out import lay_candidates

HOUSING = (0.028, 0.026, 0.06)


def gradiometers(**changes) -> GradiometerBrief:
    settings = {"shape": "planar", "baseline": 0.0168, "housing": HOUSING, **changes}
    return GradiometerBrief("pairs", 4, SitesBrief(family="10-20"), noise_density=5e-15, **settings)


def coil_centres(laid, channel):
    """Centres of the positive and the negative coil (3,) each, from the pickup."""
    mine = laid.pickup.channel == channel
    positions, weights = laid.pickup.positions[mine], laid.pickup.weights[mine]
    return [np.average(positions[rows], axis=0, weights=np.abs(weights[rows])) for rows in (weights > 0, weights < 0)]


@pytest.mark.parametrize(
    ("changes", "candidates", "channels"),
    [
        ({}, 2, (1, 1)),
        ({"gradients": "both_tangents"}, 1, (2,)),
        ({"shape": "axial", "baseline": 0.05}, 1, (1,)),
    ],
)
def test_choices_at_each_site(head, standard, changes, candidates, channels):
    entry = gradiometers(cell=(3e-3, 3e-3, 3e-3), **changes)
    laid = lay_candidates(head, brief(entry), standard)
    n = len(laid.sites)
    assert len(laid) == n * candidates
    np.testing.assert_array_equal(np.bincount(laid.candidate_of_channel), np.tile(channels, n))
    assert len(set(laid.names)) == len(laid)
    assert not laid.is_electrode.any()
    pose = laid.housing_pose[laid.candidate_of_channel]
    normal, front = pose[:, :3, 2], pose[:, :3, 1]
    np.testing.assert_allclose(laid.axes, normal, atol=1e-12)
    directions = [-normal[0]] if entry.shape == "axial" else [front[0], np.cross(normal[0], front[0])]
    np.testing.assert_allclose(laid.baselines[: sum(channels)], entry.baseline * np.array(directions), atol=1e-12)
    for channel in (0, len(laid.positions) - 1):
        plus, minus = coil_centres(laid, channel)
        np.testing.assert_allclose(plus - minus, laid.baselines[channel], atol=1e-12)
        centre = plus if entry.shape == "axial" else (plus + minus) / 2
        np.testing.assert_allclose(centre, laid.positions[channel], atol=1e-12)
    exclusive = {tuple(clique) for clique in laid.cliques}
    expected = {tuple(range(i, i + candidates)) for i in range(0, len(laid), candidates)} if candidates > 1 else set()
    assert exclusive == expected


def test_all_points_lie_inside_the_housing(head, standard):
    entry = gradiometers(cell=(6e-3, 6e-3, 3e-3))
    laid = lay_candidates(head, brief(entry), standard)
    pose = laid.housing_pose[laid.candidate_of_channel[laid.pickup.channel]]
    local = np.einsum("pdk,pd->pk", pose[:, :3, :3], laid.pickup.positions - pose[:, :3, 3])
    assert (np.abs(local[:, :2]) < np.array(HOUSING[:2]) / 2).all()
    assert (local[:, 2] > 0).all()
    assert (local[:, 2] < HOUSING[2]).all()


def test_points_of_mixed_stock_belong_to_their_channels(head, standard):
    stock = (electrodes(disc_diameter=0.01), magnetometers(axes="three_axis", cell=(3e-3,) * 3), gradiometers())
    laid = lay_candidates(head, brief(*stock), standard)
    points = np.bincount(laid.pickup.channel)
    kind = laid.kind[laid.candidate_of_channel]
    np.testing.assert_array_equal(points, np.array([7, 8, 2])[kind])
    np.testing.assert_array_equal(laid.pickup.axes, laid.axes[laid.pickup.channel])
    away = np.linalg.norm(laid.pickup.positions - laid.positions[laid.pickup.channel], axis=1)
    assert away.max() < 9e-3
    assert (laid.baselines[kind != 2] == 0).all()


def test_points_alone_carry_no_pickup(head, standard):
    laid = lay_candidates(head, brief(electrodes(), magnetometers()), standard)
    assert laid.pickup is None
    assert laid.baselines is None
