"""columns.json: what the columns of the comma-separated tables mean, in the manner of BIDS sidecar files."""

from __future__ import annotations

import json

from layout.outputs.helmet.columns import CLASHES, POSES
from layout.outputs.placement_tables import LOSSES, PLACEMENT, SUBSTITUTES
from layout.outputs.sheet.table import SHEET

FRAME = "head frame: origin halfway between LPA and RPA, x towards RPA, y to the front, z up"

SENSORS = {
    "number": ("Placing number, as on the pictures; rows of one number are channels of one sensor", ""),
    "channel": ("Channel of the sensor from 1: a magnetometer has one per sensitive axis, an electrode one", ""),
    "name": ("The choice by name: site and, for magnetometers, axis option", ""),
    "kind": ("Name of the sensor's kind in the brief's stock", ""),
    "site": ("Name of the site", ""),
    "x_mm": (f"Sensitive centre, for electrodes the scalp point; {FRAME}", "mm"),
    "y_mm": ("As x_mm, towards the front", "mm"),
    "z_mm": ("As x_mm, upwards", "mm"),
    "scalp_x_mm": ("Place on the scalp, same frame", "mm"),
    "scalp_y_mm": ("As scalp_x_mm, towards the front", "mm"),
    "scalp_z_mm": ("As scalp_x_mm, upwards", "mm"),
    "axis": (
        "Axis option of the magnetometer, empty for electrodes. normal: out of the head along the housing; tangent1: "
        "towards the front as nearly as the scalp allows; tangent2: normal x tangent1, to the left on top of the head, "
        "down on its left side, up on its right side; several names: channels in that order",
        "",
    ),
    "axis_x": ("Unit sensitive axis of this channel, same frame; empty for electrodes", ""),
    "axis_y": ("As axis_x, towards the front", ""),
    "axis_z": ("As axis_x, upwards", ""),
    "nearest_standard_position": ("Standard 10-5 position nearest to the place on the scalp", ""),
    "offset_mm": ("Straight distance from the place on the scalp to that position", "mm"),
    "from_nasion_mm": ("Shortest way along the scalp from the nasion", "mm"),
    "from_lpa_mm": ("Shortest way along the scalp from the left preauricular point", "mm"),
    "from_rpa_mm": ("Shortest way along the scalp from the right preauricular point", "mm"),
    "from_inion_mm": ("Shortest way along the scalp from the inion", "mm"),
    "sagittal_fraction": (
        "Where the plane through both preauricular points and the site crosses the midline: 0 at the nasion, 1 at the "
        "inion, along the midline over the top; below 0 or above 1 past them",
        "",
    ),
    "coronal_fraction": (
        "Where the site lies on the arc in which that plane cuts the scalp: 0 at the left preauricular point, 1 at the "
        "right",
        "",
    ),
    "lost_without_{unit}": ("What the layout loses without this sensor, all its channels together", "{unit}"),
    "role": ("reference: the electrode to connect as reference; empty for all others", ""),
}

RANKING = {
    "row": ("layout: a ranked layout; baseline: a choice without a search, of as many sensors", ""),
    "rank": ("Rank of the layout from 1, empty for baselines", ""),
    "name": ("Name of the layout or baseline", ""),
    "value_{unit}": ("{goal} under the brief's model of head and noise", "{unit}"),
    "bound_{unit}": (
        "What no allowed layout can pass that differs enough from all earlier ranks; empty for baselines",
        "{unit}",
    ),
    "gap_percent": ("Distance of the value to the bound, as a share of {whole}", "percent"),
    "proven": ("yes: the gap is within the tolerance called proven; no: better layouts may exist inside the gap", ""),
    "percent_of_best": ("Value as a share of layout 1", "percent"),
    "cost": ("Sum of the prices of the sensors, in the brief's own unit", ""),
    "moved": ("Sensors by which the layout differs from the nearest earlier rank, empty for rank 1", ""),
    "housings_meet": (
        "Pairs of chosen magnetometers whose housings would share space, empty without magnetometers",
        "",
    ),
    "equals_even_spread_of": (
        "Sensors that an even spread needs to reach this value; empty where none reaches it or none was tried",
        "",
    ),
    "even_spread_limit": ("Sensors of the largest even spread tried, 0: none was tried", ""),
    "sensors": ("Chosen candidates by name, as in sensors.csv, parted by semicolons", ""),
    "note": ("What to know about a baseline", ""),
}


POLISHED = {
    "name": ("The choice of layout 1 that was slid, by name", ""),
    **{name: SENSORS[name] for name in ("channel", "x_mm", "y_mm", "z_mm", "scalp_x_mm", "scalp_y_mm", "scalp_z_mm")},
    **{name: SENSORS[name] for name in ("axis_x", "axis_y", "axis_z")},
    "slid_mm": ("Straight distance from the site on the grid to the place on the scalp", "mm"),
}

GOALS = {
    "bits": {"unit": "bits", "goal": "Information about the regions", "whole": "the bound"},
    "mm": {"unit": "mm", "goal": "Linearised localisation error, smaller is better,", "whole": "the value"},
}


def columns_json(unit: str) -> str:
    """File name -> column -> Description and, where it has one, Units, for a goal in bits or mm."""
    words = GOALS[unit]
    content = {
        "ranking.csv": RANKING,
        "layout-*/sensors.csv": SENSORS,
        "layout-*/placement.csv": PLACEMENT,
        "layout-*/substitutes.csv": SUBSTITUTES,
        "layout-*/expected_loss.csv": LOSSES,
        "layout-*/sheet.csv": SHEET,
        "layout-*/helmet-poses.csv": POSES,
        "layout-*/clashes.csv": CLASHES,
        "polished.csv": POLISHED,
    }
    defined = {
        file: {
            name.format(**words): {"Description": text.format(**words)}
            | ({"Units": units.format(**words)} if units else {})
            for name, (text, units) in columns.items()
        }
        for file, columns in content.items()
    }
    return json.dumps(defined, indent=2, ensure_ascii=False) + "\n"
