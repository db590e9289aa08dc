"""Writes the output folder: everything into a hidden sibling first, then one rename. The one place that opens
files for writing."""

from __future__ import annotations

import contextlib
import json
import os
import re
import secrets
import shutil
from collections.abc import Callable
from pathlib import Path

from layout.errors import FileError
from layout.outputs.bids.channels import EEG_TEMPLATE, eeg_sidecar_template, housed_of
from layout.outputs.bids.dataset import PLACES, bids_files
from layout.outputs.bids.electrodes import electrodes_of
from layout.outputs.bids.magnetometers_table import (
    MAGNETOMETERS_JSON,
    MAGNETOMETERS_TSV,
    magnetometers_json,
    magnetometers_tsv,
)
from layout.outputs.cap.template import CAP_FILES, cap_files
from layout.outputs.columns import columns_json
from layout.outputs.evidence_files import CURVE_FILES, PLACEMENT_FILES, curve_files, placement_tables_of
from layout.outputs.helmet.files import HELMET_FILES, helmet_files
from layout.outputs.methods.text import methods_text
from layout.outputs.pictures.figure import Picture, scalp_pictures
from layout.outputs.pictures.files import PICTURE_FILES, picture_files
from layout.outputs.ranking import ranking_json
from layout.outputs.report.page import report_html
from layout.outputs.result import DesignResult, RankedLayout
from layout.outputs.sheet.files import SHEET_FILES, sheet_files
from layout.outputs.tables import polished_csv, ranking_csv, sensors_csv

RANKING = "ranking.json"
REPORT = "report.html"
AUDIT = "audit.npz"
Pictures = tuple[Picture, ...]

TOP_FILES: dict[str, Callable[[DesignResult, Pictures], str | bytes]] = {
    RANKING: lambda result, pictures: ranking_json(result),
    "ranking.csv": lambda result, pictures: ranking_csv(result),
    "columns.json": lambda result, pictures: columns_json(result.unit),
    "methods.txt": lambda result, pictures: methods_text(result),
}
LAYOUT_FILES: dict[str, Callable[[DesignResult, RankedLayout, Picture], str | bytes]] = {
    "sensors.csv": lambda result, layout, picture: sensors_csv(layout, result.unit),
    "scalp.png": lambda result, layout, picture: picture.png,
    "scalp.svg": lambda result, layout, picture: picture.svg,
    "scalp.pdf": lambda result, layout, picture: picture.pdf,
}
POLISHED_FILES: dict[str, Callable[[DesignResult], str | bytes]] = {
    "polished.csv": polished_csv,
}
ELECTRODE_FILES: dict[str, Callable[[DesignResult, RankedLayout], str | bytes]] = {
    EEG_TEMPLATE: eeg_sidecar_template,
}
HOUSED_FILES: dict[str, Callable[[DesignResult, RankedLayout], str | bytes]] = {
    MAGNETOMETERS_TSV: magnetometers_tsv,
    MAGNETOMETERS_JSON: magnetometers_json,
}


def write_result(result: DesignResult, out_dir: str | os.PathLike, audit: bool = False) -> Path:
    """Write every file of `result` to `out_dir` (made, or replaced if it is an earlier output) and return its
    path.

    On any exception, Ctrl-C included, nothing is left behind and an earlier output stays as it was. Raises
    FileError where `check_out_dir` does and where the system refuses to write.
    """
    out = check_out_dir(out_dir)
    fresh = out.parent / f".{out.name}-{secrets.token_hex(4)}.partial"
    made: list[Path] = []
    try:
        _make_parents(out.parent, made)
        fresh.mkdir()
        _fill(fresh, result, audit)
        _put_in_place(fresh, out)
    except BaseException as problem:
        shutil.rmtree(fresh, ignore_errors=True)
        _remove_empty(made)
        if isinstance(problem, OSError):
            reason = problem.strerror or str(problem)
            raise FileError(f"the output folder {str(out)!r} cannot be written: {reason}") from problem
        raise
    return out


def write_picture(picture: Picture, png: str | os.PathLike) -> Path:
    """Write a picture to the file `png` and, beside it, the same name ending in .svg; return the first's path.

    Both are replaced where they exist; neither is ever half-written. Raises FileError for another ending or where the
    system refuses.
    """
    place = check_picture_file(png)
    made: list[Path] = []
    unfinished: list[tuple[Path, Path]] = []
    try:
        _make_parents(place.parent, made)
        for path, content in ((place, picture.png), (place.with_suffix(".svg"), picture.svg)):
            unfinished.append((path.parent / f".{path.name}-{secrets.token_hex(4)}.partial", path))
            _write(unfinished[-1][0], content)
        for fresh, path in unfinished:
            fresh.replace(path)
    except BaseException as problem:
        for fresh, _ in unfinished:
            fresh.unlink(missing_ok=True)
        _remove_empty(made)
        if isinstance(problem, OSError):
            reason = problem.strerror or str(problem)
            raise FileError(f"the picture {str(png)!r} cannot be written: {reason}") from problem
        raise
    return place


def check_picture_file(png: str | os.PathLike) -> Path:
    """The absolute path of a picture's file. Raises FileError where its name does not end in .png or it is a folder."""
    place = Path(png).absolute()
    if place.suffix != ".png":
        raise FileError(f"the picture must be a file whose name ends in .png, but {str(png)!r} was given")
    if place.is_dir():
        raise FileError(f"the picture must be a file, but {str(png)!r} is a folder")
    return place


def write_new_text(text: str, path: str | os.PathLike) -> Path:
    """Write a text file that must not exist yet, whole or not at all. Raises FileError where it exists or cannot be."""
    place = Path(path)
    try:
        file = place.open("x", encoding="utf-8", newline="\n")
    except FileExistsError:
        raise FileError(f"the file {str(path)!r} must not exist yet: it is not overwritten") from None
    except (OSError, ValueError) as problem:
        reason = getattr(problem, "strerror", None) or str(problem)
        raise FileError(f"the file {str(path)!r} cannot be written: {reason}") from problem
    try:
        with file:
            file.write(text)
    except BaseException as problem:
        place.unlink(missing_ok=True)
        if isinstance(problem, OSError):
            raise FileError(f"the file {str(path)!r} cannot be written: {problem.strerror}") from problem
        raise
    return place


def check_out_dir(out_dir: str | os.PathLike) -> Path:
    """The absolute path of `out_dir` if it can take an output: new, empty, or nothing but an earlier output.

    Ask before a long computation, so that no work is lost. Raises FileError with the rule that is broken.
    """
    out = Path(out_dir).resolve()
    name = str(out_dir)
    if Path.cwd().is_relative_to(out):
        raise FileError(f"the output folder {name!r} must not be the current folder or one above it")
    if not out.exists():
        return out
    if not out.is_dir():
        raise FileError(f"the output folder {name!r} is a file: name a new folder or one from an earlier run")
    entries = sorted(path for path in out.rglob("*") if not path.is_dir() or path.is_symlink())
    if not entries and not any(out.iterdir()):
        return out
    if not _is_earlier_output(out):
        raise FileError(
            f"the output folder {name!r} holds something else: it must be new, empty or from an earlier run"
        )
    for path in entries:
        if not _is_our_file(path.relative_to(out)):
            raise FileError(
                f"the output folder {name!r} must hold only what an earlier run wrote, and it also holds "
                f"{str(path.relative_to(out))!r}"
            )
    return out


def _is_earlier_output(folder: Path) -> bool:
    try:
        content = json.loads((folder / RANKING).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return False
    return isinstance(content, dict) and isinstance(content.get("schema"), int) and "layouts" in content


def _is_our_file(path: Path) -> bool:
    if len(path.parts) == 1:
        return path.name in {*TOP_FILES, *POLISHED_FILES, *CURVE_FILES, AUDIT, REPORT}
    known = {*LAYOUT_FILES, *PICTURE_FILES, *PLACEMENT_FILES, *ELECTRODE_FILES, *HOUSED_FILES}
    known |= {*HELMET_FILES, *SHEET_FILES, *CAP_FILES, *PLACES}
    return "/".join(path.parts[1:]) in known and re.fullmatch(r"layout-\d+", path.parts[0]) is not None


def _make_parents(folder: Path, made: list[Path]) -> None:
    """Make `folder` and what is missing above it; each new one is appended to `made`, outermost first."""
    missing = [place for place in (folder, *folder.parents) if not place.exists()]
    for place in reversed(missing):
        place.mkdir()
        made.append(place)


def _remove_empty(made: list[Path]) -> None:
    for folder in reversed(made):
        with contextlib.suppress(OSError):  # someone else has put something there meanwhile
            folder.rmdir()


def _fill(folder: Path, result: DesignResult, audit: bool) -> None:
    pictures = scalp_pictures(result)
    for name, export in TOP_FILES.items():
        _write(folder / name, export(result, pictures))
    for name, content in curve_files(result).items():
        _write(folder / name, content)
    if result.polished is not None:
        for name, export in POLISHED_FILES.items():
            _write(folder / name, export(result))
    if audit:
        _write_audit(folder / AUDIT, result)
    for layout, picture in zip(result.layouts, pictures, strict=True):
        place = folder / f"layout-{layout.rank}"
        place.mkdir()
        for name, export in LAYOUT_FILES.items():
            _write(place / name, export(result, layout, picture))
        for name, text in placement_tables_of(result, layout).items():
            _write(place / name, text)
        for name, content in sheet_files(result, layout).items():
            _write(place / name, content)
        for name, content in cap_files(result, layout).items():
            _write(place / name, content)
        if electrodes_of(layout):
            for name, export in ELECTRODE_FILES.items():
                _write(place / name, export(result, layout))
        if housed_of(layout):
            for name, export in HOUSED_FILES.items():
                _write(place / name, export(result, layout))
        for name, text in bids_files(result, layout).items():
            (place / name).parent.mkdir(parents=True, exist_ok=True)
            _write(place / name, text)
    for rank, files in [*picture_files(result), *helmet_files(result)]:
        for name, content in files.items():
            _write(folder / f"layout-{rank}" / name, content)
    beside = sorted(path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file())
    _write(folder / REPORT, report_html(result, pictures, beside))  # last: it links to all the others


def _write(path: Path, content: str | bytes) -> None:
    path.write_bytes(content.encode("utf-8") if isinstance(content, str) else content)


def _write_audit(path: Path, result: DesignResult) -> None:
    import numpy as np

    np.savez_compressed(path, **{name: result.audit[name] for name in sorted(result.audit)})


def _put_in_place(fresh: Path, out: Path) -> None:
    """Rename `fresh` to `out`; an earlier output steps aside first and comes back if that fails."""
    if not out.exists():
        fresh.rename(out)
        return
    old = fresh.with_suffix(".old")
    try:
        out.rename(old)
        fresh.rename(out)
    except BaseException:
        if old.exists() and not out.exists():
            old.rename(out)
        raise
    shutil.rmtree(old, ignore_errors=True)
