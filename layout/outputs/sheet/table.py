"""sheet.csv: the numbers of the placement sheet for machines, one row per sensor in the order of placing."""

from __future__ import annotations

from layout.outputs.curve_tables import csv_text
from layout.outputs.plain import fixed, one_line
from layout.outputs.sheet.distances import MARKS, NEIGHBOURS, Fix
from layout.outputs.sheet.rows import Step
from layout.outputs.sheet.words import ROOM_PERCENT, room_at
from layout.units import DEGREE, MM, PERCENT

_NEIGHBOURS = {}
for _place in range(1, NEIGHBOURS + 1):
    _NEIGHBOURS[f"neighbour_{_place}"] = (
        f"Number of the sensor that is nearest along the scalp (place {_place}); empty where there are fewer others",
        "",
    )
    _NEIGHBOURS[f"neighbour_{_place}_mm"] = ("Shortest way along the scalp to it", "mm")

SHEET = {
    "step": ("Order of placing on the placement sheet, from 1; not the number of the sensor", ""),
    "number": ("Number of the sensor, as in sensors.csv and on the pictures", ""),
    "site": ("Name of the site", ""),
    "kind": ("Name of the sensor's kind in the brief's stock", ""),
    "role": ("reference or ground; empty for all others", ""),
    "nearest_standard_position": ("Standard 10-5 position nearest to the place on the scalp", ""),
    "offset_along_scalp_mm": ("Shortest way along the scalp from that position", "mm"),
    "offset_words": ("The same in parts along the scalp, seen by the wearer; empty where there is none", ""),
    "nearest_10_10_position": ("Standard 10-10 position nearest along the scalp", ""),
    "offset_10_10_along_scalp_mm": ("Shortest way along the scalp from that position", "mm"),
    "offset_10_10_words": ("As offset_words, from that position", ""),
    "sagittal_percent": ("As sagittal_fraction of sensors.csv", "percent"),
    "sagittal_mm": ("The same on this head, from the nasion along the midline", "mm"),
    "coronal_percent": ("As coronal_fraction of sensors.csv", "percent"),
    "coronal_mm": ("The same on this head, from the left preauricular point along the arc over the midline", "mm"),
    "coronal_whole_mm": ("All of that arc, from one preauricular point to the other", "mm"),
    "tape_1": ("Landmark of the first tape: one of " + ", ".join(MARKS) + " (ear: preauricular point)", ""),
    "tape_1_mm": ("Shortest way along the scalp from it", "mm"),
    "tape_2": ("Landmark of the second tape: of all pairs the two fix the sensor best", ""),
    "tape_2_mm": ("Shortest way along the scalp from it", "mm"),
    "tapes_cross_degrees": ("Angle between the two ways at the sensor, about", "degrees"),
    "check": ("Landmark of the check after placing; empty where no tape can reach from another", ""),
    "check_mm": ("Shortest way along the scalp from it", "mm"),
    **_NEIGHBOURS,
    "room_slide_mm": (
        "How far off the sensor may be along the scalp, in the worst direction, before the value is worse by "
        f"{ROOM_PERCENT} of itself; > and the most tried where it does not; empty where that was not computed",
        "mm",
    ),
    "room_tilt_deg": ("As room_slide_mm: tilted where it meets the scalp; empty for electrodes", "degrees"),
    "room_lift_mm": ("As room_slide_mm: off the scalp; empty for electrodes", "mm"),
    "axes_words": ("How the sensitive axes stand, parted by semicolons; empty for electrodes", ""),
    "lift_mm": ("From the scalp to the middle of the housing's face; empty for electrodes", "mm"),
    "hair_mm": ("The part of it that hair takes", "mm"),
    "slot_gap_mm": ("The part of it that a helmet's slot leaves", "mm"),
}


def sheet_csv(steps: tuple[Step, ...]) -> str:
    """One row per step of the sheet. columns.json defines the columns."""
    return csv_text(list(SHEET), [_row(step) for step in steps])


def _row(step: Step) -> list[str]:
    row, arcs, fix, housing = step.sensor, step.arcs, step.fix, step.housing
    offsets = [cell for one in (step.offsets[0], step.offsets[-1]) for cell in (one.name, _mm(one.length), one.words)]
    near = [cell for number, length, _ in step.neighbours for cell in (str(number), _mm(length))]
    sits = ["", "", "", ""]
    if housing is not None:
        sits = [
            "; ".join(housing.axes),
            *(fixed(value / MM, 1) for value in (housing.lift, housing.hair, housing.slot)),
        ]
    tapes = [cell for mark in (*fix.pair, fix.check) for cell in _tape(fix, mark)]
    return [
        str(step.step),
        str(row.number),
        one_line(row.site),
        one_line(row.kind),
        row.role,
        *offsets,
        fixed(arcs.along / PERCENT, 2),
        _mm(arcs.along_length),
        fixed(arcs.across / PERCENT, 2),
        _mm(arcs.across_length),
        _mm(arcs.across_whole),
        *tapes[:4],
        fixed(fix.crossing / DEGREE, 0),
        *tapes[4:],
        *near,
        *([""] * (2 * NEIGHBOURS - len(near))),
        *(room_at(room, unit) for room, unit in zip(*step.rooms, strict=True)),
        *sits,
    ]


def _tape(fix: Fix, mark: int | None) -> tuple[str, str]:
    return ("", "") if mark is None else (MARKS[mark], _mm(fix.lengths[mark]))


def _mm(length: float) -> str:
    return fixed(length / MM, 1)
