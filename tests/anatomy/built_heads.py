"""Heads built once for all tests of this folder, past the cache."""

from functools import cache

from layout.anatomy.head import Head
from layout.anatomy.sphere_head import build_sphere_head
from layout.anatomy.template import build_template


@cache
def template(source_mesh: str) -> Head:
    """The template head."""
    return build_template(source_mesh)


@cache
def sphere(source_mesh: str) -> Head:
    """A sphere head of 80, 85 and 92 mm, sources 12 mm deep."""
    return build_sphere_head((0.080, 0.085, 0.092), 0.012, source_mesh)
