"""Inner skull, outer skull and scalp that a person's files do not hold, from those they do.

Skull: 5.97 mm thick everywhere, the mean of 20 adults in Antonakakis et al. 2020, NeuroImage 223:117353 (+- 1.19 mm
between people). Fluid between the brain's hull and the inner skull, skin, and the shape of face, neck, cerebellum and
brainstem: the template's recipe, which is plausible but not from a paper.
"""

from __future__ import annotations

import numpy as np

from layout.anatomy import template_recipe as recipe
from layout.anatomy.frame import apply
from layout.anatomy.head import Head, Surface
from layout.anatomy.star_surface import hull_radius, icosphere, lift_over, smooth_radius
from layout.anatomy.template_layers import shell, thickness, with_face_and_neck
from layout.units import MM

SKULL = 5.97 * MM
SKULL_NOTE = "5.97 mm everywhere (the mean of 20 adults in Antonakakis et al. 2020, NeuroImage 223:117353)"


def complete_layers(
    given: dict[str, Surface], cortex: np.ndarray, template: Head
) -> tuple[dict[str, Surface], list[str]]:
    """All three surfaces (keys "inner_skull", "outer_skull", "scalp"), the given ones untouched, and what was assumed.

    given: those there are; cortex (n, 3) [m], both in the head frame; template: the template head, whose cortex tells
    how the recipe's places lie on this one. Layers that are made are not yet fitted to given ones around them.
    """
    layers, notes = dict(given), []
    recipe_frame = _to_recipe(cortex, template)
    if "inner_skull" not in layers:
        if "outer_skull" in layers:
            layers["inner_skull"] = _offset(layers["outer_skull"], -SKULL)
            notes.append(f"The inner skull was not given: it is the outer skull less {SKULL_NOTE}.")
        else:
            layers["inner_skull"] = _around(cortex, recipe_frame)
            notes.append(
                "The inner skull was not given: it is a smooth hull of the cortex as given, with cerebellum, brainstem "
                "and 1.5 to 4 mm of fluid as on the template (plausible, not measured)."
            )
    if "outer_skull" not in layers:
        layers["outer_skull"] = _offset(layers["inner_skull"], SKULL)
        notes.append(f"The outer skull was not given: it is the inner skull and {SKULL_NOTE}.")
    if "scalp" not in layers:
        layers["scalp"] = _skin_over(layers["outer_skull"], recipe_frame)
        notes.append(
            "The scalp was not given: it is the outer skull and 6.5 to 12 mm of skin, with a rough face and neck, as "
            "on the template (plausible, not measured)."
        )
    return layers, notes


def _to_recipe(cortex: np.ndarray, template: Head) -> np.ndarray:
    """Rigid move (4, 4) from the head frame to MNI152 axes about recipe.CENTRE, in metres.

    The template's tilt, and the shift that puts the middles of the two cortices' boxes on each other.
    """
    own, average = ((p.max(axis=0) + p.min(axis=0)) / 2 for p in (cortex, template.cortex.positions))
    to_mni = np.linalg.inv(template.mni_to_head)
    turn = to_mni[:3, :3] / np.cbrt(np.linalg.det(to_mni[:3, :3]))
    move = np.eye(4)
    move[:3, :3] = turn
    centre = apply(template.mni_to_head, recipe.CENTRE * MM) - average + own
    move[:3, 3] = -turn @ centre
    return move


def _around(cortex: np.ndarray, to_recipe: np.ndarray) -> Surface:
    directions, faces = icosphere(recipe.SUBDIVISIONS)
    points = apply(to_recipe, cortex) / MM
    brain = np.vstack(
        [
            points,
            points * [-1, 1, 1],
            recipe.SCALE * shell(recipe.CEREBELLUM, directions),
            recipe.SCALE * shell(recipe.BRAINSTEM, directions),
        ]
    )
    hull = smooth_radius(directions, hull_radius(brain, directions), recipe.HARMONIC_DEGREE, recipe.HARMONIC_PENALTY)
    base = Surface(hull[:, None] * directions, faces)
    fluid, _, _ = thickness(directions)
    inner = lift_over(base.vertices + fluid[:, None] * base.normals, faces, points, recipe.PIAL_CLEARANCE)
    return Surface(apply(np.linalg.inv(to_recipe), inner * MM), faces)


def _offset(surface: Surface, distance: float) -> Surface:
    return Surface(surface.vertices + distance * surface.normals, surface.faces)


def _skin_over(skull: Surface, to_recipe: np.ndarray) -> Surface:
    in_recipe = Surface(apply(to_recipe, skull.vertices) / MM, skull.faces)
    directions = in_recipe.vertices / np.linalg.norm(in_recipe.vertices, axis=1, keepdims=True)
    _, _, skin = thickness(directions)
    scalp = in_recipe.vertices + skin[:, None] * in_recipe.normals
    # The recipe's face and neck belong to a head of the MNI152 space's size.
    scalp = with_face_and_neck(scalp / recipe.SCALE, skull.faces, icosphere(recipe.SUBDIVISIONS)[0]) * recipe.SCALE
    return Surface(apply(np.linalg.inv(to_recipe), scalp * MM), skull.faces)
