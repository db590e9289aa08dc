"""GIFTI files, looked through before the library reads them.

A first pass over the XML lets nothing harmful by: no entities of the file's own (they can multiply without end), no
data in other files, no array larger than allowed, no packed array that unpacks to more than its dimensions say.
"""

from __future__ import annotations

import base64
import math
import zlib
from dataclasses import dataclass
from pathlib import Path
from typing import NamedTuple
from xml.parsers import expat

import numpy as np

from layout.anatomy.untrusted import one_sentence, read_bytes
from layout.errors import FileError

MOST_VALUES = 6_000_000  # of one array: a million vertices or two million faces
_ITEM_BYTES = {"NIFTI_TYPE_UINT8": 1, "NIFTI_TYPE_INT32": 4, "NIFTI_TYPE_FLOAT32": 4, "NIFTI_TYPE_FLOAT64": 8}
_ENCODINGS = ("ASCII", "Base64Binary", "GZipBase64Binary")
POINTS, TRIANGLES = 1008, 1009  # intent codes of the format


class GiftiSurface(NamedTuple):
    """vertices (n, 3) in the file's unit, faces (m, 3), moved: the file has a transform that was not applied."""

    vertices: np.ndarray
    faces: np.ndarray
    moved: bool


def read_gifti_surface(path: Path) -> GiftiSurface:
    """The one surface of a GIFTI file. Raises FileError where it is damaged, hostile, or holds no surface."""
    image = _image(path)
    points = image.get_arrays_from_intent(POINTS)
    triangles = image.get_arrays_from_intent(TRIANGLES)
    if len(points) != 1 or len(triangles) != 1:
        raise FileError(
            f"{path}: must hold one array of points and one of triangles, but it holds {len(points)} and "
            f"{len(triangles)}."
        )
    systems = points[0].coordsys
    systems = systems if isinstance(systems, (list, tuple)) else [systems]
    moved = any(s is not None and s.xform is not None and not np.allclose(s.xform, np.eye(4)) for s in systems)
    return GiftiSurface(np.asarray(points[0].data, float), np.asarray(triangles[0].data), moved)


def read_gifti_values(path: Path) -> tuple[np.ndarray, dict[int, str]]:
    """One number a vertex (n,) and the names of the labels by number (empty where there are none).

    The file must hold a single array of one number for each vertex. Raises FileError.
    """
    image = _image(path)
    arrays = [np.asarray(array.data) for array in image.darrays]
    values = [a.reshape(-1) for a in arrays if a.ndim == 1 or (a.ndim == 2 and 1 in a.shape)]
    if len(arrays) != 1 or len(values) != 1:
        raise FileError(f"{path}: must hold one array with one number for each vertex, but it holds {len(arrays)}.")
    with one_sentence(path, "the label table"):
        labels = {int(key): str(name) for key, name in image.labeltable.get_labels_as_dict().items()}
    return values[0], labels


def _image(path: Path):
    content = read_bytes(path)
    with one_sentence(path, "the GIFTI file"):
        _Guard(path).look_through(content)
        import nibabel

        return nibabel.GiftiImage.from_bytes(content)


@dataclass
class _Guard:
    path: Path

    def look_through(self, content: bytes) -> None:
        """Raises FileError or expat's own error at the first thing that must not reach the reader."""
        self._array: dict[str, str] = {}
        self._text: list[str] | None = None
        parser = expat.ParserCreate()
        parser.buffer_text = True
        parser.SetParamEntityParsing(expat.XML_PARAM_ENTITY_PARSING_NEVER)
        parser.EntityDeclHandler = self._entity
        parser.StartElementHandler = self._start
        parser.EndElementHandler = self._end
        parser.CharacterDataHandler = self._characters
        parser.Parse(content, True)

    def _refuse(self, rule: str) -> None:
        raise FileError(f"{self.path}: {rule}.")

    def _entity(self, *_: object) -> None:
        self._refuse("a GIFTI file must not define entities of its own, but this one does")

    def _start(self, name: str, attributes: dict[str, str]) -> None:
        if name == "DataArray":
            self._array = attributes
            self._check_sizes()
        self._text = [] if name == "Data" and self._array.get("Encoding") == "GZipBase64Binary" else None

    def _check_sizes(self) -> None:
        encoding, kind = self._array.get("Encoding", ""), self._array.get("DataType", "")
        if encoding not in _ENCODINGS:
            self._refuse(f"an array's Encoding must be one of {', '.join(_ENCODINGS)}, not {encoding[:40]!r}")
        if kind not in _ITEM_BYTES:
            self._refuse(f"an array's DataType must be one of {', '.join(_ITEM_BYTES)}, not {kind[:40]!r}")
        if self._array.get("ExternalFileName"):
            self._refuse("an array must not refer to another file, but one does")
        try:
            sizes = [int(self._array[f"Dim{i}"]) for i in range(int(self._array["Dimensionality"]))]
        except (KeyError, ValueError):
            self._refuse("an array must state its dimensions as whole numbers")
        if not 1 <= len(sizes) <= 6 or min(sizes) < 0 or math.prod(sizes) > MOST_VALUES:
            self._refuse(f"an array must hold at most {MOST_VALUES:,} values, but one is said to be {sizes[:6]}")
        self._bytes = math.prod(sizes) * _ITEM_BYTES[kind]

    def _characters(self, text: str) -> None:
        if self._text is not None:
            self._text.append(text)

    def _end(self, name: str) -> None:
        if name != "Data" or self._text is None:
            return
        unpacked = zlib.decompressobj().decompress(base64.b64decode("".join(self._text)), self._bytes + 1)
        self._text = None
        if len(unpacked) != self._bytes:
            self._refuse(f"a packed array must unpack to the {self._bytes} bytes its dimensions say, but it does not")
