"""Named arrays in HDF5 files, read without trust.

Only data sets that lie in the file's root are read: no links to other places or files, no external or virtual storage,
no compression but the library's own, no sizes beyond the limits. The library itself can hang or crash on damaged files
(seen with bytes changed at random), so the reading is done by a process of its own, of limited memory and time, which
passes the arrays on as an .npz file that is then read as any other.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np

import layout
from layout.anatomy.untrusted import one_sentence
from layout.errors import FileError
from layout.physics import array_limits
from layout.physics.array_limits import as_wanted, check_array, check_texts, missing
from layout.physics.lead_field_npz import read_npz, write_npz

OWN_FILTERS = (1, 2, 3)  # deflate, shuffle, checksum: what array files use of what comes with the library
PATIENCE = 20.0  # [s] to read a small file
BYTES_PER_SECOND = 20e6  # to allow on top of it
_REFUSED = 3  # exit code of the reading process when its output is the refusal
_READER = "import sys; sys.path.insert(0, sys.argv[1]); import layout.physics.lead_field_hdf5 as reader; reader.serve()"


def write_hdf5(path: Path, values: dict[str, object]) -> None:
    """Each value as a data set in the root, texts as UTF-8 of any length."""
    import h5py

    with h5py.File(path, "w") as file:
        for name, value in values.items():
            if isinstance(value, (str, tuple)):
                text = np.asarray(value, dtype=object)
                file.create_dataset(name, data=text, dtype=h5py.string_dtype("utf-8"), track_times=False)
            else:
                file.create_dataset(name, data=value, track_times=False)


def read_hdf5(path: Path, wanted: dict[str, str]) -> dict[str, object]:
    """The wanted arrays, name -> what they are to be (see `array_limits.as_wanted`). Raises FileError."""
    with one_sentence(path, "the HDF5 file"), tempfile.TemporaryDirectory() as folder:
        between = Path(folder) / "arrays.npz"
        root = str(Path(layout.__file__).parent.parent)
        command = [sys.executable, "-c", _READER, root, str(path.resolve()), str(between), json.dumps(wanted)]
        allowed = PATIENCE + path.stat().st_size / BYTES_PER_SECOND
        try:
            done = subprocess.run(
                command,
                env=os.environ | {"OPENBLAS_NUM_THREADS": "1"},
                stdin=subprocess.DEVNULL,
                capture_output=True,
                timeout=allowed,
                check=False,
            )
        except subprocess.TimeoutExpired:
            raise ValueError(f"reading it took longer than {allowed:.0f} s") from None
        if done.returncode == _REFUSED:
            raise FileError(f"{path}: {done.stdout.decode('utf-8', 'replace')}")
        if done.returncode != 0:
            raise ValueError("the HDF5 library failed on it")
        return read_npz(between, wanted)


def serve() -> None:
    """The reading process; its arguments are the package's folder, the file, where to write, what is wanted."""
    path, between, wanted = Path(sys.argv[2]), Path(sys.argv[3]), json.loads(sys.argv[4])
    _limit_memory()
    try:
        write_npz(between, _read(path, wanted))
    except FileError as refusal:
        sys.stdout.buffer.write(str(refusal).removeprefix(f"{path}: ").encode())
        sys.exit(_REFUSED)


def _limit_memory() -> None:
    """A cap on the process's memory, where the system knows how to set one."""
    try:
        import resource
    except ImportError:
        return
    most = 2 * array_limits.LARGEST_FILE + 2**31
    resource.setrlimit(resource.RLIMIT_AS, (most, resource.getrlimit(resource.RLIMIT_AS)[1]))


def _read(path: Path, wanted: dict[str, str]) -> dict[str, object]:
    import h5py

    found, budget = {}, array_limits.LARGEST_FILE
    with one_sentence(path, "the HDF5 file"), h5py.File(path, "r") as file:
        for name, kind in wanted.items():
            data = _data_set(path, file, name)
            if h5py.check_string_dtype(data.dtype) is not None:
                value = _texts(path, name, data)
            else:
                budget = check_array(path, name, data.shape, data.dtype, budget)
                value = np.asarray(data[()])
            found[name] = as_wanted(path, name, kind, value)
    return found


def _data_set(path: Path, file, name: str):
    """The data set of this name, its storage checked."""
    import h5py

    link = file.get(name, getlink=True)
    if link is None:
        raise missing(path, name)
    if not isinstance(link, h5py.HardLink):
        raise FileError(f"{path}: {name} must lie in the file itself, but it is a link to another place")
    data = file[name]
    if not isinstance(data, h5py.Dataset) or data.shape is None:
        raise FileError(f"{path}: {name} must be a data set with values, but it is something else")
    if data.is_virtual or data.external:
        raise FileError(f"{path}: {name} must lie in the file itself, but its values are elsewhere")
    plist = data.id.get_create_plist()
    filters = [plist.get_filter(i)[0] for i in range(plist.get_nfilters())]
    if any(code not in OWN_FILTERS for code in filters):
        raise FileError(f"{path}: {name} must be stored plainly or by gzip, but another compression was used")
    if data.chunks is not None:
        chunk = int(data.dtype.itemsize)
        for length in data.chunks:
            chunk *= int(length)
        if chunk > array_limits.LARGEST_FILE:
            raise FileError(f"{path}: {name} must be stored in pieces of a sane size, but it says {data.chunks}")
    return data


def _texts(path: Path, name: str, data) -> tuple[str, ...]:
    """Texts of fixed or of any length, one by one: each element of any length may point at the same large one."""
    if len(data.shape) > 1:
        raise FileError(f"{path}: {name} must be a list of texts, but an array of shape {data.shape} was given")
    count = data.shape[0] if data.shape else 1
    check_texts(path, name, count, data.dtype.itemsize if data.dtype.kind == "S" else 1)
    texts = []
    for i in range(count):
        value = data[i] if data.shape else data[()]
        text = value.decode("utf-8") if isinstance(value, bytes) else str(value)
        check_texts(path, name, count, len(text))
        texts.append(text)
    return tuple(texts)
