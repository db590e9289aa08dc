"""Electrode positions from a BIDS `*_electrodes.tsv` (BIDS 1.11): tab separated, first columns name, x, y, z; or the
places on the scalp of a design's magnetometers.tsv.
"""

from __future__ import annotations

import json
import re
from pathlib import Path

import numpy as np

from layout.errors import FileError
from layout.sensing.magnetometers_file import is_magnetometers_header, read_magnetometers
from layout.units import MM

_SCALES = {"m": 1.0, "cm": 1e-2, "mm": MM}


def read_electrodes(path: Path) -> tuple[tuple[str, ...], np.ndarray]:
    """Names and positions (n, 3) [m] in the head frame; rows whose coordinates are n/a are left out.

    Of a magnetometers.tsv: the sites and their places on the scalp. Units are millimetres unless the coordinate-system
    file beside the table says m, cm or mm. Raises FileError for a missing or malformed file, a repeated or empty name,
    a coordinate that is not a finite number.
    """
    path = Path(path)
    lines = _text(path).splitlines()
    while lines and not lines[-1].strip():
        lines.pop()
    if lines and is_magnetometers_header(lines[0]):
        sensors = {one.site: one.scalp_position for one in read_magnetometers(path)}
        return tuple(sensors), np.array(list(sensors.values()))
    header = lines[0].split("\t") if lines else []
    if header[:4] != ["name", "x", "y", "z"]:
        raise FileError(
            f"{path}: the first columns must be name, x, y, z separated by tabs, got {lines[0] if lines else ''!r}"
        )
    names, positions, seen = [], [], set()
    for number, line in enumerate(lines[1:], start=2):
        fields = line.split("\t")
        if len(fields) != len(header):
            raise FileError(
                f"{path} line {number}: must have {len(header)} tab-separated fields as the header has, "
                f"got {len(fields)}"
            )
        name = fields[0].strip()
        if not name or name == "n/a":
            raise FileError(f"{path} line {number}: name must not be empty, got {fields[0]!r}")
        if name in seen:
            raise FileError(f"{path} line {number}: names must be unique, got {name!r} again")
        seen.add(name)
        if "n/a" in fields[1:4]:
            continue
        names.append(name)
        positions.append([_number(path, number, key, text) for key, text in zip("xyz", fields[1:4], strict=True)])
    if not names:
        raise FileError(f"{path}: must list at least one electrode with coordinates, got none")
    return tuple(names), np.array(positions) * _scale(path)


def _text(path: Path) -> str:
    try:
        return path.read_text(encoding="utf-8-sig")
    except FileNotFoundError:
        raise FileError(f"{path}: must exist, but there is no such file") from None
    except (OSError, UnicodeDecodeError) as problem:
        raise FileError(f"{path}: must be a readable UTF-8 text file, but {problem}") from None


def _number(path: Path, line: int, key: str, text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = np.nan
    if not np.isfinite(value):
        raise FileError(f"{path} line {line}: {key} must be a finite number or n/a, got {text!r}")
    return value


def _scale(path: Path) -> float:
    """Metres per unit of the table, from the coordinate-system file that belongs to it (which has no run
    entity).
    """
    stem = path.name.removesuffix("electrodes.tsv")
    if stem == path.name:
        return MM
    for start in dict.fromkeys([stem, re.sub(r"_run-[^_]+", "", stem), re.sub(r"_(run|task|acq)-[^_]+", "", stem)]):
        beside = path.with_name(f"{start}coordsystem.json")
        if not beside.exists():
            continue
        try:
            unit = json.loads(_text(beside)).get("EEGCoordinateUnits", "missing")
        except (json.JSONDecodeError, AttributeError):
            raise FileError(f"{beside}: must be a JSON object, but it cannot be read as one") from None
        if unit not in _SCALES:
            raise FileError(f"{beside}: EEGCoordinateUnits must be m, cm or mm, got {unit!r}")
        return _SCALES[unit]
    return MM
