"""From the brief's head to a Head."""

from __future__ import annotations

from collections.abc import Callable

from layout.anatomy import template_recipe
from layout.anatomy.cache import load_or_build
from layout.anatomy.head import Head
from layout.anatomy.sphere_head import build_sphere_head
from layout.anatomy.template import build_template
from layout.brief.objects import HeadBrief
from layout.errors import BriefError


def _template(brief: HeadBrief) -> Head:
    key = f"template-{brief.source_mesh}-recipe{template_recipe.VERSION}"
    return load_or_build(key, lambda: build_template(brief.source_mesh))


def _sphere(brief: HeadBrief) -> Head:
    for key, value in (("radii_mm", brief.radii), ("cortex_depth_mm", brief.cortex_depth)):
        if value is None:
            raise BriefError(f'head.{key} must be given where head.kind is "sphere".')
    return build_sphere_head(brief.radii, brief.cortex_depth, brief.source_mesh)


BUILDERS: dict[str, Callable[[HeadBrief], Head]] = {"template": _template, "sphere": _sphere}


def build_head(brief: HeadBrief) -> Head:
    """The head a brief asks for.

    Raises BriefError for an impossible sphere, FileError for missing cortex files.
    """
    return BUILDERS[brief.kind](brief)
