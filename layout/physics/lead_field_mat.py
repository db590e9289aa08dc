"""Named arrays in .mat files of version 5, read without trust.

Read here and not by scipy.io.loadmat, which crashes the whole process on some damaged files. Only real full matrices of
numbers and of characters are known: structures, cells, objects, function handles and sparse matrices are refused by
the class in their header. Layout of the format: MathWorks, "MAT-File Format", level 5 (from memory; the tests compare
with scipy.io.savemat).
"""

from __future__ import annotations

import struct
import zlib
from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

import numpy as np

from layout.anatomy.untrusted import one_sentence
from layout.errors import FileError
from layout.physics import array_limits
from layout.physics.array_limits import as_wanted, check_array, check_texts, missing

_FILE_HEADER, _MATRIX, _COMPRESSED = 128, 14, 15
_CHAR = 4
_NUMBER_CLASSES = {6: "f8", 7: "f4", 8: "i1", 9: "u1", 10: "i2", 11: "u2", 12: "i4", 13: "u4", 14: "i8", 15: "u8"}
_OTHER_CLASSES = {1: "cell", 2: "structure", 3: "object", 5: "sparse matrix", 16: "function handle"}
_DATA_TYPES = {1: "i1", 2: "u1", 3: "i2", 4: "u2", 5: "i4", 6: "u4", 7: "f4", 9: "f8", 12: "i8", 13: "u8"}
_ENCODINGS = {16: "utf-8", 17: "utf-16", 18: "utf-32"}
_COMPLEX, _LOGICAL = 0x0800, 0x0200
_MATRIX_HEADER = 4096  # bytes that hold flags, dimensions and name of any sane matrix


class _Header(NamedTuple):
    """Class, flags, dimensions and name of a matrix, and where its data begin in the element."""

    kind: int
    flags: int
    shape: tuple[int, ...]
    name: str
    data_at: int


def write_mat(path: Path, values: dict[str, object]) -> None:
    """Each value as a matrix, texts as char matrices padded with blanks."""
    from scipy.io import savemat

    with path.open("wb") as file:
        savemat(file, {name: np.asarray(value) for name, value in values.items()}, format="5", oned_as="column")


def read_mat(path: Path, wanted: dict[str, str]) -> dict[str, object]:
    """The wanted arrays, name -> what they are to be (see `array_limits.as_wanted`). Raises FileError."""
    found: dict[str, object] = {}
    budget = array_limits.LARGEST_FILE
    with one_sentence(path, "the .mat file"):
        for order, packed, content in _elements(path):
            header = _matrix_header(order, _unfold(content, _MATRIX_HEADER) if packed else content[:_MATRIX_HEADER])
            if header.name not in wanted:
                continue
            if header.name in found:
                raise FileError(f"{path}: must hold each array once, but {header.name} is there twice")
            budget = _check(path, header, budget)
            # numbers may be stored in fewer bytes than they have, never in more
            room = _MATRIX_HEADER + 8 * int(np.prod(header.shape, dtype=object))
            value = _value(order, header, _unfold(content, room) if packed else content)
            found[header.name] = as_wanted(path, header.name, wanted[header.name], value)
    for name in wanted:
        if name not in found:
            raise missing(path, name)
    return found


def _elements(path: Path) -> Iterator[tuple[str, bool, bytes]]:
    """Byte order, whether it is compressed, and the content of each element of the file."""
    with path.open("rb") as file:
        start = file.read(_FILE_HEADER)
        if len(start) < _FILE_HEADER:
            raise ValueError("it ends in its header")
        order = {b"IM": "<", b"MI": ">"}.get(start[126:128])
        version = struct.unpack(f"{order or '<'}H", start[124:126])[0]
        if version == 0x0200 or start.startswith(b"\x89HDF"):
            raise FileError(
                f"{path}: must be of version 5 (save it with -v7, or as .h5), but a file of version 7.3 was given"
            )
        if order is None or version != 0x0100:
            raise FileError(f"{path}: must be a .mat file of version 5, but its header is not of one")
        size = path.stat().st_size
        if size > array_limits.LARGEST_FILE:
            raise FileError(
                f"{path}: must take at most {array_limits.LARGEST_FILE // 2**20} MiB, but takes {size} bytes"
            )
        while file.tell() < size:
            tag = file.read(8)
            kind, length = struct.unpack(f"{order}II", tag)
            if kind not in (_MATRIX, _COMPRESSED) or length > size - file.tell():
                raise ValueError("it has an element that is no matrix or does not fit into the file")
            yield order, kind == _COMPRESSED, file.read(length)


def _unfold(content: bytes, most: int) -> bytes:
    """The first bytes, `most` at the most, of the matrix in a compressed element (its own tag left out)."""
    return zlib.decompressobj().decompress(content, most + 8)[8:]


def _part(order: str, content: bytes, at: int) -> tuple[int, bytes, int]:
    """Type and bytes of the part of a matrix that begins at `at`, and where the next one does."""
    kind, length = struct.unpack_from(f"{order}II", content, at)
    if kind >> 16:  # a short one: length and type share the first word, the data are in the second
        kind, length, begin, after = kind & 0xFFFF, kind >> 16, at + 4, at + 8
        if length > 4:
            raise ValueError("it has a short part of more than four bytes")
    else:
        begin, after = at + 8, at + 8 + length + -length % 8
    if begin + length > len(content):
        raise ValueError("it has a part that does not fit into its matrix")
    return kind, content[begin : begin + length], after


def _matrix_header(order: str, content: bytes) -> _Header:
    kind, flags, at = _part(order, content, 0)
    if kind != 6 or len(flags) != 8:
        raise ValueError("it has a matrix without flags")
    word = struct.unpack(f"{order}I", flags[:4])[0]
    if word & 0xFF not in _NUMBER_CLASSES and word & 0xFF != _CHAR:
        return _Header(word & 0xFF, word, (), _name_of_other(order, content, at), 0)
    kind, dimensions, at = _part(order, content, at)
    if kind != 5 or len(dimensions) % 4 or not 8 <= len(dimensions) <= 128:
        raise ValueError("it has a matrix without dimensions")
    shape = struct.unpack(f"{order}{len(dimensions) // 4}i", dimensions)
    if min(shape) < 0:
        raise ValueError("it has a matrix of negative size")
    _, name, at = _part(order, content, at)
    return _Header(word & 0xFF, word, shape, name.decode("latin-1"), at)


def _name_of_other(order: str, content: bytes, at: int) -> str:
    """The name of a matrix of a class that is not read; opaque ones have theirs where the dimensions would be."""
    kind, first, after = _part(order, content, at)
    return (first if kind == 1 else _part(order, content, after)[1]).decode("latin-1")


def _check(path: Path, header: _Header, budget: int) -> int:
    """Refuses other classes, complex values, logical ones and sizes beyond the budget; returns what is left of it."""
    if header.kind not in _NUMBER_CLASSES and header.kind != _CHAR:
        other = _OTHER_CLASSES.get(header.kind, "value of another class")
        hint = " (texts are char matrices, one row each: char(names))" if other == "cell" else ""
        raise FileError(
            f"{path}: {header.name} must be a matrix of numbers or characters{hint}, but a {other} was given"
        )
    if header.flags & (_COMPLEX | _LOGICAL):
        raise FileError(f"{path}: {header.name} must be real numbers or characters, but other values were given")
    if header.kind == _CHAR:
        if len(header.shape) != 2:
            raise FileError(
                f"{path}: {header.name} must be a char matrix, one row for each text, but {header.shape} was given"
            )
        check_texts(path, header.name, *header.shape)
        return budget
    return check_array(path, header.name, header.shape, np.dtype(_NUMBER_CLASSES[header.kind]), budget)


def _value(order: str, header: _Header, content: bytes) -> np.ndarray | tuple[str, ...]:
    """Numbers in the header's shape, or the rows of a char matrix without the blanks at their ends."""
    kind, data, _ = _part(order, content, header.data_at)
    count = int(np.prod(header.shape, dtype=object))
    if header.kind == _CHAR:
        text = _characters(order, kind, data)
        if len(text) != count:
            raise ValueError(f"{header.name} says {header.shape} and holds {len(text)} characters")
        return tuple(text[row :: header.shape[0]].rstrip() for row in range(header.shape[0]))
    numbers = np.frombuffer(data, order + _DATA_TYPES[kind])
    if len(numbers) != count:
        raise ValueError(f"{header.name} says {header.shape} and holds {len(numbers)} numbers")
    return numbers.reshape(header.shape, order="F")


def _characters(order: str, kind: int, data: bytes) -> str:
    if kind in _ENCODINGS:
        suffix = "" if kind == 16 else "-le" if order == "<" else "-be"
        return data.decode(_ENCODINGS[kind] + suffix)
    return "".join(map(chr, np.frombuffer(data, order + _DATA_TYPES[kind])))
