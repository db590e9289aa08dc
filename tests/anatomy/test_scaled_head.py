"""Heads of other sizes: measured as callipers and tape would, everything in them stretched alike."""

import numpy as np
import pytest
from built_heads import template
from hypothesis import given, settings
from hypothesis import strategies as st
from references.head_size import NAMED, SURVEY

from layout.anatomy.build import build_head
from layout.anatomy.frame import head_frame
from layout.anatomy.head import Surface
from layout.anatomy.head_size import head_size
from layout.anatomy.mesh_graph import vertex_areas
from layout.anatomy.positions import standard_positions
from layout.anatomy.scaled_head import scale_to, stretched
from layout.anatomy.transfer import same_sites
from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.objects import HeadBrief, HeadSizeBrief
from layout.errors import BriefError

WITHIN = 1e-3  # m


def test_the_named_sizes_are_those_of_the_survey():
    assert set(NAMED_SIZES) == set(NAMED)
    for name, (sex, percentile) in NAMED.items():
        assert NAMED_SIZES[name] == pytest.approx(
            [SURVEY[sex][what][percentile] / 1e3 for what in ("length", "breadth")]
        )


@pytest.mark.slow
@pytest.mark.parametrize("name", NAMED_SIZES)
def test_named_sizes_are_met_within_a_millimetre(name):
    length, breadth = NAMED_SIZES[name]
    size = head_size(scale_to(template("coarse"), HeadSizeBrief(length, breadth, name=name)))
    assert size.length == pytest.approx(length, abs=WITHIN)
    assert size.breadth == pytest.approx(breadth, abs=WITHIN)


@pytest.mark.parametrize("percentile", ["5th", "50th", "95th"])
def test_tapes_of_men_are_near_the_survey(percentile):
    """Not set, only found: the survey's tape is 1 to 4 % more than this head's, for hair and for its other shape."""
    length, breadth = NAMED_SIZES[f"male {percentile} percentile"]
    size = head_size(scale_to(template("coarse"), HeadSizeBrief(length, breadth)))
    survey = SURVEY["male"]["circumference"][percentile] / 1e3
    assert 0.96 < size.circumference / survey < 1.0


@pytest.mark.parametrize(
    "wanted",
    [
        {"length": 0.19},
        {"breadth": 0.15},
        {"circumference": 0.55},
        {"length": 0.19, "circumference": 0.54},
        {"breadth": 0.15, "circumference": 0.56},
        {"length": 0.204, "breadth": 0.15},
    ],
)
def test_any_one_or_two_sizes_are_met_within_a_millimetre(wanted):
    size = head_size(scale_to(template("coarse"), HeadSizeBrief(**wanted)))
    for name, value in wanted.items():
        assert getattr(size, name) == pytest.approx(value, abs=WITHIN)


def test_of_three_sizes_the_tape_is_only_compared():
    head = scale_to(template("coarse"), HeadSizeBrief(0.2, 0.154, 0.574))
    size = head_size(head)
    assert (size.length, size.breadth) == pytest.approx((0.2, 0.154), abs=WITHIN)
    assert "circumference 562 mm. The stated circumference of 574 mm was only compared." in head.notes[-1]
    with pytest.raises(BriefError, match=r"^head\.circumference_mm must be near the 562 mm .* but 500 was given\.$"):
        scale_to(template("coarse"), HeadSizeBrief(0.2, 0.154, 0.5))
    with pytest.raises(BriefError, match=r"^head: a length of 230 mm and a breadth of 110 mm must be .*0\.75 to 1\.3"):
        scale_to(template("coarse"), HeadSizeBrief(0.23, 0.11))


def test_everything_in_the_head_is_stretched_alike():
    head = template("standard")
    stretch = np.array([0.9, 1.05, 1.1])
    other = stretched(head, stretch)
    for name in ("scalp", "outer_skull", "inner_skull", "cortex_surface"):
        np.testing.assert_allclose(getattr(other, name).vertices, getattr(head, name).vertices * stretch)
    np.testing.assert_allclose(other.cortex.positions, head.cortex.positions * stretch)
    np.testing.assert_allclose(other.eyes, head.eyes * stretch)
    np.testing.assert_allclose(head_frame(other.landmarks), np.eye(4), atol=1e-12)  # still the head frame
    # A place in MNI152 is the same place of the brain.
    place = np.array([-0.038, -0.024, 0.056, 1.0])
    np.testing.assert_allclose((other.mni_to_head @ place)[:3], (head.mni_to_head @ place)[:3] * stretch)
    # Normals and areas against those of the stretched mesh itself, measured anew: alike, not equal, for a vertex's
    # normal is a mean over its faces.
    mesh = Surface(head.cortex_surface.vertices * stretch, head.cortex_surface.faces)
    kept = head.cortex_vertices.source >= 0
    order = head.cortex_vertices.source[kept]
    areas, normals = vertex_areas(mesh)[kept], mesh.normals[kept]
    alike = np.einsum("nd,nd->n", other.cortex.normals[order], normals)
    assert alike.min() > 0.95
    assert alike.mean() > 0.9995
    assert other.cortex.areas.sum() == pytest.approx(areas.sum(), rel=5e-3)
    assert np.abs(other.cortex.areas[order] / areas - 1).mean() < 0.02
    np.testing.assert_allclose(np.linalg.norm(other.cortex.normals, axis=1), 1, rtol=1e-12)


@settings(max_examples=20, deadline=None)
@given(st.tuples(*[st.floats(0.7, 1.4)] * 3), st.integers(0, 2**32 - 1))
def test_area_elements_follow_the_cross_product(stretch, seed):
    """Nanson's formula against a triangle's own sides."""
    from layout.anatomy.scaled_head import _area_factor

    a, b = np.random.default_rng(seed).normal(size=(2, 3))
    before, after = np.cross(a, b), np.cross(a * stretch, b * stretch)
    size = np.linalg.norm(before)
    assert size * _area_factor((before / size)[None], np.array(stretch))[0] == pytest.approx(
        np.linalg.norm(after), rel=1e-9
    )


def test_there_and_back_by_arc_fractions():
    """All named positions to a small head and back: to well under a millimetre; names move with their fractions."""
    head = template("coarse")
    small = scale_to(head, HeadSizeBrief(*NAMED_SIZES["female 1st percentile"]))
    named = standard_positions(head.scalp, head.landmarks)
    names = [name for name in named if name not in ("A1", "A2")][::6]
    points = np.array([named[name] for name in names])
    there = same_sites(head, points, small)
    assert np.linalg.norm(same_sites(small, there, head) - points, axis=1).max() < 1e-6
    own = standard_positions(small.scalp, small.landmarks)
    assert np.linalg.norm(there - np.array([own[name] for name in names]), axis=1).max() < WITHIN


def test_a_brief_with_a_size_builds_that_head():
    head = build_head(HeadBrief("template", (0.33, 0.0165, 0.33), "coarse", size=HeadSizeBrief(0.19, 0.15)))
    assert head_size(head).length == pytest.approx(0.19, abs=WITHIN)
    assert "stretched" in head.notes[-1]
