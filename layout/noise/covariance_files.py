"""A covariance that was computed elsewhere, from .npz or .npy, read without trust.

Arrays of the .npz: covariance (n, n); names, n texts; unit, one text or n of V, mV, uV, T, pT, fT; seconds, of
recording behind it. Optional: band_hz (2,); positions_mm (n, 3) in the head frame, needed for magnetometers, as are
axes (n, 3). An .npy holds the covariance alone; the brief says what is missing.
"""

from __future__ import annotations

import io
import zipfile
from pathlib import Path

import numpy as np

from layout.anatomy.untrusted import one_sentence, read_bytes
from layout.brief.objects import RecordingBrief
from layout.errors import FileError
from layout.noise.electrode_labels import Electrodes, find_electrodes, known_places
from layout.noise.recorded_covariance import RecordedCovariance, effective_samples
from layout.physics.lead_field_npz import read_npz
from layout.units import FT, MM, UV

UNITS = {"V": 1.0, "mV": 1e-3, "uV": UV, "µV": UV, "μV": UV, "nV": 1e-9, "T": 1.0, "pT": 1e-12, "fT": FT}
MOST_CHANNELS = 1000
LARGEST_ARRAY = 10_000_000  # bytes: MOST_CHANNELS squared doubles and some room
SYMMETRIC = 1e-6  # relative: files of single precision
NEGATIVE = 1e-6  # of the largest eigenvalue: as far below 0 may rounding bring the smallest

_WANTED = {"covariance": "array", "names": "texts", "unit": "texts", "seconds": "number"}
_OPTIONAL = {"band_hz": "array", "positions_mm": "array", "axes": "array"}


def covariance_from_arrays(
    recording: RecordingBrief, noise_band: tuple[float, float], standard: dict[str, np.ndarray]
) -> RecordedCovariance:
    """The covariance in a file of arrays; see `read_recording`. Raises FileError, BriefError."""
    path = recording.file
    found = _arrays(recording)
    labels, units = list(found["names"]), _units(path, found["unit"], len(found["names"]))
    covariance = _checked(path, found["covariance"], len(labels))
    size = np.array([UNITS[unit] for unit in units])
    covariance = covariance * size[:, None] * size
    magnetic = np.array([unit.endswith("T") for unit in units])
    axes, listed = _axes(path, found, magnetic), _positions(path, found, magnetic)
    places = known_places(recording, standard)
    if listed is not None:
        own = {label: point for label, point, coil in zip(labels, listed, magnetic, strict=True) if not coil}
        places = {name: point for name, point in places.items() if name not in own} | own
    nothing = Electrodes(np.zeros(0, dtype=int), (), np.zeros((0, 3)), (), ())
    electrodes = nothing if magnetic.all() else find_electrodes(recording, labels, ~magnetic, places)
    coils = np.array([i for i in np.flatnonzero(magnetic) if labels[i] not in recording.bad], dtype=int)
    rows = np.concatenate([electrodes.rows, coils])
    band = tuple(float(edge) for edge in found["band_hz"]) if "band_hz" in found else recording.band or noise_band
    notes = electrodes.notes
    if magnetic.any():
        notes = tuple(one for one in notes if not one.startswith("left out, of no"))
    return RecordedCovariance(
        (*electrodes.names, *(labels[i] for i in coils)),
        covariance[np.ix_(rows, rows)],
        np.concatenate([electrodes.positions, listed[coils] if len(coils) else np.zeros((0, 3))]),
        axes[rows],
        (*electrodes.references, *[""] * len(coils)),
        effective_samples(band, found["seconds"]),
        found["seconds"],
        band,
        notes,
    )


def _arrays(recording: RecordingBrief) -> dict[str, object]:
    """What the file holds, and what the brief says where the file does not."""
    path = recording.file
    said = {"names": recording.channels, "unit": recording.unit and (recording.unit,), "seconds": recording.seconds}
    if path.suffix.lower() == ".npy":
        found = {"covariance": _read_npy(path)}
    else:
        with one_sentence(path, "the .npz file"), zipfile.ZipFile(path) as archive:
            inside = {info.filename.removesuffix(".npy"): info.file_size for info in archive.infolist()}
        large = next((name for name in (*_WANTED, *_OPTIONAL) if inside.get(name, 0) > LARGEST_ARRAY), None)
        if large is not None:
            raise FileError(
                f"{path}: arrays must be of at most {LARGEST_ARRAY / 1e6:g} MB, but {large} is of "
                f"{inside[large] / 1e6:.0f} MB."
            )
        wanted = {name: kind for name, kind in _WANTED.items() if name in inside or said.get(name) is None}
        found = read_npz(path, wanted | {name: kind for name, kind in _OPTIONAL.items() if name in inside})
    found = {name: value for name, value in said.items() if value is not None} | found
    for name in _WANTED:
        if name not in found:
            key = {"names": "channels"}.get(name, name)
            raise FileError(f"{path}: holds a covariance alone, so noise.recording.{key} must be given, but it is not.")
    if not 0 < found["seconds"] < 1e9:
        raise FileError(f"{path}: seconds must be a positive number, but {found['seconds']:g} was given.")
    edges = found.get("band_hz")
    if edges is not None and not (edges.shape == (2,) and 0 < edges[0] < edges[1] < np.inf):
        raise FileError(f"{path}: band_hz must be two increasing frequencies, but it is {str(edges)[:60]}.")
    return found


def _read_npy(path: Path) -> np.ndarray:
    content = read_bytes(path)
    with one_sentence(path, "the .npy file"):
        file = io.BytesIO(content)
        version = np.lib.format.read_magic(file)
        read = {(1, 0): np.lib.format.read_array_header_1_0, (2, 0): np.lib.format.read_array_header_2_0}
        if version not in read:
            raise ValueError(f"it is of array format version {version}")
        shape, fortran, dtype = read[version](file)
        if dtype.kind not in "fiu" or dtype.fields is not None or len(shape) != 2:
            raise ValueError(f"it holds no matrix of numbers but {str(dtype)[:40]} of shape {str(shape)[:40]}")
        count = int(shape[0]) * int(shape[1])
        if count * dtype.itemsize != len(content) - file.tell():
            raise ValueError(f"it says {shape} and holds {len(content) - file.tell()} bytes")
        matrix = np.frombuffer(content, dtype, count, file.tell())
        return matrix.reshape(shape, order="F" if fortran else "C").astype(float)


def _units(path: Path, units: tuple[str, ...], n: int) -> tuple[str, ...]:
    units = units * n if len(units) == 1 else units
    wrong = next((unit for unit in units if unit not in UNITS), None)
    if wrong is not None:
        raise FileError(f"{path}: unit must be one of {', '.join(UNITS)}, but {wrong!r} was given.")
    if len(units) != n:
        raise FileError(f"{path}: unit must be one text or one for each of the {n} names, but there are {len(units)}.")
    return units


def _checked(path: Path, covariance: np.ndarray, n: int) -> np.ndarray:
    if covariance.shape != (n, n):
        raise FileError(
            f"{path}: covariance must be square with a row for each of the {n} names, but it is of shape "
            f"{covariance.shape}."
        )
    if n > MOST_CHANNELS:
        raise FileError(f"{path}: covariance must be of at most {MOST_CHANNELS} channels, but it is of {n}.")
    if not np.isfinite(covariance).all():
        raise FileError(f"{path}: covariance must be finite numbers, but it holds others.")
    size = np.sqrt(np.maximum(np.diag(covariance), 0))
    if (np.abs(covariance - covariance.T) > SYMMETRIC * np.outer(size, size) + np.finfo(float).tiny).any():
        raise FileError(f"{path}: covariance must be symmetric, but it is not.")
    unit = np.where(size > 0, size, 1.0)
    own = np.linalg.eigvalsh((covariance + covariance.T) / 2 / unit[:, None] / unit)
    if own[0] < -NEGATIVE * max(own[-1], 1.0):
        raise FileError(
            f"{path}: covariance must have no negative eigenvalue, but one is {own[0] / own[-1]:.2g} of the largest."
        )
    return (covariance + covariance.T) / 2


def _axes(path: Path, found: dict[str, object], magnetic: np.ndarray) -> np.ndarray:
    axes = np.zeros((len(magnetic), 3))
    if not magnetic.any():
        return axes
    given = found.get("axes")
    if given is None or given.shape != axes.shape or not np.isfinite(given).all():
        raise FileError(f"{path}: axes must be an array (n, 3) of finite numbers where there are magnetometers.")
    length = np.linalg.norm(given, axis=1)
    if (np.abs(length[magnetic] - 1) > 1e-3).any():
        raise FileError(f"{path}: axes of magnetometers must be of length 1, but one is {length[magnetic].min():g}.")
    axes[magnetic] = given[magnetic] / length[magnetic, None]
    return axes


def _positions(path: Path, found: dict[str, object], magnetic: np.ndarray) -> np.ndarray | None:
    given = found.get("positions_mm")
    if given is None and not magnetic.any():
        return None
    if given is None or given.shape != (len(magnetic), 3) or not (np.abs(given) < 1000).all():
        raise FileError(
            f"{path}: positions_mm must be an array (n, 3) of numbers below 1000 where it is needed or given."
        )
    return given * MM
