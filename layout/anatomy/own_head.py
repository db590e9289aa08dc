"""A head from a person's own surface files: read, checked, repaired, moved to the head frame, missing layers made."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np

from layout.anatomy.frame import apply, head_frame
from layout.anatomy.gifti_files import read_gifti_values
from layout.anatomy.head import Head, Landmarks, Surface
from layout.anatomy.landmark_files import GivenLandmarks, read_landmarks
from layout.anatomy.mesh_files import RawMesh, read_mesh
from layout.anatomy.mesh_repair import repair_surface, uncross
from layout.anatomy.missing_layers import complete_layers
from layout.anatomy.missing_points import place_eyes, place_inion
from layout.anatomy.nesting import FARTHEST, move_inside, nest
from layout.anatomy.own_cortex import GivenCortex, build_own_cortex
from layout.anatomy.scalp_points import project
from layout.anatomy.units_of_files import check_size, unit_of
from layout.anatomy.untrusted import one_sentence, point_of, read_json
from layout.brief.objects import SurfacesBrief
from layout.errors import BriefError, FileError
from layout.units import MM

LAYERS = ("scalp", "outer_skull", "inner_skull")
CORTEX_GAP = 1 * MM  # of the sources to the inner skull
FARTHEST_LANDMARK = 25 * MM  # off the scalp: the tragus and a blurred nasion lie some way off, another frame farther
FARTHEST_FROM_MADE = 40 * MM  # where the scalp itself is a rough one that was made
WORTH_SAYING = 5 * MM
FREE = 40 * MM  # a layer that was made gives way as far as it must
SETTLING = 3  # nesting and uncrossing disturb each other a little


def build_own_head(brief: SurfacesBrief, template: Callable[[], Head]) -> Head:
    """The head of the brief's files. Notes say what was repaired, made or assumed.

    template: gives the template head, asked only where something must be taken from it: missing layers, inion or eyes.
    Raises FileError or BriefError: one sentence naming the file or key, the rule and what was found.
    """
    raw = {layer: read_mesh(path) for layer in LAYERS if (path := getattr(brief, layer)) is not None}
    cortex = {side: read_mesh(path) for side, path in brief.cortex.items()}
    unit = unit_of(brief, raw, cortex)
    points = read_landmarks(brief.landmarks, unit)
    to_head = _head_frame(brief, points)
    check_size(brief, raw, cortex, unit, points)
    notes = ["The head is made of a person's own surfaces."]
    notes += [note for one in (*raw.values(), *cortex.values()) for note in one.notes]

    def placed(mesh: RawMesh) -> np.ndarray:
        return apply(to_head, mesh.vertices * unit)

    layers = {}
    for name, mesh in raw.items():
        layers[name], said = repair_surface(name, placed(mesh), mesh.faces, brief.vertices)
        notes += said
    masks = {side: _mask(brief, side, len(mesh.vertices)) for side, mesh in cortex.items()}
    own = build_own_cortex(
        {side: GivenCortex(placed(mesh), mesh.faces, masks[side]) for side, mesh in cortex.items()},
        brief.cortex_sources,
    )
    notes += own.notes
    if not brief.cortex_masks:
        notes.append(
            "No cortex mask was given: all of the surface counts as cortex, a wall between the hemispheres too."
        )
    made = [name for name in LAYERS if name not in layers]
    if made:
        layers, said = complete_layers(layers, own.sources.positions, template())
        notes += said
    layers, said = _nested(layers, made, brief.gap)
    notes += said
    positions, said = move_inside("sources of the cortex", own.sources.positions, layers["inner_skull"], CORTEX_GAP)
    notes += said
    fiducials = {name: apply(to_head, getattr(points, name)) for name in ("nas", "lpa", "rpa")}
    notes += _check_on_scalp(brief, layers["scalp"], fiducials, "scalp" in made)
    if points.inion is None:
        inion, said = place_inion(layers["scalp"], template())
        notes.append(said)
    else:
        inion = apply(to_head, points.inion)
    landmarks = Landmarks(**fiducials, inion=inion)
    if points.left_eye is None or points.right_eye is None:
        eyes, said = place_eyes(landmarks, template())
        notes.append(said)
    else:
        eyes = apply(to_head, np.stack([points.left_eye, points.right_eye]))
    return Head(
        name="surfaces",
        **layers,
        landmarks=landmarks,
        cortex=replace(own.sources, positions=positions),
        eyes=eyes,
        mni_to_head=_mni_to_head(brief, unit, to_head),
        notes=tuple(notes),
        cortex_surface=own.surface,
        cortex_vertices=own.vertices,
        files_to_head=to_head,
    )


def files_of(brief: SurfacesBrief) -> list[Path]:
    """Every file the head depends on, in a fixed order."""
    optional = [brief.scalp, brief.outer_skull, brief.inner_skull]
    if isinstance(brief.mni_to_files, Path):
        optional.append(brief.mni_to_files)
    masks = brief.cortex_masks or {}
    return [*brief.cortex.values(), *masks.values(), brief.landmarks, *(path for path in optional if path is not None)]


def _head_frame(brief: SurfacesBrief, points: GivenLandmarks) -> np.ndarray:
    try:
        return head_frame(Landmarks(points.nas, points.lpa, points.rpa, inion=points.nas))
    except ValueError:
        raise FileError(f"{brief.landmarks}: NAS, LPA and RPA must not lie on one line, but they do.") from None


def _check_on_scalp(brief: SurfacesBrief, scalp: Surface, points: dict[str, np.ndarray], made: bool) -> list[str]:
    """What is to be said of landmarks that lie off the scalp. A scalp that was made excuses more of them."""
    limit = FARTHEST_FROM_MADE if made else FARTHEST_LANDMARK
    places = np.stack(list(points.values()))
    away = np.linalg.norm(project(scalp, places).positions - places, axis=1)
    worst = int(np.argmax(away))
    name = list(points)[worst].upper()
    if away[worst] > limit:
        raise FileError(
            f"{brief.landmarks}: {name} must lie within {limit / MM:g} mm of the scalp (landmarks and surfaces share "
            f"one frame), but it is {away[worst] / MM:.0f} mm off."
        )
    if away[worst] > WORTH_SAYING:
        said = f"Landmarks lie up to {away[worst] / MM:.0f} mm off the scalp ({name})"
        return [f"{said}; positions start from its nearest points."]
    return []


def _mask(brief: SurfacesBrief, side: str, n_vertices: int) -> np.ndarray:
    path = (brief.cortex_masks or {}).get(side)
    if path is None:
        return np.ones(n_vertices, dtype=bool)
    values, _ = read_gifti_values(path)
    if len(values) != n_vertices:
        raise FileError(
            f"{path}: must have a value for each of the cortex's {n_vertices:,} vertices, but it has {len(values):,}."
        )
    return values != 0


def _nested(layers: dict[str, Surface], made: list[str], gap: float) -> tuple[dict[str, Surface], list[str]]:
    """All layers with the gap between them; what was given stays where it is as far as it can."""
    notes: dict[str, str] = {}
    layers = dict(layers)
    for outer, inner in (("scalp", "outer_skull"), ("outer_skull", "inner_skull")):
        where = f"{inner} within {outer}"
        for _ in range(SETTLING):
            before = layers[inner]
            surface, said = nest(where, before, layers[outer], gap, FREE if inner in made else FARTHEST)
            vertices, crossed = uncross(inner, surface.vertices, surface.faces)
            layers[inner] = Surface(vertices, surface.faces) if crossed else surface
            for note in said + crossed:
                notes.setdefault(note.split(":")[0], note)
            if layers[inner] is before:
                break
        else:
            if crossed:
                raise FileError(f"{where}: must keep {gap / MM:g} mm without passing through itself, but it does not.")
    return layers, list(notes.values())


def _mni_to_head(brief: SurfacesBrief, unit: float, to_head: np.ndarray) -> np.ndarray | None:
    if brief.mni_to_files is None:
        return None
    rows = brief.mni_to_files
    key = "head.mni152_to_files"
    if isinstance(rows, Path):
        key = str(rows)
        content = read_json(rows)
        with one_sentence(rows, "the transform"):
            good = isinstance(content, list) and len(content) in (3, 4) and all(len(row) == 4 for row in content)
            if not good:
                raise FileError(f"{rows}: must hold a list of 3 or 4 rows of 4 numbers, but it does not.")
            rows = [[*point_of(rows, "each row", row[:3]), float(row[3])] for row in content]
    matrix = np.eye(4)
    matrix[: len(rows)] = rows
    if len(rows) == 4 and not np.array_equal(matrix[3], [0, 0, 0, 1]):
        raise BriefError(f"{key}: the fourth row must be 0, 0, 0, 1, but it is {matrix[3].tolist()}.")
    size = np.cbrt(np.linalg.det(matrix[:3, :3])) * unit / MM
    if not np.isfinite(matrix).all() or not 0.5 < size < 2:
        raise BriefError(
            f"{key}: must map MNI152 millimetres to the files' unit without changing sizes beyond 0.5 to 2, but it "
            f"changes them by {size:.3g}."
        )
    to_files = matrix.copy()
    to_files[:3, :3] *= unit / MM  # metres to metres
    to_files[:3, 3] *= unit
    return to_head @ to_files
