"""magnetometers.tsv: places and axes of the magnetometers and gradiometers of one layout, in a table of our own.

The BIDS standard has none; this one keeps its manner: true tabs, n/a where something is missing, a JSON sidecar that
defines every column.
"""

from __future__ import annotations

import json

import numpy as np

from layout.brief.objects import Brief
from layout.outputs.bids.channels import channel_names, housed_of
from layout.outputs.bids.electrodes import MISSING
from layout.outputs.columns import FRAME
from layout.outputs.plain import fixed, for_json, one_line
from layout.outputs.result import DesignResult, RankedLayout, SensorRow
from layout.units import FT, MM

MAGNETOMETERS_TSV = "magnetometers.tsv"
MAGNETOMETERS_JSON = "magnetometers.json"

COLUMNS = {
    "name": ("Name of the channel, as in the channels table of the data set beside", ""),
    "number": ("Placing number of the sensor, as on the pictures; rows of one number are channels of one sensor", ""),
    "kind": ("Name of the sensor's kind in the brief's stock, see SensorKinds", ""),
    "site": ("Name of the sensor's site", ""),
    "x": (f"Sensitive centre; {FRAME}", "mm"),
    "y": ("As x, towards the front", "mm"),
    "z": ("As x, upwards", "mm"),
    "axis": ("Axis option of the sensor by name; several names: channels in that order", ""),
    "axis_x": ("Unit sensitive axis of the channel, same frame", ""),
    "axis_y": ("As axis_x, towards the front", ""),
    "axis_z": ("As axis_x, upwards", ""),
    "scalp_x": ("The sensor's place on the scalp, same frame", "mm"),
    "scalp_y": ("As scalp_x, towards the front", "mm"),
    "scalp_z": ("As scalp_x, upwards", "mm"),
    "normal_x": ("Unit outward normal of the scalp at that place, same frame", ""),
    "normal_y": ("As normal_x, towards the front", ""),
    "normal_z": ("As normal_x, upwards", ""),
    "centre_gap": ("Straight distance from the place on the scalp to the sensitive centre", "mm"),
    "housing_gap": (
        "What of centre_gap is not inside the housing: gap between the place on the scalp and the housing's face, from "
        "hair, the scalp's curvature under the face, or a slot that reaches no farther",
        "mm",
    ),
}


def magnetometers_tsv(result: DesignResult, layout: RankedLayout) -> str:
    """One row a channel, in placing order; lengths [mm]."""
    lines = ["\t".join(COLUMNS)]
    for row in housed_of(layout):
        common = _common(row, result.brief)
        for name, axis in zip(channel_names(row), row.axes, strict=True):
            cells = {"name": name, **common, **_triple("axis_", axis, 6)}
            lines.append("\t".join(cells[column] or MISSING for column in COLUMNS))
    return "\n".join(lines) + "\n"


def _common(row: SensorRow, brief: Brief) -> dict[str, str]:
    gap = float(np.linalg.norm(row.position - row.scalp_position))
    return {
        "number": str(row.number),
        "kind": one_line(row.kind),
        "site": one_line(row.site),
        **_triple("", row.position / MM, 2),
        "axis": one_line(row.axis_name),
        **_triple("scalp_", row.scalp_position / MM, 2),
        **_triple("normal_", row.normal, 6),
        "centre_gap": fixed(gap / MM, 2, MISSING),
        "housing_gap": fixed((gap - brief.stock[row.kind_number].standoff) / MM, 2, MISSING),
    }


def _triple(prefix: str, values: np.ndarray, digits: int) -> dict[str, str]:
    return {prefix + name: fixed(float(value), digits, MISSING) for name, value in zip("xyz", values, strict=True)}


def magnetometers_json(result: DesignResult, layout: RankedLayout) -> str:
    """The table's sidecar: what it is, every column, and the kinds of sensors in it."""
    used = {row.kind_number for row in housed_of(layout)}
    kinds = {
        one_line(entry.name): {
            "Type": entry.kind,
            "NoiseDensity_fT_per_rtHz": entry.noise_density / FT,
            "Housing_mm": [edge / MM for edge in entry.housing],
            "FaceToCentre_mm": entry.standoff / MM,
        }
        for index, entry in enumerate(result.brief.stock)
        if index in used
    }
    content = {
        "Description": "Planned places and axes of magnetometers and gradiometers; nothing was measured. A table of "
        "this project's own: the BIDS standard has none for them.",
        **{
            name: {"Description": text} | ({"Units": units} if units else {}) for name, (text, units) in COLUMNS.items()
        },
        "SensorKinds": kinds,
    }
    return json.dumps(for_json(content), indent=2, ensure_ascii=False) + "\n"
