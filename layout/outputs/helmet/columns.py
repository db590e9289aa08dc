"""What the columns of helmet-poses.csv and clashes.csv mean."""

from __future__ import annotations

HEAD_FRAME = "head frame: origin halfway between LPA and RPA, x towards RPA, y to the front, z up"
HOUSING_FRAME = (
    "housing frame: origin in the middle of the face that is turned to the scalp, z along the housing's length away "
    "from the head, x along the width of the face (towards the right of the head), y along its depth (towards the "
    "front); the box reaches from z = 0 to its length"
)
MOST_CHANNELS = 3

_XYZ = ("x", "y", "z")

POSES = {
    "number": ("Placing number, as in sensors.csv and on the pictures", ""),
    "name": ("The choice by name: site and axis option", ""),
    "kind": ("Name of the sensor's kind in the brief's stock", ""),
    "site": ("Name of the site", ""),
    **{
        f"m{row}{column}{'_mm' if column == 4 and row < 4 else ''}": (
            f"Row {row}, column {column} of the 4x4 matrix that takes points (mm, column vectors) from the housing "
            f"frame to the head frame; {HOUSING_FRAME}; {HEAD_FRAME}",
            "mm" if column == 4 and row < 4 else "",
        )
        for row in range(1, 5)
        for column in range(1, 5)
    },
    "width_mm": ("Extent of the housing along its x", "mm"),
    "depth_mm": ("Extent of the housing along its y", "mm"),
    "length_mm": ("Extent of the housing along its z", "mm"),
    **{f"centre_{axis}_mm": (f"Sensitive centre, {axis} in the head frame", "mm") for axis in _XYZ},
    **{f"centre_in_housing_{axis}_mm": (f"Sensitive centre, {axis} in the housing frame", "mm") for axis in _XYZ},
    **{
        f"axis{channel}_{axis}": (
            f"Unit sensitive axis of channel {channel}, {axis} in the head frame; empty where there is no such channel",
            "",
        )
        for channel in range(1, MOST_CHANNELS + 1)
        for axis in _XYZ
    },
    **{
        f"axis{channel}_in_housing_{axis}": (
            f"The same in the housing frame; sensors of one kind whose rows differ here need axes that can be selected "
            f"(channel {channel})",
            "",
        )
        for channel in range(1, MOST_CHANNELS + 1)
        for axis in _XYZ
    },
    **{
        f"baseline{channel}_in_housing_{axis}_mm": (
            f"Gradiometers: from the coil of channel {channel} that counts negative to the one that counts positive, "
            f"{axis} in the housing frame; empty for all others",
            "mm",
        )
        for channel in (1, 2)
        for axis in _XYZ
    },
    **{f"scalp_{axis}_mm": (f"Place on the scalp, {axis} in the head frame", "mm") for axis in _XYZ},
    "nearest_standard_position": ("Standard 10-5 position nearest to the place on the scalp", ""),
    "offset_mm": ("Straight distance from the place on the scalp to that position", "mm"),
    "lift_mm": ("From the place on the scalp to the face, along z: hair, slot gap, and what a flat face needs", "mm"),
    "hair_mm": ("The brief's hair allowance, a part of lift_mm", "mm"),
    "slot_gap_mm": ("Part of lift_mm that the helmet's slot leaves because its travel ends", "mm"),
    "scalp_gap_mm": (
        "Least gap along z between the face and the scalp below it; below 0 the scalp stands up into the housing",
        "mm",
    ),
    "nearest_housing": ("Number of the sensor with the nearest other housing; empty where there is none", ""),
    "housing_gap_mm": ("Distance to that housing; below 0 the two share room, by so much they must be parted", "mm"),
    "stands_out_mm": (
        "How far the outer end of the housing stands out of its collar in helmet-shell.stl when it is at this pose",
        "mm",
    ),
}

CLASHES = {
    "parts": ("two housings; housing and scalp; housing and electrode (its footprint lies under the face)", ""),
    "first_number": ("Placing number of the first sensor", ""),
    "first_name": ("Its name", ""),
    "second_number": ("Placing number of the second sensor; empty for the scalp", ""),
    "second_name": ("Its name", ""),
    "depth_mm": (
        "The shortest way that parts the two housings; how far the scalp stands up into the housing; empty for "
        "electrodes, whose height is not known",
        "mm",
    ),
}
