"""Whether the header of an EDF or BDF file can be believed, before a library reads by it.

Layout of the header: Kemp, Värri, Rosa, Nielsen, Gade 1992, EEG clin Neurophysiol 82:391 (from memory); BDF is the same
with samples of three bytes.
"""

from __future__ import annotations

from pathlib import Path

from layout.anatomy.untrusted import one_sentence
from layout.errors import FileError

LARGEST_FILE = 500_000_000  # bytes
MOST_SIGNALS = 2048
FASTEST = 100_000.0  # [Hz]
_FIXED, _PER_SIGNAL = 256, 256
_SAMPLES_AT = 216  # bytes of a signal's header before its samples per record


def check_edf_header(path: Path) -> bool:
    """Whether it is a BDF file, and not EDF. Raises FileError where it is neither, too large, cut off, or where its
    header does not agree with its size.
    """
    with one_sentence(path, "the recording"), path.open("rb") as file:
        size = path.stat().st_size
        if size > LARGEST_FILE:
            raise FileError(f"{path}: must be at most {LARGEST_FILE / 1e6:g} MB, but it has {size / 1e6:.0f} MB.")
        fixed = file.read(_FIXED)
        is_bdf = fixed[:8] == b"\xffBIOSEMI"
        if len(fixed) < _FIXED or not (is_bdf or fixed[:8].strip() == b"0"):
            raise FileError(f"{path}: must be an EDF or BDF file, but it does not begin like one.")
        if fixed[192:197] in (b"EDF+D", b"BDF+D"):
            raise FileError(
                f"{path}: must be continuous, but its header says that it has gaps ({fixed[192:197].decode()})."
            )
        signals = _number(path, fixed[252:256], "number of signals", 1, MOST_SIGNALS, whole=True)
        _number(path, fixed[184:192], "header size", 256 * (signals + 1), 256 * (signals + 1), whole=True)
        records = _number(path, fixed[236:244], "number of records", 1, 1e8, whole=True)
        seconds = _number(path, fixed[244:252], "record duration", 0, 1e6)
        heads = file.read(signals * _PER_SIGNAL)
        if len(heads) < signals * _PER_SIGNAL:
            raise FileError(f"{path}: must be a whole file, but it ends within its header.")
        start = signals * _SAMPLES_AT
        per_record = [
            _number(path, heads[start + 8 * i : start + 8 * i + 8], "samples per record", 1, 1e8, whole=True)
            for i in range(signals)
        ]
        if max(per_record) > FASTEST * seconds:
            raise FileError(
                f"{path}: must be sampled at most {FASTEST:g} times a second, but its header says {max(per_record)} "
                f"samples in {seconds:g} s."
            )
        needed = _FIXED + len(heads) + records * sum(per_record) * (3 if is_bdf else 2)
        if size < needed:
            raise FileError(
                f"{path}: must be a whole file, but its header promises {needed} bytes and there are {size}."
            )
    return is_bdf


def _number(path: Path, field: bytes, what: str, low: float, high: float, whole: bool = False) -> float:
    text = field.decode("ascii", errors="replace").strip("\0 ")
    try:
        value = int(text) if whole else float(text)
    except ValueError:
        value = None
    if value is None or not low <= value <= high:
        shown = "".join(c if c.isprintable() else " " for c in text)
        raise FileError(f"{path}: its header must give a {what} of {low:g} to {high:g}, but it says {shown!r}.")
    return value
