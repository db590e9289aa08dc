"""scalp-and-sensors.stl: the scalp with every housing at its true size and place, for CAD (mm, head frame)."""

from __future__ import annotations

from layout.outputs.helmet.meshes import binary_stl, box, joined
from layout.outputs.helmet.sensors import housed_sensors
from layout.outputs.result import DesignResult, RankedLayout
from layout.units import MM


def sensors_stl(result: DesignResult, layout: RankedLayout) -> bytes:
    """The scalp, then one box per housed sensor in placing order, as binary STL in mm."""
    boxes = [box(one.pose, one.size) for one in housed_sensors(result, layout)]
    scalp = (result.head.scalp.vertices, result.head.scalp.faces)
    vertices, faces = joined([scalp, *boxes])
    return binary_stl((vertices / MM, faces), f"scalp and sensors, layout {layout.rank}, mm, head frame")
