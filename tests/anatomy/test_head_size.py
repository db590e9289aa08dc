"""Head size on a sphere, where callipers and tape have closed forms, and on the template."""

from dataclasses import replace

import numpy as np
import pytest
from built_heads import template
from references.head_size import AVERAGE_HEAD

from layout.anatomy.head_size import ABOVE_EARS, head_size
from layout.anatomy.sphere_head import build_sphere_head

RADIUS = 92e-3


@pytest.fixture(scope="module")
def sphere():
    return build_sphere_head((80e-3, 85e-3, RADIUS), 12e-3, "coarse")


def test_a_sphere_has_its_diameter_and_great_circle(sphere):
    assert head_size(sphere) == pytest.approx((2 * RADIUS, 2 * RADIUS, 2 * np.pi * RADIUS), rel=1e-12)


def test_measured_like_a_person_a_sphere_is_found_again(sphere):
    size = head_size(replace(sphere, sphere=None))
    assert size.length == pytest.approx(2 * RADIUS, rel=1e-3)
    assert size.breadth == pytest.approx(2 * np.sqrt(RADIUS**2 - ABOVE_EARS**2), rel=2e-3)
    assert size.circumference == pytest.approx(2 * np.pi * RADIUS, rel=1e-3)


def test_the_template_is_an_average_adult():
    size = head_size(template("standard"))
    for name, value in size._asdict().items():
        low, high = AVERAGE_HEAD[name]
        assert low <= value * 1e3 <= high, (name, value)
