"""Regions: who is inside, and how strong."""

from dataclasses import replace

import numpy as np
import pytest
from built_heads import sphere, template

from layout.anatomy.regions import region_strengths, select_region
from layout.brief.objects import RegionBrief
from layout.errors import BriefError

HAND = RegionBrief("left hand", (-0.038, -0.024, 0.056), "mni152", 0.012, "left", 10e-9)


def changed(**kw):
    return replace(HAND, **kw)


def test_members_are_the_ball_on_the_side():
    head = template("standard")
    region = select_region(head, HAND)
    centre = head.mni_to_head @ [*HAND.centre, 1.0]
    np.testing.assert_allclose(region.centre, centre[:3], atol=1e-15)
    share = dict(zip(region.members.tolist(), region.areas / head.cortex.areas[region.members], strict=True))
    whole = 0
    for i, (p, side) in enumerate(zip(head.cortex.positions, head.cortex.side, strict=True)):
        beyond = sum((a - b) ** 2 for a, b in zip(p, centre, strict=False)) ** 0.5 - 0.012
        half = head.cortex.areas[i] ** 0.5 / 2
        if side != -1 or beyond >= half:
            assert i not in share
        elif beyond <= -half:
            assert share[i] == pytest.approx(1.0)
            whole += 1
        else:
            assert share[i] == pytest.approx(0.5 - beyond / (2 * half))
    assert whole > 50
    assert region.moment == 10e-9
    assert not region.free_orientation


@pytest.mark.parametrize("centre", [(-0.038, -0.024, 0.056), (-0.052, -0.022, 0.008), (-0.03, -0.06, 0.052)])
def test_a_finer_mesh_keeps_the_area_of_a_region(centre):
    """Twice as many sources, the same piece of cortex: the rim's parts make up for each other."""
    coarse, fine = (select_region(template(mesh), changed(centre=centre)) for mesh in ("standard", "fine"))
    assert len(fine.members) > 1.5 * len(coarse.members)  # the rim is thinner, so not quite twice as many
    assert fine.areas.sum() == pytest.approx(coarse.areas.sum(), rel=0.02)


def test_sides_split_a_ball_on_the_midline():
    head = template("standard")
    ball = {"centre": (0.0, -0.02, 0.06), "radius": 0.02}
    both = select_region(head, changed(side="both", **ball)).members
    parts = [select_region(head, changed(side=side, **ball)).members for side in ("left", "right")]
    np.testing.assert_array_equal(np.sort(np.concatenate(parts)), both)
    assert min(map(len, parts)) > 0


def test_head_coordinates_are_taken_as_they_are():
    head = template("standard")
    source = head.cortex.positions[1234]
    region = select_region(head, changed(centre=tuple(source), frame="head", radius=1e-6, side="both"))
    assert region.members.tolist() == [1234]


def test_an_empty_ball_says_how_far_the_cortex_is():
    """The named distance is the smallest radius that finds a source."""
    head = template("standard")
    far = changed(centre=(-0.2, 0.0, 0.0), radius=0.01)
    with pytest.raises(
        BriefError, match=r'^regions "left hand": radius_mm .* left side .*not within 10 mm\.$'
    ) as refusal:
        select_region(head, far)
    said = float(str(refusal.value).split(" mm from")[0].split()[-1]) * 1e-3
    assert len(select_region(head, changed(centre=far.centre, radius=said + 1e-4)).members) >= 1
    with pytest.raises(BriefError):
        select_region(head, changed(centre=far.centre, radius=said - 1e-4))


def test_a_sphere_takes_head_coordinates_and_free_orientation():
    head = sphere("standard")
    with pytest.raises(BriefError, match=r'frame must be "head" on a sphere head.*not "mni152"'):
        select_region(head, changed(orientation="free"))
    with pytest.raises(BriefError, match=r'orientation must be "free" on a sphere head.*not "normal"'):
        select_region(head, changed(frame="head"))
    region = select_region(head, changed(frame="head", orientation="free", centre=(-0.04, 0.0, 0.055), radius=0.01))
    assert region.free_orientation
    # A chord of 10 mm about a point of the shell cuts a cap of area π chord².
    assert region.areas.sum() == pytest.approx(np.pi * 0.01**2, rel=0.03)


def test_strengths_keep_the_net_moment_when_sources_are_cut():
    areas = np.array([1.0, 2.0, 5.0]) * 1e-6
    sd = region_strengths(areas, 10e-9)
    assert (sd**2).sum() == pytest.approx(1e-16, rel=1e-12)
    np.testing.assert_allclose(sd**2 / sd[0] ** 2, [1, 2, 5])
    halves = region_strengths(np.repeat(areas / 2, 2), 10e-9)
    np.testing.assert_allclose(halves[::2] ** 2 + halves[1::2] ** 2, sd**2)


@pytest.mark.parametrize(
    ("centre", "radius"),
    [((-0.050, 0.018, 0.016), 0.014), ((-0.038, -0.024, 0.056), 0.012), ((-0.036, 0.044, 0.024), 0.018)],
)
def test_doubling_the_mesh_keeps_the_regions_extent(centre, radius):
    """Area to 3 %, centre to 0.5 mm, mean squared normal (3, 3) to 0.03: the goal has a test of its own."""
    parts = []
    for mesh in ("standard", "fine"):
        cortex = template(mesh).cortex
        region = select_region(template(mesh), changed(centre=centre, radius=radius))
        members, area, normal = region.members, region.areas, cortex.normals[region.members]
        share = area / area.sum()
        parts.append((area.sum(), share @ cortex.positions[members], (normal.T * share) @ normal))
    (a, centre_a, moment_a), (b, centre_b, moment_b) = parts
    assert b == pytest.approx(a, rel=0.03)
    assert np.linalg.norm(centre_a - centre_b) < 0.5e-3
    np.testing.assert_allclose(moment_a, moment_b, atol=0.03)
