"""A layout that exists already, found again among the candidates: by names, or by the positions of a table."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
from scipy.spatial import cKDTree

from layout.brief.objects import Brief
from layout.errors import BriefError, FileError
from layout.sensing.candidates import Candidates
from layout.sensing.electrodes_file import read_electrodes
from layout.sensing.names import named_singles
from layout.units import MM

FARTHEST = 5e-3  # [m] a listed sensor farther from every candidate site is none of them
_SENSOR_COLUMNS = ("number", "name", "kind", "scalp_x_mm", "scalp_y_mm", "scalp_z_mm", "axis")


def existing_singles(brief: Brief, candidates: Candidates) -> dict[str, np.ndarray]:
    """Each sensor of the existing layout, as said in messages, and the single sensors that it may be.

    Several where the brief does not say which axis or kind. A table is an electrodes.tsv or the sensors.csv of a ranked
    layout, matched by position to the nearest site within 5 mm (names repeat from grid to grid). Raises BriefError for
    a name that is no site or candidate, FileError for a damaged table and a sensor that is at none of the sites.
    """
    if brief.existing is None:
        return {}
    path = brief.existing.layout_tsv
    if path is None:
        return {
            f"existing.sites {name!r}": named_singles(candidates, name, "existing.sites")
            for name in brief.existing.sites
        }
    return _from_table(brief, candidates.singles, path)


def _from_table(brief: Brief, singles: Candidates, path: Path) -> dict[str, np.ndarray]:
    if _is_sensor_table(path):
        names, points, kinds, axes = _read_sensors(path)
    else:
        names, points = read_electrodes(path)
        electrodes = [entry.name for entry in brief.stock if entry.kind == "electrode"]
        kinds, axes = [electrodes or None] * len(names), [None] * len(names)
    used = np.unique(singles.site)
    away, nearest = cKDTree(singles.sites.positions[used]).query(points)
    kind_names = np.array([entry.name for entry in brief.stock])[singles.kind]
    found: dict[str, np.ndarray] = {}
    for i, name in enumerate(names):
        if away[i] > FARTHEST:
            raise FileError(
                f"{path}: sensors must be within {FARTHEST / MM:g} mm of a site where the stock may sit, but {name!r} "
                f"is {away[i] / MM:.1f} mm off"
            )
        here = np.flatnonzero(singles.site == used[nearest[i]])
        if kinds[i] is not None:
            here = here[np.isin(kind_names[here], kinds[i])]
        if axes[i] is not None:
            here = here[[singles.axis_name[one] == axes[i] for one in here]]
        if len(here) == 0:
            raise FileError(f"{path}: sensors must be of a kind and axis that the stock has there, but {name!r} is not")
        found[f"existing.layout_tsv {name!r}"] = here
    spoken_for: dict[tuple[int, ...], str] = {}
    for said, here in found.items():
        other = spoken_for.setdefault(tuple(here), said)
        if other != said:
            raise FileError(f"{path}: sensors must be at sites of their own, but {other} and {said} share one")
    return found


def only_choice(here: np.ndarray, said: str) -> int:
    """The one single sensor that is meant; BriefError where it may be several."""
    if len(here) > 1:
        raise BriefError(
            f"{said}: must mean a single candidate (such as 'S012 tangent1') where the layout is kept, but "
            f"{len(here)} are there"
        )
    return int(here[0])


def _is_sensor_table(path: Path) -> bool:
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            return file.readline(2000).split(",")[0].strip() == "number"
    except (OSError, UnicodeDecodeError) as problem:
        raise FileError(f"{path}: must be a readable UTF-8 text file, but {problem}") from None


def _read_sensors(path: Path) -> tuple[list[str], np.ndarray, list[list[str]], list[str | None]]:
    """Names, scalp positions (n, 3) [m], kinds and axes of a sensors.csv, one row a sensor."""
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            rows = list(csv.DictReader(file))
    except (OSError, UnicodeDecodeError, csv.Error) as problem:
        raise FileError(f"{path}: must be a readable UTF-8 CSV file, but {problem}") from None
    lacking = [column for column in _SENSOR_COLUMNS if not rows or rows[0].get(column) is None]
    if lacking:
        raise FileError(f"{path}: must list sensors with the columns {', '.join(_SENSOR_COLUMNS)}")
    first_rows = {row["number"]: (number, row) for number, row in reversed(list(enumerate(rows, start=2)))}
    names, points, kinds, axes = [], [], [], []
    for number, row in sorted(first_rows.values(), key=lambda item: item[0]):
        try:
            point = [float(row[f"scalp_{letter}_mm"]) for letter in "xyz"]
        except (TypeError, ValueError):
            point = [np.nan]
        if not np.isfinite(point).all() or row["axis"] is None:
            raise FileError(f"{path} line {number}: scalp_x_mm, scalp_y_mm and scalp_z_mm must be finite numbers")
        names.append(row["name"])
        points.append(point)
        kinds.append([row["kind"]])
        axes.append(row["axis"])
    return names, np.array(points) * MM, kinds, axes
