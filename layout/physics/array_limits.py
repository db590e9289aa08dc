"""Limits for array files that may come from anywhere."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from layout.errors import FileError

LARGEST_FILE = 2 * 2**30  # bytes of numbers in one file: 3,000 free channels x 30,000 sources
MOST_TEXTS = 100_000
LONGEST_TEXT = 200  # characters


def check_array(path: Path, name: str, shape: tuple[int, ...], dtype: np.dtype, budget: int) -> int:
    """Refuses anything but a plain array of numbers within the budget [bytes]; returns what is left of it.

    The size counted is that in memory as float64.
    """
    if dtype.kind not in "fiu" or dtype.fields is not None or dtype.subdtype is not None:
        raise FileError(f"{path}: {name} must be plain numbers, but {str(dtype)[:60]} was given")
    size = max(8, dtype.itemsize)
    for length in shape:
        size *= int(length)
    if size > budget:
        raise FileError(
            f"{path}: all arrays together must take at most {LARGEST_FILE // 2**20} MiB, but {name} says {shape}"
        )
    return budget - size


def check_texts(path: Path, name: str, count: int, longest: int) -> None:
    """Refuses more or longer texts than any list of channels has."""
    if count > MOST_TEXTS or longest > LONGEST_TEXT:
        raise FileError(
            f"{path}: {name} must be at most {MOST_TEXTS} texts of {LONGEST_TEXT} characters, but it says {count} of "
            f"{longest}"
        )


def missing(path: Path, name: str) -> FileError:
    """The refusal of a file without an array."""
    return FileError(f"{path}: must hold an array called {name}, but there is none")


def as_wanted(path: Path, name: str, kind: str, value: np.ndarray | tuple[str, ...]) -> object:
    """The value as what is wanted: "number", "text", "texts" or "array" (float64)."""
    if kind in ("text", "texts"):
        if not isinstance(value, tuple):
            raise FileError(f"{path}: {name} must be text, but numbers were given")
        if kind == "texts":
            return value
        if len(value) != 1:
            raise FileError(f"{path}: {name} must be one text, but {len(value)} were given")
        return value[0]
    if isinstance(value, tuple):
        raise FileError(f"{path}: {name} must be numbers, but text was given")
    if kind == "number":
        if value.size != 1:
            raise FileError(f"{path}: {name} must be one number, but an array of shape {value.shape} was given")
        return value.ravel()[0].item()
    return np.ascontiguousarray(value, dtype=float)
