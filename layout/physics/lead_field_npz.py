"""Named arrays in .npz files, read without trust: no pickles, no size believed before it is checked."""

from __future__ import annotations

import zipfile
from pathlib import Path

import numpy as np

from layout.anatomy.untrusted import one_sentence
from layout.errors import FileError
from layout.physics import array_limits
from layout.physics.array_limits import as_wanted, check_array, check_texts, missing


def write_npz(path: Path, values: dict[str, object]) -> None:
    """Each value as an array, texts as unicode arrays; uncompressed, as gains do not compress."""
    with path.open("wb") as file:
        np.savez(file, allow_pickle=False, **{name: np.asarray(value) for name, value in values.items()})


def read_npz(path: Path, wanted: dict[str, str]) -> dict[str, object]:
    """The wanted arrays, name -> what they are to be (see `array_limits.as_wanted`). Raises FileError."""
    found = {}
    budget = array_limits.LARGEST_FILE
    with one_sentence(path, "the .npz file"), zipfile.ZipFile(path) as archive:
        for name, kind in wanted.items():
            members = [info for info in archive.infolist() if info.filename == f"{name}.npy"]
            if not members:
                raise missing(path, name)
            if len(members) > 1:
                raise FileError(f"{path}: must hold each array once, but {name} is there {len(members)} times")
            with archive.open(members[0]) as file:
                value, budget = _read_member(path, name, file, members[0].file_size, budget)
            found[name] = as_wanted(path, name, kind, value)
    return found


def _read_member(path: Path, name: str, file, size: int, budget: int) -> tuple[np.ndarray | tuple[str, ...], int]:
    """An array from an open member of `size` bytes: its header is checked against that size before data are read."""
    version = np.lib.format.read_magic(file)
    if version not in ((1, 0), (2, 0)):
        raise ValueError(f"{name} is of array format version {version}")
    read_header = np.lib.format.read_array_header_1_0 if version == (1, 0) else np.lib.format.read_array_header_2_0
    shape, fortran, dtype = read_header(file)
    texts = dtype.kind == "U" and dtype.itemsize > 0 and len(shape) <= 1
    if texts:
        check_texts(path, name, shape[0] if shape else 1, dtype.itemsize // 4)
    else:
        budget = check_array(path, name, shape, dtype, budget)
    count = 1
    for length in shape:
        count *= length
    if count * dtype.itemsize != size - file.tell():
        raise ValueError(f"{name} says {shape} and holds {size - file.tell()} bytes")
    data = file.read(count * dtype.itemsize)
    if len(data) != count * dtype.itemsize:
        raise ValueError(f"{name} ends early")
    value = np.frombuffer(data, dtype).reshape(shape, order="F" if fortran else "C")
    return (tuple(str(text) for text in value.ravel()) if texts else value), budget
