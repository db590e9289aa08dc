"""Writes the output folder: everything into a hidden sibling first, then one rename. The one place that opens
files for writing."""

from __future__ import annotations

import contextlib
import json
import os
import secrets
import shutil
from collections.abc import Callable
from pathlib import Path

from layout.errors import FileError
from layout.outputs.design_files import RANKING, design_files, is_of_design
from layout.outputs.pictures.figure import Picture
from layout.outputs.result import DesignResult

Progress = Callable[[str], None]


def _silent(doing: str) -> None:
    """Progress that says nothing."""


def write_result(
    result: DesignResult, out_dir: str | os.PathLike, audit: bool = False, progress: Progress = _silent
) -> Path:
    """Write every file of `result` to `out_dir` (made, or replaced if it is an earlier output) and return its
    path; `progress` is told what is being made.

    On any exception, Ctrl-C included, nothing is left behind and an earlier output stays as it was. Raises
    FileError where `check_out_dir` does and where the system refuses to write.
    """
    out = check_out_dir(out_dir)
    fresh = out.parent / f".{out.name}-{secrets.token_hex(4)}.partial"
    made: list[Path] = []
    try:
        _make_parents(out.parent, made)
        fresh.mkdir()
        _fill(fresh, result, audit, progress)
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
        if not is_of_design(path.relative_to(out).as_posix()):
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


def _fill(folder: Path, result: DesignResult, audit: bool, progress: Progress) -> None:
    for name, content in design_files(result, audit, progress):
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        _write(path, content)


def _write(path: Path, content: str | bytes) -> None:
    path.write_bytes(content.encode("utf-8") if isinstance(content, str) else content)


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
