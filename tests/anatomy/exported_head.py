"""A head written to files, as a person's own surfaces would come."""

import json
from pathlib import Path

import nibabel as nib
import numpy as np
import trimesh

from layout.anatomy.frame import apply
from layout.anatomy.head import CortexVertices, Head, Landmarks, Sources, Surface
from layout.anatomy.mesh_graph import vertex_areas
from layout.anatomy.star_surface import icosphere
from layout.brief.objects import SurfacesBrief

LAYERS = ("scalp", "outer_skull", "inner_skull")
UNITS = {"mm": 1e-3, "m": 1.0}


def write_mesh(path: Path, vertices, faces, dtype=np.float64) -> Path:
    kind = path.suffix[1:]
    if kind == "gii":
        arrays = [
            nib.gifti.GiftiDataArray(
                np.asarray(vertices, dtype),
                intent="NIFTI_INTENT_POINTSET",
                datatype={np.float64: "NIFTI_TYPE_FLOAT64", np.float32: "NIFTI_TYPE_FLOAT32"}[dtype],
            ),
            nib.gifti.GiftiDataArray(np.asarray(faces, np.int32), intent="NIFTI_INTENT_TRIANGLE"),
        ]
        path.write_bytes(nib.GiftiImage(darrays=arrays).to_xml(mode="force"))
        return path
    mesh = trimesh.Trimesh(vertices, faces, process=False)
    options = {"digits": 17} if kind in ("off", "obj") else {}
    content = mesh.export(file_type=kind, **options)
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return path


def write_labels(path: Path, values, names=()) -> Path:
    image = nib.GiftiImage(
        darrays=[nib.gifti.GiftiDataArray(np.asarray(values, np.int32), intent="NIFTI_INTENT_LABEL")]
    )
    for number, name in enumerate(names):
        label = nib.gifti.GiftiLabel(key=number)
        label.label = name
        image.labeltable.labels.append(label)
    nib.save(image, path)
    return path


def write_head(
    head: Head,
    folder: Path,
    kind: str = "gii",
    unit: str = "m",
    pose=None,
    layers=LAYERS,
    cortex_sources=30_000,
    masks=True,
    points=("nas", "lpa", "rpa", "inion"),
    **more,
) -> SurfacesBrief:
    """All of a head as files in a frame of their own (pose (4, 4), metres), and the brief that reads them."""
    pose = np.eye(4) if pose is None else pose
    size = UNITS[unit]

    def out(p):
        return apply(pose, p) / size

    for name in layers:
        surface = getattr(head, name)
        write_mesh(folder / f"{name}.{kind}", out(surface.vertices), surface.faces)
    given = head.cortex_vertices
    cortex, mask = {}, {}
    for name, side in (("left", -1), ("right", 1)):
        rows = np.flatnonzero(given.side == side)
        faces = head.cortex_surface.faces[np.isin(head.cortex_surface.faces[:, 0], rows)] - rows[0]
        cortex[name] = write_mesh(folder / f"cortex_{name}.{kind}", out(given.positions[rows]), faces)
        mask[name] = write_labels(folder / f"mask_{name}.label.gii", given.source[rows] >= 0, ("wall", "cortex"))
    marks = {name: out(getattr(head.landmarks, name)).tolist() for name in points}
    marks |= {name: out(eye).tolist() for name, eye in zip(("left eye", "right eye"), head.eyes, strict=True)}
    (folder / "landmarks.json").write_text(json.dumps(marks))
    to_files = pose @ head.mni_to_head
    to_files[:3, :3] *= 1e-3 / size
    to_files[:3, 3] /= size
    return SurfacesBrief(
        cortex=cortex,
        landmarks=folder / "landmarks.json",
        **{name: folder / f"{name}.{kind}" for name in layers},
        **({"cortex_masks": mask} if masks else {}),
        unit=size,
        mni_to_files=tuple(map(tuple, to_files.tolist())),
        cortex_sources=cortex_sources,
        **more,
    )


def small_head() -> Head:
    """Ellipsoids of 642 vertices, and a cortex of two bumpy closed bodies: quick to read and check."""
    directions, faces = icosphere(3)
    axes = np.array([0.078, 0.098, 0.09])
    layers = {
        name: Surface(directions * (axes - less), faces) for name, less in zip(LAYERS, (0, 7e-3, 13e-3), strict=True)
    }
    bumps = 1 + 0.05 * np.sin(9 * directions[:, :1]) * np.cos(7 * directions[:, 1:2])
    half = directions * bumps * np.array([0.026, 0.072, 0.062])
    positions = np.vstack([half - np.array([0.031, 0, 0]), half + np.array([0.031, 0, 0])])
    mesh = Surface(positions, np.vstack([faces, faces + len(half)]))
    side = np.repeat(np.array([-1, 1], dtype=np.int8), len(half))
    areas = vertex_areas(mesh)
    return Head(
        name="small",
        **layers,
        landmarks=Landmarks(*np.array([[0, axes[1], 0], [-axes[0], 0, 0], [axes[0], 0, 0], [0, -axes[1], 0]])),
        cortex=Sources(positions, mesh.normals, areas, side, mesh.faces),
        eyes=np.array([[-0.03, 0.075, 0], [0.03, 0.075, 0]]),
        mni_to_head=np.eye(4),
        cortex_surface=mesh,
        cortex_vertices=CortexVertices(
            positions, areas, side, np.tile(np.arange(len(half)), 2), np.arange(2 * len(half)), one_file=False
        ),
    )
