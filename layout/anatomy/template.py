"""The embedded template head: an average cortex inside layers built around it."""

from __future__ import annotations

import numpy as np

from layout.anatomy import template_recipe as recipe
from layout.anatomy.cortex import cortex_mesh, cortex_sources, cortex_vertices
from layout.anatomy.cortex_files import cortex_folder, read_cortex
from layout.anatomy.frame import apply, head_frame
from layout.anatomy.head import Head, Landmarks, Surface
from layout.anatomy.template_layers import build_layers, project_on_scalp
from layout.units import MM

NOTES = (
    "The template head is an average, not a person; its skull and skin are plausibly thick, not measured.",
    "The template head has no ears, nose or real chin: positions near ears and face are approximate.",
)


def build_template(source_mesh: str) -> Head:
    """The template head with sources of the given density ("coarse", "standard" or "fine").

    The cortex goes from its MNI305 files to MNI152; the layers are built around it there; everything is then
    scaled by recipe.SCALE about the origin and moved to the head frame. Raises FileError where the cortex
    files are missing.
    """
    hemispheres = read_cortex(cortex_folder())
    pial = np.vstack([apply(recipe.MNI305_TO_MNI152, side.outer) for side in hemispheres])
    layers = build_layers(pial)
    x, y, z = recipe.PREAURICULAR
    points = {
        "nas": recipe.NASION,
        "lpa": (-x, y, z),
        "rpa": recipe.PREAURICULAR,
        "inion": recipe.INION,
    }
    in_mni = Landmarks(**{name: project_on_scalp(layers, point) * MM for name, point in points.items()})
    mni_to_head = np.diag([recipe.SCALE, recipe.SCALE, recipe.SCALE, 1.0]) @ head_frame(in_mni)

    def surface(vertices: np.ndarray) -> Surface:
        return Surface(apply(mni_to_head, (vertices + recipe.CENTRE) * MM), layers.faces)

    file_to_head = mni_to_head @ _in_metres(recipe.MNI305_TO_MNI152)
    cortex, mesh = cortex_sources(hemispheres, file_to_head, source_mesh), cortex_mesh(hemispheres, file_to_head)
    return Head(
        name="template",
        scalp=surface(layers.scalp),
        outer_skull=surface(layers.outer_skull),
        inner_skull=surface(layers.inner_skull),
        landmarks=Landmarks(**{name: apply(mni_to_head, getattr(in_mni, name)) for name in points}),
        cortex=cortex,
        eyes=apply(mni_to_head, np.array(recipe.EYES) * MM),
        mni_to_head=mni_to_head,
        notes=NOTES,
        cortex_surface=mesh,
        cortex_vertices=cortex_vertices(hemispheres, mesh, cortex),
    )


def _in_metres(transform_mm: np.ndarray) -> np.ndarray:
    """The same affine transform with its shift in metres instead of millimetres."""
    transform = transform_mm.copy()
    transform[:3, 3] *= MM
    return transform
