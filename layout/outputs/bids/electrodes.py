"""The electrodes of one layout as BIDS files (Brain Imaging Data Structure 1.11, EEG)."""

from __future__ import annotations

import json

from layout.outputs.plain import fixed, for_json, one_line
from layout.outputs.result import DesignResult, RankedLayout, SensorRow
from layout.units import MM

MISSING = "n/a"
FRAME = (
    "RAS orientation: origin halfway between LPA and RPA, +x towards RPA, +z upward along the normal of the "
    "plane of LPA, RPA and NAS, +y = z × x, towards the front. Planned positions on the scalp, not measured."
)


def electrodes_of(layout: RankedLayout) -> tuple[SensorRow, ...]:
    """The electrodes of the layout, the reference contact and the ground among them, in placing order."""
    return tuple(row for row in layout.sensors if row.kind_type == "electrode")


def electrode_names(layout: RankedLayout) -> list[str]:
    """The electrodes' unique names: the sites', or the candidates' where two electrodes share a site's name."""
    rows = electrodes_of(layout)
    names = [one_line(row.site) for row in rows]
    if len(set(names)) < len(names):
        names = [one_line(row.name) for row in rows]
    return [name or MISSING for name in names]


def electrodes_tsv(layout: RankedLayout) -> str:
    """Columns name, x, y, z [mm], the three recommended ones, which a plan cannot know (n/a), and the role."""
    lines = ["name\tx\ty\tz\ttype\tmaterial\timpedance\trole"]
    for name, row in zip(electrode_names(layout), electrodes_of(layout), strict=True):
        place = [fixed(value / MM, 2, missing=MISSING) for value in row.position]
        lines.append("\t".join([name, *place, MISSING, MISSING, MISSING, row.role or MISSING]))
    return "\n".join(lines) + "\n"


def electrodes_json() -> str:
    """Defines the column of `electrodes_tsv` that the specification does not."""
    content = {
        "Description": "Planned places of the electrodes on the scalp; nothing was measured.",
        "role": {
            "Description": "What the plan uses this electrode for beyond recording.",
            "Levels": {
                "reference": "the electrode to connect as reference; any other would give the same information",
                "ground": "the electrode to connect as ground; it is not recorded",
            },
        },
    }
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def coordsystem_json(result: DesignResult) -> str:
    """The frame, unit and landmarks that belong to `electrodes_tsv`."""
    marks = result.head.landmarks
    landmarks = {"NAS": marks.nas, "LPA": marks.lpa, "RPA": marks.rpa}
    content = {
        "EEGCoordinateSystem": "Other",
        "EEGCoordinateUnits": "mm",
        "EEGCoordinateSystemDescription": FRAME,
        "AnatomicalLandmarkCoordinates": {
            name: [round(float(value) / MM, 2) + 0.0 for value in point] for name, point in landmarks.items()
        },
        "AnatomicalLandmarkCoordinateSystem": "Other",
        "AnatomicalLandmarkCoordinateUnits": "mm",
        "AnatomicalLandmarkCoordinateSystemDescription": FRAME,
    }
    return json.dumps(for_json(content), indent=2, ensure_ascii=False) + "\n"
