"""From the brief's head to a Head."""

from __future__ import annotations

import hashlib
from collections.abc import Callable

from layout.anatomy import template_recipe
from layout.anatomy.cache import load_or_build
from layout.anatomy.head import Head
from layout.anatomy.own_head import build_own_head, files_of
from layout.anatomy.scaled_head import scale_to
from layout.anatomy.sphere_head import build_sphere_head
from layout.anatomy.template import build_template
from layout.anatomy.untrusted import file_digest
from layout.brief.objects import HeadBrief
from layout.errors import BriefError


def _template(brief: HeadBrief) -> Head:
    head = _average(brief.source_mesh)
    return head if brief.size is None else scale_to(head, brief.size)


def _average(source_mesh: str) -> Head:
    key = f"template-{source_mesh}-recipe{template_recipe.VERSION}"
    return load_or_build(key, lambda: build_template(source_mesh))


def _surfaces(brief: HeadBrief) -> Head:
    if brief.surfaces is None:
        raise BriefError('head.cortex must be given where head.kind is "surfaces".')
    digest = hashlib.sha256(f"own head {OWN_VERSION} recipe {template_recipe.VERSION} {brief.surfaces!r}".encode())
    for path in files_of(brief.surfaces):
        digest.update(file_digest(path))
    return load_or_build(
        f"surfaces-{digest.hexdigest()[:32]}", lambda: build_own_head(brief.surfaces, lambda: _average("standard"))
    )


def _sphere(brief: HeadBrief) -> Head:
    for key, value in (("radii_mm", brief.radii), ("cortex_depth_mm", brief.cortex_depth)):
        if value is None:
            raise BriefError(f'head.{key} must be given where head.kind is "sphere".')
    return build_sphere_head(brief.radii, brief.cortex_depth, brief.source_mesh)


OWN_VERSION = 1  # raise it whenever what is made of a person's files changes: cached heads are then built anew

BUILDERS: dict[str, Callable[[HeadBrief], Head]] = {"template": _template, "sphere": _sphere, "surfaces": _surfaces}


def build_head(brief: HeadBrief) -> Head:
    """The head a brief asks for.

    Raises BriefError for an impossible sphere or size, FileError for missing cortex files or for a person's own files
    that cannot be taken.
    """
    return BUILDERS[brief.kind](brief)
