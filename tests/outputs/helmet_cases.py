"""Layouts of housed sensors as the pipeline lays and describes them, without a search."""

from __future__ import annotations

import dataclasses
import tempfile
from functools import cache
from pathlib import Path

import numpy as np
from made_result import make_result
from studies import BAND, SPHERE, region, study_of

from layout.design.describe import _sensor_row
from layout.outputs.helmet.clash import Room, room_of
from layout.outputs.helmet.sensors import HousedSensor, housed_sensors
from layout.outputs.helmet.shell import HelmetShell, helmet_shell, mould
from layout.outputs.result import DesignResult, RankedLayout

TARGET = region("left", (-45, 5, 50), "left")
THREE = """[[stock]]
kind = "magnetometer"
name = "cell"
count = 4
sites = { family = "10-20" }
noise_ft_per_rthz = 10
axes = "any_of_three"
hair_mm = 2
housing_mm = [12, 16, 24]
cell_mm = [3, 3, 3]
"""
PLANAR = """[[stock]]
kind = "gradiometer"
name = "pair of coils"
count = 2
sites = { family = "10-20" }
form = "planar"
gradients = "both_tangents"
baseline_mm = 5
noise_ft_per_rthz = 10
standoff_mm = 8
housing_mm = [14, 14, 30]
"""
SLOT_KIND = """[[stock]]
kind = "magnetometer"
name = "slotted"
count = 2
sites = {{ slots_csv = "{slots}" }}
noise_ft_per_rthz = 10
axes = "two_axis"
hair_mm = 1
housing_mm = [12, 16, 24]
"""
# Two slots of a helmet: one slides in until it touches, one ends some 6 mm above the sphere (radius 92 mm); both lean.
SLOTS = """name,x_mm,y_mm,z_mm,axis_x,axis_y,axis_z,travel_mm
touches,0,0,{top},0,0.0998334,0.9950042,60
stops,-{side},0,{side},-0.7071068,0.0707107,0.7035624,12
"""


def layout_of(study, chosen: list[int]) -> DesignResult:
    """A result whose one layout is these candidates, rows made as the pipeline makes them."""
    rows = tuple(_sensor_row(study, one, number, 0.1, False) for number, one in enumerate(chosen, 1))
    made = make_result("magnetometer")
    layout: RankedLayout = dataclasses.replace(made.layouts[0], sensors=rows, chosen=tuple(chosen))
    return dataclasses.replace(
        made, brief=study.brief, head=study.head, candidates=study.candidates.singles, layouts=(layout,)
    )


@cache
def helmet_case() -> DesignResult:
    """Magnetometers with each of three axes and planar gradiometers, on a sphere."""
    study = study_of(SPHERE, TARGET, THREE, PLANAR, BAND)
    names = ("C3 normal", "Pz tangent1", "F4 tangent2", "Fz gradients", "O2 gradients")
    return layout_of(study, [study.candidates.names.index(name) for name in names])


@cache
def slot_case() -> DesignResult:
    """Two-axis magnetometers in the two slots."""
    with tempfile.TemporaryDirectory() as folder:
        slots = Path(folder) / "slots.csv"
        slots.write_text(SLOTS.format(top=140, side=78))
        study = study_of(SPHERE, TARGET, SLOT_KIND.format(slots=slots), BAND)
    names = study.candidates.names
    return layout_of(study, [names.index("touches normal+tangent1"), names.index("stops normal+tangent2")])


@cache
def parts_of(case) -> tuple[tuple[HousedSensor, ...], Room, HelmetShell]:
    """Sensors, room and shell of a case's layout, made once for all tests."""
    result = case()
    sensors = housed_sensors(result, result.layouts[0])
    return sensors, room_of(result, result.layouts[0], sensors), helmet_shell(mould(result.head), sensors)


def angle_between(first: np.ndarray, second: np.ndarray) -> float:
    """The largest angle [degrees] between vectors (n, 3) and their partners."""
    cross = np.linalg.norm(np.cross(first, second), axis=-1)
    return float(np.degrees(np.arctan2(cross, np.sum(first * second, axis=-1))).max())
