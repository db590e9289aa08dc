"""The quick way through boundary elements against the way that every other number takes."""

from dataclasses import replace

import numpy as np
import pytest
from studies import BAND, SPHERE, TWO_REGIONS, cups, study_of

from layout.evidence.simulation_boundary import boundary_forward, primary_slopes
from layout.evidence.simulation_forward import fields_at, forward_of, held_inside
from layout.physics.boundary_cortex import BoundaryCortex
from layout.physics.boundary_elements import primary_field
from layout.physics.channels import electrodes_at, joined, normal_magnetometers_above
from layout.physics.differences import central_differences
from layout.sensing.pickup import Pickup

SIGMA = np.array([0.33, 0.33 / 80, 0.33])
RNG = np.random.default_rng(4)


@pytest.fixture(scope="module")
def cortex(tmp_path_factory):
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("SCALPSITE_CACHE", str(tmp_path_factory.mktemp("cache")))
        head = replace(study_of(SPHERE, TWO_REGIONS, cups(12), BAND).head, sphere=None)
        yield BoundaryCortex(head, SIGMA, 300)


@pytest.fixture(scope="module")
def channels(cortex):
    """Six electrodes and five magnetometers, one of them the difference of two points."""
    scalp = cortex.head.scalp
    up = RNG.choice(np.flatnonzero(scalp.vertices[:, 2] > 0.0), 11, replace=False)
    electrodes = electrodes_at(scalp.vertices[up[:6]])
    coils = normal_magnetometers_above(scalp.vertices[up[6:]], scalp.normals[up[6:]], 8e-3)
    made = joined(electrodes, coils)
    far = coils.positions[-1] + 0.02 * coils.axes[-1]
    pickup = Pickup(
        np.vstack([made.positions, far]),
        np.vstack([made.axes, made.axes[-1]]),
        np.append(np.ones(11), -1.0),
        np.append(np.arange(11), 10),
    )
    return type(made)(made.positions, made.axes, made.is_electrode, made.normals, pickup)


@pytest.fixture(scope="module")
def places(cortex):
    inside = cortex.head.inner_skull.vertices
    return held_inside(cortex, RNG.uniform(inside.min(axis=0), inside.max(axis=0), (60, 3)))


def test_the_quick_gain_is_the_exact_one(cortex, channels, places):
    whitener = RNG.normal(size=(9, 11)) / np.where(channels.is_electrode, 1.0, 1e-9)
    exact = np.tensordot(whitener, channels.lead_field_at(cortex, places, None), 1)
    quick = forward_of(channels, cortex, whitener).gain(places)
    np.testing.assert_allclose(quick, exact, rtol=0, atol=1e-12 * np.abs(exact).max())


def test_the_quick_slopes_are_those_of_differences_in_all_directions(cortex, channels, places):
    moments = RNG.normal(size=places.shape) * 1e-8
    moments[3] = 0.0
    whitener = np.diag(np.where(channels.is_electrode, 1.0, 1e9))

    def gain(at):
        return np.tensordot(whitener, channels.lead_field_at(cortex, at, None), 1)

    exact = central_differences(gain, places, moments, 0.25e-3)
    found = fields_at(channels, cortex, places, moments)
    np.testing.assert_allclose(np.tensordot(whitener, found.gain, 1), gain(places), rtol=1e-9)
    slopes = np.tensordot(whitener, found.slopes, 1)
    assert apart(slopes, exact).max() < 1e-3  # near to the inner skull both are differences of a rough function
    assert np.median(apart(slopes, exact)) < 1e-5
    rough = boundary_forward(channels, cortex, whitener).slopes(places, moments, gain(places))
    assert apart(rough, exact).max() < 0.1
    assert np.median(apart(rough, exact)) < 0.01
    assert not slopes[:, 3].any()


def apart(found, exact):
    """Relative difference of each source's slopes."""
    size = np.linalg.norm(exact, axis=(0, 2))
    return np.linalg.norm(found - exact, axis=(0, 2))[size > 0] / size[size > 0]


def test_slopes_of_the_primary_field_against_differences():
    points, axes = RNG.normal(size=(2, 4, 3))
    points = 0.12 * points / np.linalg.norm(points, axis=1, keepdims=True)
    places, moments = 0.02 * RNG.normal(size=(7, 3)), 1e-8 * RNG.normal(size=(7, 3))
    exact = central_differences(lambda at: primary_field(points, axes, at), places, moments, 1e-4)
    found = primary_slopes(points, axes, places, moments)
    np.testing.assert_allclose(found, exact, rtol=0, atol=1e-8 * np.abs(exact).max())
