"""The folder of a curve: every point as soon as it ends, so that a run cut short goes on where it was."""

from __future__ import annotations

import os
from pathlib import Path

from layout.outputs.curve_tables import Curve, CurvePoint, curve_columns, curve_csv, point_from, point_json
from layout.outputs.pictures.curve_figure import curve_picture
from layout.outputs.tables_folder import check_tables_dir, read_json, remove, start_folder, write_tables, write_whole

POINTS = "points"
NAMES = ("curve\\.(csv|png|svg)", "columns\\.json", f"{POINTS}/point-[0-9.e+-]+\\.json")


class CurveFolder:
    """Points and tables of one curve. Raises FileError where the folder cannot take them (see `check_tables_dir`)."""

    def __init__(self, out_dir: str | os.PathLike, key: str) -> None:
        self.place = check_tables_dir(out_dir, "curve", NAMES)
        self._key = key

    def _path(self, spent: float) -> Path:
        return self.place / POINTS / f"point-{spent:g}.json"

    def known(self, spent: float) -> CurvePoint | None:
        """The point of an earlier run of this very curve."""
        return point_from(read_json(self._path(spent)), self._key)

    def keep(self, point: CurvePoint) -> None:
        """Write a point, whole."""
        start_folder(self.place, "curve")
        write_whole(self._path(point.spent), point_json(point, self._key))

    def finish(self, curve: Curve) -> None:
        """Write table and figure; points of other curves go."""
        picture = curve_picture(curve)
        files = {"curve.png": picture.png, "curve.svg": picture.svg}
        files |= {"columns.json": curve_columns(curve), "curve.csv": curve_csv(curve)}
        write_tables(files, self.place, "curve")
        own = {self._path(point.spent) for point in curve.points}
        remove([path for path in (self.place / POINTS).glob("point-*.json") if path not in own])
