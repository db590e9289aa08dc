"""Folders of evidence tables: each file whole or not there, in a folder of the command's own."""

from __future__ import annotations

import contextlib
import json
import os
import re
import secrets
from pathlib import Path
from typing import Any

from layout.errors import FileError

MADE_BY = "made-by.json"  # marks a folder as an earlier output of one command


def check_tables_dir(out_dir: str | os.PathLike, command: str, names: tuple[str, ...]) -> Path:
    """The absolute path of a folder that can take what `command` writes: new, empty, or its own earlier output.

    names: regular expressions of its files, relative to the folder. Raises FileError with the rule that is broken.
    """
    out, name = Path(out_dir).resolve(), str(out_dir)
    if Path.cwd().is_relative_to(out):
        raise FileError(f"the output folder {name!r} must not be the current folder or one above it")
    if out.exists() and not out.is_dir():
        raise FileError(f"the output folder {name!r} is a file: name a new folder or one from an earlier run")
    found = sorted(one.relative_to(out).as_posix() for one in out.rglob("*") if not one.is_dir() or one.is_symlink())
    if not found:
        return out
    marker = read_json(out / MADE_BY)
    if marker is None or marker.get("command") != command:
        raise FileError(
            f"the output folder {name!r} holds something else: it must be new, empty or from an earlier `layout "
            f"{command}`"
        )
    for one in found:
        known = one == MADE_BY or any(re.fullmatch(pattern, one) for pattern in names)
        if not known and not one.endswith(".partial"):
            raise FileError(
                f"the output folder {name!r} must hold only what `layout {command}` wrote, and it also holds {one!r}"
            )
    return out


def write_tables(files: dict[str, str | bytes], out: Path, command: str) -> None:
    """Write all files into the folder, each whole or not at all.

    All contents are made before the first is written. Raises FileError where the system refuses.
    """
    _mark(out, command)
    for name, content in files.items():
        write_whole(out / name, content)


def start_folder(out: Path, command: str) -> None:
    """Make the folder and mark it as the command's, before its parts are written one by one."""
    _mark(out, command)


def remove(paths: list[Path]) -> None:
    """Delete files of an earlier run."""
    for path in paths:
        path.unlink(missing_ok=True)


def write_whole(path: Path, content: str | bytes) -> None:
    """Write a file under another name beside it, then rename it: it is never there half-written."""
    fresh = path.parent / f".{path.name}-{secrets.token_hex(4)}.partial"
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        fresh.write_bytes(content.encode("utf-8") if isinstance(content, str) else content)
        fresh.replace(path)
    except BaseException as problem:
        with contextlib.suppress(OSError):
            fresh.unlink(missing_ok=True)
        if isinstance(problem, OSError):
            reason = problem.strerror or str(problem)
            raise FileError(f"the file {str(path)!r} cannot be written: {reason}") from problem
        raise


def read_json(path: Path) -> Any | None:
    """What a file of an earlier run holds; None where there is none or it cannot be read."""
    try:
        return json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None


def _mark(out: Path, command: str) -> None:
    write_whole(out / MADE_BY, json.dumps({"command": command, "schema": 1}) + "\n")
