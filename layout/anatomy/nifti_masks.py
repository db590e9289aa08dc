"""NIfTI masks and label volumes: the header is judged before a voxel is read."""

from __future__ import annotations

import io
import math
import zlib
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from layout.anatomy.untrusted import one_sentence
from layout.errors import FileError
from layout.units import MM

MOST_VOXELS = 300_000_000  # a head at half a millimetre
LARGEST_BYTES = 600_000_000  # of the voxels
_HEADER = 540
_MOST_BEFORE = 16_000_000  # bytes of header extensions
_UNITS = {0: MM, 1: 1.0, 2: MM, 3: 1e-6}  # code of the format -> m; a file that states none is in mm


@dataclass(frozen=True)
class Volume:
    """values (i, j, k); world_to_voxel (4, 4): metres in the file's space to voxel indices."""

    values: np.ndarray
    world_to_voxel: np.ndarray

    def inside(self, points: np.ndarray, label: float | None) -> np.ndarray:
        """How far points (n, 3) [m] are inside (n,), 0 to 1, linear between voxel centres.

        Inside are the voxels that equal `label`, or all that are not zero where label is None.
        """
        from scipy.ndimage import map_coordinates

        mask = self.values != 0 if label is None else self.values == label
        voxels = points @ self.world_to_voxel[:3, :3].T + self.world_to_voxel[:3, 3]
        return np.clip(map_coordinates(mask.astype(np.float32), voxels.T, order=1, cval=0.0), 0.0, 1.0)


def read_volume(path: Path) -> Volume:
    """A mask or label volume with its affine from a .nii or .nii.gz file.

    Raises FileError where it is missing, damaged, cut off, not three-dimensional, larger than MOST_VOXELS or
    LARGEST_BYTES, without an affine that can be inverted, or not of plain numbers. Never more bytes are unpacked than
    the header needs.
    """
    if not path.name.lower().endswith((".nii", ".nii.gz")):
        raise FileError(f"{path}: a mask must be a file ending in .nii or .nii.gz.")
    with one_sentence(path, "the NIfTI file"):
        if not path.is_file():
            raise FileError(f"{path}: must be a file that exists, and there is none of this name.")
        import nibabel

        with path.open("rb") as file:
            source = _Unpacker(file) if path.name.lower().endswith(".gz") else file
            start = source.read(_HEADER)
            kind = nibabel.Nifti2Image if start[:4] in (b"\x1c\x02\0\0", b"\0\0\x02\x1c") else nibabel.Nifti1Image
            size = 540 if kind is nibabel.Nifti2Image else 348
            if len(start) < size:
                raise FileError(f"{path}: must be a whole NIfTI file, but it ends inside its header.")
            header = kind.header_class(start[:size], check=True)
            wanted = _bytes_wanted(path, header)
            content = start + source.read(max(0, wanted - len(start)))
        if len(content) < wanted:
            raise FileError(f"{path}: must hold {wanted:,} bytes by its header, but it ends after {len(content):,}.")
        image = kind.from_stream(io.BytesIO(content[:wanted]))
        values = np.asanyarray(image.dataobj).reshape(header.get_data_shape()[:3])
        affine = image.affine.astype(float)
        unit = _UNITS[int(header["xyzt_units"]) & 7]
        affine[:3] *= unit
        if not np.isfinite(affine).all() or abs(np.linalg.det(affine[:3, :3])) < 1e-15:
            raise FileError(f"{path}: must have an affine that can be inverted, but it has none.")
    return Volume(values, np.linalg.inv(affine))


def _bytes_wanted(path: Path, header) -> int:
    shape = tuple(int(n) for n in header.get_data_shape())
    if len(shape) < 3 or min(shape) < 1 or math.prod(shape[3:]) != 1:
        raise FileError(f"{path}: a mask must be one volume of three dimensions, but its shape is {shape[:8]}.")
    kind = header.get_data_dtype()
    if kind.kind not in "iuf":
        raise FileError(f"{path}: voxels must be plain numbers, but they are of type {kind}.")
    n_bytes = math.prod(shape) * kind.itemsize
    if math.prod(shape) > MOST_VOXELS or n_bytes > LARGEST_BYTES:
        raise FileError(f"{path}: a mask must have at most {MOST_VOXELS:,} voxels, but its shape is {shape}.")
    before = float(header["vox_offset"])
    if not 0 <= before <= _MOST_BEFORE:
        raise FileError(f"{path}: its voxels must begin within {_MOST_BEFORE:,} bytes, but begin at {before:g}.")
    return int(before) + n_bytes


class _Unpacker:
    """Reads a gzip stream a stated number of bytes at a time."""

    def __init__(self, file: io.BufferedReader) -> None:
        self._file, self._member = file, zlib.decompressobj(wbits=31)

    def read(self, count: int) -> bytes:
        parts = []
        while count > 0 and not self._member.eof:
            packed = self._member.unconsumed_tail or self._file.read(1 << 20)
            if not packed:
                break
            part = self._member.decompress(packed, count)
            count -= len(part)
            parts.append(part)
        return b"".join(parts)
