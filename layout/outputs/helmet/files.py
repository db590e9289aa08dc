"""The files for whoever builds the helmet of a layout: poses, pictures in three dimensions, a shell to print."""

from __future__ import annotations

from collections.abc import Iterator

from layout.outputs.bids.channels import housed_of
from layout.outputs.helmet.clash import clashes_csv, room_of
from layout.outputs.helmet.glb import helmet_glb
from layout.outputs.helmet.poses import helmet_poses_csv, helmet_poses_json
from layout.outputs.helmet.sensors import housed_sensors
from layout.outputs.helmet.shell import helmet_shell, helmet_shell_stl, mould
from layout.outputs.helmet.stl import sensors_stl
from layout.outputs.result import DesignResult

CLASHES = "clashes.csv"
HELMET_FILES = (
    "helmet-poses.csv",
    "helmet-poses.json",
    "helmet.glb",
    "scalp-and-sensors.stl",
    "helmet-shell.stl",
    CLASHES,
)


def helmet_files(result: DesignResult) -> Iterator[tuple[int, dict[str, str | bytes]]]:
    """Rank and files by name of every layout with sensors in housings; clashes.csv only where something clashes."""
    moulded = None
    for layout in result.layouts:
        if not housed_of(layout):
            continue
        moulded = moulded or mould(result.head)
        sensors = housed_sensors(result, layout)
        room, shell = room_of(result, layout, sensors), helmet_shell(moulded, sensors)
        files = {
            "helmet-poses.csv": helmet_poses_csv(result, layout, sensors, room, shell),
            "helmet-poses.json": helmet_poses_json(result, layout, sensors, room, shell),
            "helmet.glb": helmet_glb(result, layout),
            "scalp-and-sensors.stl": sensors_stl(result, layout),
            "helmet-shell.stl": helmet_shell_stl(result, layout, shell),
        }
        if room.clashes:
            files[CLASHES] = clashes_csv(layout, room)
        yield layout.rank, files
