"""Sensors listed in a table: a BIDS electrodes.tsv, or the sensors.csv or magnetometers.tsv of a ranked layout."""

from __future__ import annotations

import csv
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from layout.errors import FileError
from layout.sensing.electrodes_file import read_electrodes
from layout.sensing.magnetometers_file import is_magnetometers_header, read_magnetometers
from layout.units import MM

_COLUMNS = ("number", "name", "kind", "scalp_x_mm", "scalp_y_mm", "scalp_z_mm", "axis")
_AXIS = ("axis_x", "axis_y", "axis_z")


@dataclass(frozen=True)
class ListedSensor:
    """One sensor. position (3,) [m] on the scalp or near it; kind and axis_name: as said, None where not.

    axes (m, 3): unit axes of its channels, none where not said. is_electrode: whether the table lists electrodes.
    """

    name: str
    position: np.ndarray
    kind: str | None
    axis_name: str | None
    axes: np.ndarray
    is_electrode: bool = False


def read_layout_table(path: Path) -> list[ListedSensor]:
    """The sensors of a table; the ground is none of them.

    Raises FileError for a missing or damaged table.
    """
    first = _first_line(path)
    if is_magnetometers_header(first):
        return [
            ListedSensor(one.name, one.scalp_position, one.kind, one.axis_name, one.axes)
            for one in read_magnetometers(path)
        ]
    if first.split(",")[0].strip() != "number":
        names, points = read_electrodes(path)
        grounds = _grounds(path)
        return [
            ListedSensor(name, point, None, None, np.zeros((0, 3)), True)
            for name, point in zip(names, points, strict=True)
            if name not in grounds
        ]
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            rows = list(csv.DictReader(file))
    except (OSError, UnicodeDecodeError, csv.Error) as problem:
        raise FileError(f"{path}: must be a readable UTF-8 CSV file, but {problem}") from None
    if not rows or any(rows[0].get(column) is None for column in _COLUMNS):
        raise FileError(f"{path}: must list sensors with the columns {', '.join(_COLUMNS)}")
    sensors: dict[str, ListedSensor] = {}
    for line, row in enumerate(rows, start=2):
        if row.get("role") == "ground":
            continue
        axis = _numbers(path, line, row, _AXIS)[None] if row.get("axis_x") else np.zeros((0, 3))
        known = sensors.get(row["number"])
        if known is None:
            point = _numbers(path, line, row, _COLUMNS[3:6]) * MM
            known = ListedSensor(row["name"], point, row["kind"], row["axis"] or None, np.zeros((0, 3)))
        sensors[row["number"]] = ListedSensor(
            known.name, known.position, known.kind, known.axis_name, np.vstack([known.axes, axis])
        )
    if not sensors:
        raise FileError(f"{path}: must list at least one sensor")
    return list(sensors.values())


def _first_line(path: Path) -> str:
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            return file.readline(2000)
    except FileNotFoundError:
        raise FileError(f"{path}: must exist, but there is no such file") from None
    except (OSError, UnicodeDecodeError) as problem:
        raise FileError(f"{path}: must be a readable UTF-8 text file, but {problem}") from None


def _grounds(path: Path) -> set[str]:
    """Names of the rows of an electrodes.tsv whose role, a column that our own tables have, is the ground."""
    with path.open(encoding="utf-8-sig", newline="") as file:
        rows = csv.DictReader(file, delimiter="\t", quoting=csv.QUOTE_NONE)
        return {row["name"] for row in rows if row.get("role") == "ground"}


def _numbers(path: Path, line: int, row: dict[str, str], columns: tuple[str, ...]) -> np.ndarray:
    try:
        values = np.array([float(row[column]) for column in columns])
    except (TypeError, ValueError, KeyError):
        values = np.full(3, np.nan)
    if not np.isfinite(values).all():
        raise FileError(f"{path} line {line}: {', '.join(columns[:-1])} and {columns[-1]} must be finite numbers")
    return values
