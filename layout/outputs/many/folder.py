"""The folder of many cells: every cell as soon as it ends, so that a run cut short goes on where it was."""

from __future__ import annotations

import os
from pathlib import Path

from layout.outputs.many.result import CellResult, Many, result_from, result_json
from layout.outputs.many.tables import many_files
from layout.outputs.tables_folder import check_tables_dir, read_json, remove, start_folder, write_tables, write_whole

CELLS = "cells"
TABLES = ("many.csv", "cells.csv", "layouts.csv", "many.json", "columns.json", "times.csv")
NAMES = (*(name.replace(".", "\\.") for name in TABLES), f"{CELLS}/cell-[0-9a-f]{{20}}\\.json")


class ManyFolder:
    """Cells and tables of one plan. Raises FileError where the folder cannot take them (see `check_tables_dir`)."""

    def __init__(self, out_dir: str | os.PathLike) -> None:
        self.place = check_tables_dir(out_dir, "many", NAMES)
        self._own: set[Path] = set()

    def _path(self, key: str) -> Path:
        path = self.place / CELLS / f"cell-{key[:20]}.json"
        self._own.add(path)
        return path

    def known(self, key: str) -> tuple[CellResult, float | None] | None:
        """The cell of an earlier run that this key stands for, and the seconds it took."""
        return result_from(read_json(self._path(key)), key)

    def keep(self, result: CellResult, key: str, seconds: float) -> None:
        """Write a cell, whole."""
        start_folder(self.place, "many")
        write_whole(self._path(key), result_json(result, key, round(seconds, 3)))

    def finish(self, found: Many) -> None:
        """Write the tables; cells of other plans go."""
        write_tables(many_files(found), self.place, "many")
        remove([path for path in (self.place / CELLS).glob("cell-*.json") if path not in self._own])
