"""Lead fields in files: written and read as .npz, .mat (version 5) or HDF5 (.h5, .hdf5), the same arrays in each.

    schema              1, the version of this list
    frame               "head": right-anterior-superior, origin midway between LPA and RPA, x towards RPA, z normal to
                        the plane of LPA, RPA and NAS
    position_unit       "m"
    channel_names       (n_channels) texts, all different
    channel_kinds       (n_channels) "electrode", "magnetometer" or "gradiometer"
    channel_units       (n_channels) "V/(A m)" for electrodes, "T/(A m)" for the others
    channel_positions   (n_channels, 3)
    channel_axes        (n_channels, 3) unit, zeros for electrodes
    source_positions    (n_sources, 3)
    source_normals      (n_sources, 3) unit, out of the cortex
    source_areas        (n_sources) m²
    gain                (n_channels, n_sources) for dipoles along the normals, or (n_channels, n_sources, 3) for free
                        ones, components in the head frame

Electric rows may have any constant added to them per source: a common reference is projected out. In .mat files texts
are char matrices, one row each (char(names) in MATLAB), and vectors may be rows or columns.
"""

from __future__ import annotations

import os
import tempfile
from collections.abc import Callable
from dataclasses import dataclass, fields
from pathlib import Path

import numpy as np

from layout.errors import FileError
from layout.physics.lead_field_hdf5 import read_hdf5, write_hdf5
from layout.physics.lead_field_mat import read_mat, write_mat
from layout.physics.lead_field_npz import read_npz, write_npz

SCHEMA = 1
FRAME, POSITION_UNIT = "head", "m"
UNIT_OF_KIND = {"electrode": "V/(A m)", "magnetometer": "T/(A m)", "gradiometer": "T/(A m)"}
UNIT_TOLERANCE = 1e-3  # of the length of an axis or a normal
# Texts are given as so many rows of n numbers, or of texts.
SHAPES = {
    "channel_names": ("n",),
    "channel_kinds": ("n",),
    "channel_units": ("n",),
    "channel_positions": ("n", 3),
    "channel_axes": ("n", 3),
    "source_positions": ("m", 3),
    "source_normals": ("m", 3),
    "source_areas": ("m",),
}
LARGEST = {
    "gain": (1e9, "in V/(A m) or T/(A m), at most 1e9"),  # a dipole's potential at 15 µm in brain
    "channel_positions": (1.0, "in metres, within 1 m of the origin"),
    "source_positions": (1.0, "in metres, within 1 m of the origin"),
    "channel_axes": (2.0, "unit vectors (zeros for electrodes)"),
    "source_normals": (2.0, "unit vectors"),
    "source_areas": (1.0, "in square metres, at most 1"),
}
FORMATS: dict[str, tuple[Callable, Callable]] = {
    ".npz": (read_npz, write_npz),
    ".mat": (read_mat, write_mat),
    ".h5": (read_hdf5, write_hdf5),
    ".hdf5": (read_hdf5, write_hdf5),
}


@dataclass(frozen=True)
class LeadFieldArrays:
    """A lead field with all that is needed to use it; names, shapes and units as in the files, see the module."""

    gain: np.ndarray
    channel_names: tuple[str, ...]
    channel_kinds: tuple[str, ...]
    channel_positions: np.ndarray
    channel_axes: np.ndarray
    source_positions: np.ndarray
    source_normals: np.ndarray
    source_areas: np.ndarray


def write_lead_field(path: Path, arrays: LeadFieldArrays) -> None:
    """The arrays to a file of the kind that its ending names; nothing half-written is left behind.

    Raises FileError for another ending or a place that cannot be written.
    """
    path = Path(path)
    _, write = _format(path)
    values: dict[str, object] = {
        "schema": np.int64(SCHEMA),
        "frame": FRAME,
        "position_unit": POSITION_UNIT,
        "channel_units": tuple(UNIT_OF_KIND[kind] for kind in arrays.channel_kinds),
    }
    values |= {field.name: getattr(arrays, field.name) for field in fields(LeadFieldArrays)}
    try:
        handle, beside = tempfile.mkstemp(dir=path.parent, prefix=".lead-field-", suffix=path.suffix)
        os.close(handle)
        try:
            write(Path(beside), values)
            os.replace(beside, path)
        except BaseException:
            Path(beside).unlink(missing_ok=True)
            raise
    except OSError as problem:
        raise FileError(f"{path}: must be a place that can be written, but {problem.strerror or problem}") from None


def read_lead_field(path: Path) -> LeadFieldArrays:
    """A lead field from a file of the kind that its ending names.

    The file is not trusted: nothing in it is executed, sizes are checked before anything is read. Raises FileError, in
    one sentence, for a missing, damaged, oversized or foreign file, a missing array, a wrong shape, kind, unit or
    frame, values that are not finite, axes that are not unit vectors.
    """
    path = Path(path)
    read, _ = _format(path)
    if not path.is_file():
        raise FileError(f"{path}: must exist and be a file, but there is no such file")
    wanted = {"schema": "number", "frame": "text", "position_unit": "text", "gain": "array"}
    wanted |= {
        name: "texts" if len(shape) == 1 and name != "source_areas" else "array" for name, shape in SHAPES.items()
    }
    found = read(path, wanted)
    for name, value in (("schema", SCHEMA), ("frame", FRAME), ("position_unit", POSITION_UNIT)):
        if found[name] != value:
            raise FileError(f"{path}: {name} must be {value!r}, but {_shown(found[name])} was given")
    _check_shapes(path, found)
    _check_values(path, found)
    return LeadFieldArrays(**{field.name: found[field.name] for field in fields(LeadFieldArrays)})


def check_lead_field_file(path: Path) -> None:
    """Raises FileError where the name's ending is no kind of lead field, or a folder has that name."""
    _format(path)
    if path.is_dir():
        raise FileError(f"{path}: a lead field must be a file, but a folder of this name was given")


def _format(path: Path) -> tuple[Callable, Callable]:
    known = FORMATS.get(path.suffix.lower())
    if known is None:
        raise FileError(f"{path}: a lead field's file must end in {', '.join(FORMATS)}, but {path.suffix!r} was given")
    return known


def _shown(value: object) -> str:
    text = repr(value)
    return text if len(text) <= 60 else text[:59] + "…"


def _check_shapes(path: Path, found: dict) -> None:
    gain = found["gain"]
    if gain.ndim not in (2, 3) or (gain.ndim == 3 and gain.shape[2] != 3) or gain.size == 0:
        raise FileError(
            f"{path}: gain must have the shape (n_channels, n_sources) or (n_channels, n_sources, 3), but {gain.shape} "
            "was given"
        )
    sizes = {"n": gain.shape[0], "m": gain.shape[1]}
    for name, shape in SHAPES.items():
        wanted = tuple(sizes.get(part, part) for part in shape)
        value = found[name]
        if isinstance(value, np.ndarray) and len(shape) == 1 and value.ndim == 2 and 1 in value.shape:
            found[name] = value = value.ravel()
        given = value.shape if isinstance(value, np.ndarray) else (len(value),)
        if given != wanted:
            raise FileError(
                f"{path}: {name} must have the shape {wanted} to go with a gain of {gain.shape}, but {given} was given"
            )


def _check_values(path: Path, found: dict) -> None:
    for name in ("gain", *SHAPES):
        if isinstance(found[name], np.ndarray) and not np.isfinite(found[name]).all():
            raise FileError(f"{path}: {name} must have finite values only, but nan or inf was given")
    names, kinds = found["channel_names"], found["channel_kinds"]
    if len(set(names)) < len(names):
        twice = next(name for name in names if names.count(name) > 1)
        raise FileError(f"{path}: channel_names must all differ, but {_shown(twice)} was given twice")
    for kind, unit in zip(kinds, found["channel_units"], strict=True):
        if kind not in UNIT_OF_KIND:
            raise FileError(f"{path}: channel_kinds must be {', '.join(UNIT_OF_KIND)}, but {_shown(kind)} was given")
        if unit != UNIT_OF_KIND[kind]:
            raise FileError(
                f"{path}: channel_units must be {UNIT_OF_KIND[kind]!r} for a channel that is a {kind}, but "
                f"{_shown(unit)} was given"
            )
    for name, (largest, rule) in LARGEST.items():
        most = np.abs(found[name]).max()
        if most > largest:
            raise FileError(f"{path}: {name} must be {rule}, but {most:g} was given")
    lengths = np.linalg.norm(found["channel_axes"], axis=1)
    expected = np.array([0.0 if kind == "electrode" else 1.0 for kind in kinds])
    _check_lengths(path, "channel_axes", lengths, expected, "unit vectors (zeros for electrodes)")
    lengths = np.linalg.norm(found["source_normals"], axis=1)
    _check_lengths(path, "source_normals", lengths, np.ones_like(lengths), "unit vectors")
    if (found["source_areas"] <= 0).any():
        worst = found["source_areas"].min()
        raise FileError(f"{path}: source_areas must be greater than 0, but {worst:g} was given")


def _check_lengths(path: Path, name: str, lengths: np.ndarray, expected: np.ndarray, rule: str) -> None:
    off = np.abs(lengths - expected)
    worst = int(np.argmax(off))
    if off[worst] > UNIT_TOLERANCE:
        raise FileError(f"{path}: {name} must be {rule}, but row {worst + 1} has the length {lengths[worst]:.6g}")
