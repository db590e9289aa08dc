"""The 10-20, 10-10 and 10-5 positions on any scalp, from four landmarks.

Sources: Klem, Lüders, Jasper, Elger 1999, EEG clin Neurophysiol Suppl 52:3 (10-20); Acharya et al. 2016, J
Clin Neurophysiol 33:308 (10-10 names); Oostenveld & Praamstra 2001, Clin Neurophysiol 112:713 (10-5).

Rules, in the order in which they are used:

1. Cz lies midway on the sagittal contour nasion-Cz-inion and midway on the coronal contour LPA-Cz-RPA
   (iterated).
2. The midline row letters follow at 5 % steps of the sagittal contour, T9 to T10 at 5 % steps of the coronal
   one (T7 at 10 %, C3 at 30 %).
3. Three rings, each half the contour through a front midline point, a left (right) point of the coronal
   contour, and a back midline point: the "7" ring Fpz-T7-Oz, the "9h" ring NFpz-T9h-OIz, the "9" ring
   Nz-LPA-Iz. The front and the back quarter of each half are divided evenly: ten steps a quarter, each 5 %
   of the half ring when the quarters are equal.
4. Every other row is the contour in the plane of its left ring point, its midline point and its right ring
   point, each half divided evenly into eight steps (7, 7h, 5, 5h, 3, 3h, 1, 1h, z). So F3 is halfway along
   the plane contour from F7 to Fz, not the midpoint of the shortest path; on a 90 mm sphere the two differ
   by 7.5 mm.
"""

from __future__ import annotations

import numpy as np

from layout.anatomy.contours import three_point_contour
from layout.anatomy.head import Landmarks, Surface
from layout.anatomy.scalp_points import project
from layout.errors import LayoutError

F3_CONVENTION = (
    "F3, P3 and all positions between midline and ring lie on the contour in the plane of left ring point, "
    "midline point and right ring point, each half divided evenly (plane-arc convention; up to 7.5 mm from "
    "the shortest-path midpoint)"
)
EARLOBE_NOTE = "A1 and A2 are approximate: scalp points 10 mm below and 12 mm behind the preauricular points"
FAMILIES = ("10-20", "10-10", "10-5")
OLD_NAMES = {"T3": "T7", "T4": "T8", "T5": "P7", "T6": "P8"}

# Row name near the midline and row name from the "7h" column outwards, front to back, Fp and O rows excepted.
_ROWS = (
    ("AFp", "AFp"),
    ("AF", "AF"),
    ("AFF", "AFF"),
    ("F", "F"),
    ("FFC", "FFT"),
    ("FC", "FT"),
    ("FCC", "FTT"),
    ("C", "T"),
    ("CCP", "TTP"),
    ("CP", "TP"),
    ("CPP", "TPP"),
    ("P", "P"),
    ("PPO", "PPO"),
    ("PO", "PO"),
    ("POO", "POO"),
)
_TEN_TEN_ROWS = ("AF", "F", "FC", "C", "CP", "P", "PO")
_END_ROWS = ("N", "NFp", "Fp", "O", "OI", "I")
_COLUMNS = ("7", "7h", "5", "5h", "3", "3h", "1", "1h")  # ring towards midline
_OUTER = ("7", "7h", "9h", "9")
_RIGHT = {"1": "2", "3": "4", "5": "6", "7": "8", "9": "10"}
_EARLOBE_BELOW, _EARLOBE_BEHIND = 10e-3, 12e-3  # [m]


def canonical_name(name: str) -> str:
    """The present name of a position: T3, T4, T5, T6 become T7, T8, P7, P8."""
    return OLD_NAMES.get(name, name)


def family_names(family: str) -> tuple[str, ...]:
    """Names of a family, front to back and left to right.

    10-20: 21 names including A1 and A2. 10-10: 74; the guideline counts them without our having its list, so
    this is our reading: rows Fp 3, AF 5 (7, 3, z, 4, 8), F FC C CP P 11 each, PO 5, O 3, and Iz, A1, A2.
    10-5: 345. Raises LayoutError for another family.
    """
    if family == "10-20":
        names = "Fp1 Fp2 F7 F3 Fz F4 F8 T7 C3 Cz C4 T8 P7 P3 Pz P4 P8 O1 O2 A1 A2"
        return tuple(names.split())
    if family == "10-10":
        full = ("9", "7", "5", "3", "1", "z", "2", "4", "6", "8", "10")
        short = ("7", "3", "z", "4", "8")
        names = ["Fp1", "Fpz", "Fp2"]
        for row, outer in _ROWS:
            if row not in _TEN_TEN_ROWS:
                continue
            for column in short if row in ("AF", "PO") else full:
                names.append((outer if column in ("7", "8", "9", "10") else row) + column)
        return (*names, "O1", "Oz", "O2", "Iz", "A1", "A2")
    if family == "10-5":
        names = []
        left = ("9", "9h", *_COLUMNS)
        for row in _END_ROWS[:3]:
            names += [row + column for column in ("1", "1h", "z", "2h", "2")]
        for row, outer in _ROWS:
            here = [(outer if column in _OUTER else row) + column for column in left]
            names += [*here, row + "z", *[mirrored_name(name) for name in here[::-1]]]
        for row in _END_ROWS[3:]:
            names += [row + column for column in ("1", "1h", "z", "2h", "2")]
        return tuple(names)
    raise LayoutError(f"family: must be one of {', '.join(FAMILIES)}, got {family!r}")


def mirrored_name(name: str) -> str:
    """The name of the position on the other side: F3 <-> F4, FFT9h <-> FFT10h; midline names stay."""
    stem = name[:-1] if name.endswith("h") else name
    half = name[len(stem) :]
    row = stem.rstrip("0123456789")
    digits = stem[len(row) :]
    if not digits:
        return name
    number = int(digits)
    return f"{row}{number + 1 if number % 2 else number - 1}{half}"


def find_cz(scalp: Surface, landmarks: Landmarks) -> np.ndarray:
    """Cz (3,) [m]: midway on the sagittal and on the coronal contour through it, to 0.1 µm.

    Raises LayoutError where the alternation does not settle within 0.1 mm (landmarks far from a head's).
    """
    points = project(scalp, np.stack([landmarks.nas, landmarks.lpa, landmarks.rpa, landmarks.inion])).positions
    nas, lpa, rpa, inion = points
    middle = (lpa + rpa) / 2
    up = np.cross(rpa - lpa, nas - middle)
    cz = project(scalp, middle + 0.5 * up / np.linalg.norm(up)).positions[0]
    for _ in range(60):
        sagittal = three_point_contour(scalp, nas, cz, inion).at(0.5)
        cz = three_point_contour(scalp, lpa, sagittal, rpa).at(0.5)
        miss = np.linalg.norm(cz - sagittal)
        if miss < 1e-7:
            return cz
    if miss > 1e-4:
        raise LayoutError(
            f"landmarks: Cz must be midway of nasion-inion and LPA-RPA at once, but the two midpoints stay "
            f"{miss * 1e3:.1f} mm apart"
        )
    return cz


def earlobes(scalp: Surface, landmarks: Landmarks) -> dict[str, np.ndarray]:
    """A1 and A2 (3,) [m] on a scalp that has no ears; see EARLOBE_NOTE."""
    shift = np.array([0.0, -_EARLOBE_BEHIND, -_EARLOBE_BELOW])
    left, right = project(scalp, np.stack([landmarks.lpa + shift, landmarks.rpa + shift])).positions
    return {"A1": left, "A2": right}


def standard_positions(scalp: Surface, landmarks: Landmarks, family: str = "10-5") -> dict[str, np.ndarray]:
    """Positions (3,) [m] of a family on a scalp, by name, in the order of `family_names`.

    Raises LayoutError for an unknown family or landmarks from which no Cz can be found.
    """
    names = family_names(family)
    found = _all_positions(scalp, landmarks)
    if family != "10-5":
        found |= earlobes(scalp, landmarks)
    return {name: found[name] for name in names}


def _all_positions(scalp: Surface, landmarks: Landmarks) -> dict[str, np.ndarray]:
    """The 345 positions of the 10-5 family."""
    cz = find_cz(scalp, landmarks)
    points = project(scalp, np.stack([landmarks.nas, landmarks.lpa, landmarks.rpa, landmarks.inion])).positions
    nas, lpa, rpa, inion = points
    found: dict[str, np.ndarray] = {}

    midline_rows = (*_END_ROWS[:3], *[row for row, _ in _ROWS], *_END_ROWS[3:])
    midline = three_point_contour(scalp, nas, cz, inion).at(np.linspace(0, 1, len(midline_rows)))
    found |= {f"{row}z": point for row, point in zip(midline_rows, midline, strict=True)}

    coronal = three_point_contour(scalp, lpa, cz, rpa)
    rings = (("9", "N", "I", 0.0), ("9h", "NFp", "OI", 0.05), ("7", "Fp", "O", 0.1))
    for column, front, back, fraction in rings:
        for side_column, side_fraction, one in ((column, fraction, "1"), (_right(column), 1 - fraction, "2")):
            names = [f"{front}{one}h", f"{front}{one}"]
            names += [outer + side_column for _, outer in _ROWS]
            names += [f"{back}{one}", f"{back}{one}h"]
            half = three_point_contour(scalp, found[f"{front}z"], coronal.at(side_fraction), found[f"{back}z"])
            steps = _even_halves(half.via_fraction, 10)[1:-1]
            found |= dict(zip(names, half.at(steps), strict=True))

    for row, outer in _ROWS:
        across = three_point_contour(scalp, found[f"{outer}7"], found[f"{row}z"], found[f"{outer}8"])
        row_points = across.at(_even_halves(across.via_fraction, len(_COLUMNS)))
        for step, column in enumerate(_COLUMNS[1:], start=1):
            name = (outer if column in _OUTER else row) + column
            found[name] = row_points[step]
            found[mirrored_name(name)] = row_points[-1 - step]
    return found


def _right(column: str) -> str:
    return _RIGHT[column.rstrip("h")] + ("h" if column.endswith("h") else "")


def _even_halves(middle: float, steps: int) -> np.ndarray:
    """Fractions (2 steps + 1,) that divide [0, middle] and [middle, 1] evenly."""
    return np.concatenate([np.linspace(0, middle, steps + 1), np.linspace(middle, 1, steps + 1)[1:]])
