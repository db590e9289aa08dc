"""A layout that exists already, found again among the candidates: by names, or by the positions of a table."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from scipy.spatial import cKDTree

from layout.brief.objects import Brief
from layout.errors import BriefError, FileError
from layout.sensing.candidates import Candidates
from layout.sensing.layout_table import read_layout_table
from layout.sensing.names import named_singles
from layout.units import MM

FARTHEST = 5e-3  # [m] a listed sensor farther from every candidate site is none of them


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
    sensors = read_layout_table(path)
    points = np.array([sensor.position for sensor in sensors])
    electrodes = [entry.name for entry in brief.stock if entry.kind == "electrode"]
    used = np.unique(singles.site)
    away, nearest = cKDTree(singles.sites.positions[used]).query(points)
    kind_names = np.array([entry.name for entry in brief.stock])[singles.kind]
    found: dict[str, np.ndarray] = {}
    for i, sensor in enumerate(sensors):
        name = sensor.name
        if away[i] > FARTHEST:
            raise FileError(
                f"{path}: sensors must be within {FARTHEST / MM:g} mm of a site where the stock may sit, but {name!r} "
                f"is {away[i] / MM:.1f} mm off"
            )
        here = np.flatnonzero(singles.site == used[nearest[i]])
        kinds = (electrodes or None) if sensor.is_electrode else [sensor.kind]
        if kinds is not None:
            here = here[np.isin(kind_names[here], kinds)]
        if sensor.axis_name is not None:
            here = here[[singles.axis_name[one] == sensor.axis_name for one in here]]
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
