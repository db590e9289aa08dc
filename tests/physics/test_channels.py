"""Channels on a head: the rows that candidates bring, and their lead field in the right order."""

import numpy as np
import pytest
from studies import BAND, SPHERE, TWO_REGIONS, coils, cups, study_of

from layout.physics.channels import candidate_channels, electrodes_at, joined, normal_magnetometers_above
from layout.physics.layered_sphere import electric_lead_field
from layout.physics.sarvas import magnetic_lead_field


@pytest.fixture
def study():
    return study_of(
        SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"'), coils(3, "grid_mm = 40", 'axes = "two_axis"'), BAND
    )


def test_candidates_bring_their_channels(study):
    candidates = study.candidates
    channels = candidate_channels(candidates)
    assert len(channels) == (candidates.kind == 0).sum() + 2 * (candidates.kind == 1).sum()
    np.testing.assert_array_equal(channels.positions, candidates.positions)
    site = candidates.site[candidates.candidate_of_channel]
    np.testing.assert_array_equal(channels.normals, candidates.sites.normals[site])
    np.testing.assert_allclose(np.linalg.norm(channels.axes, axis=1), ~channels.is_electrode, atol=1e-12)


@pytest.mark.parametrize("free", [True, False])
def test_lead_field_on_a_sphere_is_that_of_the_spheres(study, free):
    channels = candidate_channels(study.candidates)
    some = np.array([3, 400, 17])
    gain = channels.lead_field(study.cortex, some, free).gain
    sources, normals = study.head.cortex.positions[some], study.head.cortex.normals[some]
    electrode = channels.is_electrode
    for rows, direct in (
        (
            electrode,
            electric_lead_field(
                channels.positions[electrode], sources, study.cortex.sphere.radii, study.cortex.sphere.conductivities
            ),
        ),
        (~electrode, magnetic_lead_field(channels.positions[~electrode], channels.axes[~electrode], sources)),
    ):
        expected = direct if free else np.einsum("nmk,mk->nm", direct, normals)
        scale = np.abs(direct).max()
        np.testing.assert_allclose(gain[rows], expected, rtol=1e-9, atol=1e-9 * scale)


def test_joined_channels_are_computed_as_they_are_apart(study):
    points = np.array([[0, 0, 0.092], [0.092, 0, 0]])
    parts = [electrodes_at(points), normal_magnetometers_above(points, points / 0.092, 0.02)]
    some = np.arange(50)
    apart = [part.lead_field(study.cortex, some, free=True).gain for part in parts]
    together = joined(*parts).lead_field(study.cortex, some, free=True).gain
    np.testing.assert_allclose(together, np.concatenate(apart), rtol=1e-13)


def test_magnetometers_stand_above_their_point():
    points, normals = np.array([[0, 0, 0.09]]), np.array([[0, 0.6, 0.8]])
    coil = normal_magnetometers_above(points, normals, 0.02)
    np.testing.assert_allclose(coil.positions, [[0, 0.012, 0.106]])
    np.testing.assert_array_equal(coil.axes, normals)
    assert not coil.is_electrode.any()
    assert electrodes_at(points).is_electrode.all()
    assert (electrodes_at(points).axes == 0).all()


def test_a_sphere_head_stays_where_it_is(study):
    """But for electrodes, which lie on the flat faces of the scalp's mesh."""
    moved = candidate_channels(study.candidates).displacements(study.cortex)
    assert (moved.sources_max, moved.magnetometers_max, moved.sources_clipped) == (0, 0, 0)
    assert moved.electrodes_max < 0.1e-3
