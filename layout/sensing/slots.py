"""A helmet's slot table (CSV): where each slot holds a housing, which way it points, how far it can be
pushed in.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from layout.errors import FileError
from layout.units import MM

COLUMNS = ("name", "x_mm", "y_mm", "z_mm", "axis_x", "axis_y", "axis_z", "travel_mm")
_UNIT_TOLERANCE = 0.01


@dataclass(frozen=True)
class Slots:
    """Slots of a helmet, in the head frame.

    names; faces (n, 3) [m]: centre of the housing's face when fully withdrawn; axes (n, 3): outward unit
    vectors; travel (n,) [m]: how far the housing can slide inwards along its axis.
    """

    names: tuple[str, ...]
    faces: np.ndarray
    axes: np.ndarray
    travel: np.ndarray


def read_slots(path: Path) -> Slots:
    """Slots from a CSV with the columns of COLUMNS (others are ignored).

    Raises FileError for a missing or malformed file, a missing column, a repeated or empty name, a value
    that is not a finite number, an axis that is not a unit vector to 1 %, a negative travel.
    """
    path = Path(path)
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            reader = csv.reader(file)
            header = [column.strip() for column in next(reader, [])]
            rows = [(reader.line_num, row) for row in reader if any(field.strip() for field in row)]
    except FileNotFoundError:
        raise FileError(f"{path}: must exist, but there is no such file") from None
    except (OSError, UnicodeDecodeError, csv.Error) as problem:
        raise FileError(f"{path}: must be a readable UTF-8 CSV file, but {problem}") from None
    missing = [column for column in COLUMNS if column not in header]
    if missing:
        raise FileError(f"{path}: must have the columns {', '.join(COLUMNS)}, but lacks {', '.join(missing)}")
    if not rows:
        raise FileError(f"{path}: must list at least one slot, got none")
    at = [header.index(column) for column in COLUMNS]
    names: list[str] = []
    seen: set[str] = set()
    values = np.empty((len(rows), 7))
    for place, (number, row) in enumerate(rows):
        if len(row) != len(header):
            raise FileError(f"{path} line {number}: must have {len(header)} fields as the header has, got {len(row)}")
        name = row[at[0]].strip()
        if not name:
            raise FileError(f"{path} line {number}: name must not be empty, got {row[at[0]]!r}")
        if name in seen:
            raise FileError(f"{path} line {number}: names must be unique, got {name!r} again")
        seen.add(name)
        names.append(name)
        for column, (key, index) in enumerate(zip(COLUMNS[1:], at[1:], strict=True)):
            try:
                values[place, column] = float(row[index])
            except ValueError:
                values[place, column] = np.nan
            if not np.isfinite(values[place, column]):
                raise FileError(f"{path} line {number}: {key} must be a finite number, got {row[index]!r}")
        length = np.linalg.norm(values[place, 3:6])
        if abs(length - 1) > _UNIT_TOLERANCE:
            raise FileError(f"{path} line {number}: axis must be a unit vector (length 1), got length {length:.4g}")
        if values[place, 6] < 0:
            raise FileError(f"{path} line {number}: travel_mm must not be negative, got {values[place, 6]:g}")
    axes = values[:, 3:6] / np.linalg.norm(values[:, 3:6], axis=1, keepdims=True)
    return Slots(tuple(names), values[:, :3] * MM, axes, values[:, 6] * MM)
