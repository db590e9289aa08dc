"""Solved boundary-element systems, kept in the user's cache folder as plain arrays.

A file is named by the SHA-256 of what it depends on and holds the SHA-256 of what it contains. The folder is kept under
a size by dropping the files not used for longest.
"""

from __future__ import annotations

import contextlib
import hashlib
import os
import tempfile
from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np

from layout.anatomy.cache import DamagedFileError, cache_folder
from layout.anatomy.head import Surface
from layout.physics.boundary_system import VERSION, SolvedSystem

LARGEST = 2 * 1024**3  # bytes of all solved systems together
PREFIX = "boundary-"


def load_or_solve(
    surfaces: Sequence[Surface], conductivities: Sequence[float], solve: Callable[[], SolvedSystem]
) -> SolvedSystem:
    """The solved system of these surfaces and conductivities, or solve() and keep it.

    A damaged file is replaced. A folder that cannot be written is no error: the system is then solved each time.
    """
    path = cache_folder() / f"{PREFIX}{key(surfaces, conductivities)}.npz"
    with contextlib.suppress(Exception):  # a damaged file can fail in any way; solving anew mends them all
        found = _read(path)
        os.utime(path)
        return found
    solved = solve()
    with contextlib.suppress(OSError):
        _write(path, solved)
        _drop_oldest(path.parent, keep=path)
    return solved


def load_or_compute(ingredients: Sequence[np.ndarray], compute: Callable[[], np.ndarray]) -> np.ndarray:
    """The array that follows from these arrays, or compute() and keep it; kept as `load_or_solve` does."""
    path = cache_folder() / f"{PREFIX}{_digest([np.asarray(one) for one in ingredients])}.npz"
    with contextlib.suppress(Exception):  # as above
        with np.load(path, allow_pickle=False) as file:
            found, written = file["array"], str(file["digest"])
        if written == _digest([found]):
            os.utime(path)
            return found
    computed = np.ascontiguousarray(compute())
    with contextlib.suppress(OSError):
        _save(path, {"array": computed, "digest": np.array(_digest([computed]))})
        _drop_oldest(path.parent, keep=path)
    return computed


def key(surfaces: Sequence[Surface], conductivities: Sequence[float]) -> str:
    """SHA-256 (hexadecimal) of the arrays and the version of the solver."""
    arrays = [np.asarray(conductivities, float)]
    for surface in surfaces:
        arrays += [np.asarray(surface.vertices, float), np.asarray(surface.faces, np.int64)]
    return _digest(arrays)


def _digest(arrays: Sequence[np.ndarray]) -> str:
    digest = hashlib.sha256(f"boundary elements {VERSION}".encode())
    for array in arrays:
        digest.update(f"{array.dtype.str} {array.shape}".encode())
        digest.update(np.ascontiguousarray(array).data)
    return digest.hexdigest()


def _read(path: Path) -> SolvedSystem:
    with np.load(path, allow_pickle=False) as file:
        solved = SolvedSystem(*(file[name] for name in SolvedSystem._fields))
        written = str(file["digest"])
    if written != _digest(solved):
        raise DamagedFileError(path)
    return solved


def _write(path: Path, solved: SolvedSystem) -> None:
    solved = SolvedSystem(*(np.ascontiguousarray(part) for part in solved))
    _save(path, solved._asdict() | {"digest": np.array(_digest(solved))})


def _save(path: Path, arrays: dict[str, np.ndarray]) -> None:
    """The whole file or none: written beside its place under another name, then renamed."""
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, unfinished = tempfile.mkstemp(dir=path.parent, suffix=".unfinished")
    try:
        with os.fdopen(handle, "wb") as file:
            np.savez(file, **arrays)
        os.replace(unfinished, path)
    except BaseException:
        os.unlink(unfinished)
        raise


def _drop_oldest(folder: Path, keep: Path) -> None:
    files = sorted(folder.glob(f"{PREFIX}*.npz"), key=lambda path: path.stat().st_mtime, reverse=True)
    total = 0
    for path in files:
        total += path.stat().st_size
        if total > LARGEST and path != keep:
            path.unlink(missing_ok=True)
