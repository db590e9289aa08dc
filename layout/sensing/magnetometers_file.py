"""Magnetometers and gradiometers listed in a magnetometers.tsv, as a design writes it beside its BIDS files."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from layout.errors import FileError
from layout.units import MM

NEEDED = ("name", "number", "kind", "site", "axis", "axis_x", "axis_y", "axis_z", "scalp_x", "scalp_y", "scalp_z")
_MISSING = "n/a"


@dataclass(frozen=True)
class TabledSensor:
    """One sensor. name: of its candidate; scalp_position (3,) [m]; axes (m, 3): unit axes of its channels; kind and
    axis_name: None where the table has none."""

    name: str
    site: str
    kind: str | None
    axis_name: str | None
    scalp_position: np.ndarray
    axes: np.ndarray


def is_magnetometers_header(line: str) -> bool:
    """Whether the first line of a table is that of a magnetometers.tsv."""
    return {"axis_x", "scalp_x"} <= set(line.rstrip("\r\n").split("\t"))


def read_magnetometers(path: Path) -> list[TabledSensor]:
    """The sensors of the table, in the order of their first rows; lengths in the table are mm, head frame.

    Raises FileError for a missing or unreadable file, missing columns, rows of another length, and a place or axis that
    is not three finite numbers.
    """
    path = Path(path)
    try:
        lines = path.read_text(encoding="utf-8-sig").splitlines()
    except FileNotFoundError:
        raise FileError(f"{path}: must exist, but there is no such file") from None
    except (OSError, UnicodeDecodeError) as problem:
        raise FileError(f"{path}: must be a readable UTF-8 text file, but {problem}") from None
    header = lines[0].split("\t") if lines else []
    lacking = [column for column in NEEDED if column not in header]
    if lacking:
        raise FileError(f"{path}: must have the tab-separated columns {', '.join(NEEDED)}, but lacks {lacking[0]}")
    sensors: dict[str, TabledSensor] = {}
    for number, line in enumerate(lines[1:], start=2):
        if not line.strip():
            continue
        fields = line.split("\t")
        if len(fields) != len(header):
            raise FileError(
                f"{path} line {number}: must have {len(header)} tab-separated fields as the header has, got "
                f"{len(fields)}"
            )
        row = dict(zip(header, fields, strict=True))
        known = sensors.get(row["number"]) or _sensor(path, number, row)
        axis = _numbers(path, number, row, "axis_")
        sensors[row["number"]] = replace(known, axes=np.vstack([known.axes, axis]))
    if not sensors:
        raise FileError(f"{path}: must list at least one sensor")
    return list(sensors.values())


def _sensor(path: Path, line: int, row: dict[str, str]) -> TabledSensor:
    return TabledSensor(
        name=row["name"].removesuffix(" #1"),  # the channels of one sensor are numbered behind its name
        site=row["site"],
        kind=None if row["kind"] in ("", _MISSING) else row["kind"],
        axis_name=None if row["axis"] in ("", _MISSING) else row["axis"],
        scalp_position=_numbers(path, line, row, "scalp_") * MM,
        axes=np.zeros((0, 3)),
    )


def _numbers(path: Path, line: int, row: dict[str, str], prefix: str) -> np.ndarray:
    columns = [prefix + name for name in "xyz"]
    try:
        values = np.array([float(row[column]) for column in columns])
    except ValueError:
        values = np.full(3, np.nan)
    if not np.isfinite(values).all():
        given = ", ".join(row[column] for column in columns)
        raise FileError(f"{path} line {line}: {', '.join(columns)} must be finite numbers, got {given}")
    return values
