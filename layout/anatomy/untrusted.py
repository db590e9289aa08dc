"""Opening files that others wrote: sizes are checked before anything is read, and every failure is one sentence."""

from __future__ import annotations

import contextlib
import hashlib
import json
import zlib
from collections.abc import Iterator
from pathlib import Path

import numpy as np

from layout.errors import FileError, LayoutError

LARGEST_FILE = 250_000_000  # bytes, packed or not
LARGEST_TEXT = 100_000_000  # bytes of a mesh written as text, which takes ten times as much memory to read
LARGEST_NOTE = 10_000_000  # bytes of a file of landmarks or vertex numbers
_STEP = 1 << 20


@contextlib.contextmanager
def one_sentence(path: Path, what: str) -> Iterator[None]:
    """Whatever a reader raises inside becomes a FileError "<path>: <what> cannot be read (reason)."."""
    try:
        yield
    except LayoutError:
        raise
    except Exception as error:  # readers of damaged files raise of all kinds
        raise FileError(f"{path}: {what} cannot be read ({_reason(error)}).") from None


def _reason(error: Exception) -> str:
    if isinstance(error, MemoryError):
        return "it asks for more memory than there is"
    if isinstance(error, RecursionError):
        return "it is nested too deep"
    text = getattr(error, "strerror", None) or str(error) or type(error).__name__
    line = "".join(c if c.isprintable() else " " for c in text.splitlines()[0])
    return line[:120].rstrip(" .")


def read_bytes(path: Path, largest: int = LARGEST_FILE) -> bytes:
    """The file's bytes, unpacked where its name ends in .gz.

    Raises FileError where it is missing, no ordinary file, empty, damaged, or larger than `largest` bytes before or
    after unpacking; never more than that is held.
    """
    with one_sentence(path, "the file"):
        if not path.is_file():
            raise FileError(f"{path}: must be a file that exists, and there is none of this name.")
        _check_size(path, largest)
        with path.open("rb") as file:
            content = file.read(largest + 1)
        if path.name.lower().endswith(".gz"):
            content = _unpacked(path, content, largest)
    if not content:
        raise FileError(f"{path}: must not be empty.")
    return content


def file_digest(path: Path) -> bytes:
    """SHA-256 of a file of at most LARGEST_FILE bytes, as it lies on the disk. Raises FileError."""
    with one_sentence(path, "the file"):
        if not path.is_file():
            raise FileError(f"{path}: must be a file that exists, and there is none of this name.")
        _check_size(path, LARGEST_FILE)
        with path.open("rb") as file:
            return hashlib.file_digest(file, "sha256").digest()


def _check_size(path: Path, largest: int) -> None:
    size = path.stat().st_size
    if size > largest:
        raise FileError(f"{path}: must be at most {largest / 1e6:g} MB, but it has {size / 1e6:.0f} MB.")


def _unpacked(path: Path, packed: bytes, largest: int) -> bytes:
    parts, total = [], 0
    while packed:  # a gzip file may hold several members
        member = zlib.decompressobj(wbits=31)
        data = packed
        while not member.eof:
            part = member.decompress(data, _STEP)
            data = member.unconsumed_tail
            total += len(part)
            if total > largest:
                raise FileError(f"{path}: must unpack to at most {largest / 1e6:g} MB, but it unpacks to more.")
            if not part and not data and not member.eof:
                raise FileError(f"{path}: must be a whole gzip file, but it is cut off.")
            parts.append(part)
        packed = member.unused_data.lstrip(b"\0")
    return b"".join(parts)


def read_json(path: Path) -> object:
    """The content of a JSON file of at most LARGEST_NOTE bytes. Raises FileError."""
    content = read_bytes(path, LARGEST_NOTE)
    with one_sentence(path, "the JSON file"):
        return json.loads(content.decode("utf-8-sig"))


def point_of(path: Path, name: str, value: object) -> np.ndarray:
    """Three finite numbers (3,) from a JSON value. Raises FileError naming `name`."""
    good = isinstance(value, list) and len(value) == 3 and all(type(x) in (int, float) for x in value)
    if not good or not np.isfinite(point := np.array([_double(x) for x in value])).all():
        raise FileError(f"{path}: {name} must be a list of three numbers, but {str(value)[:60]} was given.")
    return point


def _double(value: float) -> float:
    try:
        return float(value)
    except OverflowError:
        return np.inf
