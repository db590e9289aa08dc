"""Axes given as lists, and free ones: channels, names and freedoms."""

import numpy as np
import pytest
from synthetic_head import brief, electrodes, magnetometers

from layout.brief.objects import SitesBrief
from layout.sensing.lay_out import lay_candidates
from layout.sensing.rules import channels_bought

FAMILY = SitesBrief(family="10-20")


def test_a_list_of_axes(head, standard):
    axes = ((1.0, 0.0, 0.0), (0.6, 0.8, 0.0), (0.0, 0.6, -0.8))
    laid = lay_candidates(head, brief(magnetometers(sites=FAMILY, axes=axes)), standard)
    n = len(laid.sites)
    assert len(laid) == len(laid.candidate_of_channel) == 3 * n
    assert set(laid.axis_name) == {"axis1", "axis2", "axis3"}
    for site in range(n):
        here = np.flatnonzero(laid.site == site)
        right, front, normal = laid.housing_pose[here[0], :3, :3].T
        wanted = [normal, 0.6 * normal + 0.8 * front, 0.6 * front + 0.8 * right]
        assert np.allclose(laid.axes[here], wanted, rtol=0, atol=1e-12)
        assert laid.names[here[1]] == f"{laid.sites.names[site]} axis2"
    assert np.allclose(np.linalg.norm(laid.axes, axis=1), 1, rtol=0, atol=1e-12)
    assert {tuple(clique) for clique in laid.cliques} == {(i, i + 1, i + 2) for i in range(0, 3 * n, 3)}
    assert laid.clique_names[0] == f"one axis at {laid.sites.names[0]}"
    assert not laid.free_axes.any()
    assert (channels_bought(laid) == 1).all()


@pytest.mark.parametrize(("axes", "free", "tilt"), [("free", 1, None), ("free", 1, 0.5), ("free_two", 2, None)])
def test_free_axes(head, standard, axes, free, tilt):
    """Three components of the field along normal, front and left, of which the sensor buys one channel or two."""
    stock = (electrodes(), magnetometers(sites=FAMILY, axes=axes, tilt_limit=tilt))
    laid = lay_candidates(head, brief(*stock), standard)
    turning = laid.kind == 1
    assert np.array_equal(laid.free_axes, np.where(turning, free, 0))
    assert np.array_equal(laid.tilt_limit, np.where(turning, tilt or np.inf, np.inf))
    for one in np.flatnonzero(turning):
        rows = laid.axes[laid.candidate_of_channel == one]
        right, front, normal = laid.housing_pose[one, :3, :3].T
        assert np.allclose(rows, [normal, front, -right], rtol=0, atol=1e-12)
    assert np.array_equal(channels_bought(laid), np.where(turning, free, 1))
