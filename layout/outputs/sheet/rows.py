"""The placement sheet of one layout as data: what the pages and the table print, in SI units."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Head
from layout.outputs.placement_tables import PlacedSensor, Room
from layout.outputs.result import DesignResult, RankedLayout, SensorRow
from layout.outputs.sheet.distances import Fix, HeadMeasures, Offset, OnArcs, Tape
from layout.outputs.sheet.order import placing_order
from layout.outputs.sheet.words import axis_words, direction_words
from layout.sensing.candidates import Candidates
from layout.units import DEGREE, MM

LEANS = 3 * DEGREE  # a housing that leans less than this is not worth a word


@dataclass(frozen=True)
class Housing:
    """How the housing of a sensor sits.

    lift [m]: from the scalp point to the middle of its face; hair [m] and slot [m]: the parts of it that hair takes and
    the helmet's slot leaves; axes: words for each channel's sensitive axis; lean [rad] of the housing from the scalp's
    normal, and the words for where to, "" where it hardly leans.
    """

    lift: float
    hair: float
    slot: float
    axes: tuple[str, ...]
    lean: float
    leans_to: str


@dataclass(frozen=True)
class Step:
    """One step of placing. neighbours: (number of the sensor, distance [m] along the scalp, placed before this step).

    room: how far it may be off, None where that was not computed.
    """

    step: int
    sensor: SensorRow
    offsets: tuple[Offset, ...]
    arcs: OnArcs
    fix: Fix
    neighbours: tuple[tuple[int, float, bool], ...]
    housing: Housing | None
    room: PlacedSensor | None

    @property
    def rooms(self) -> tuple[tuple[Room | None, ...], tuple[float, ...]]:
        """Room to slide, tilt and lift, and the units they are printed in; None where there is none or none known."""
        one = self.room
        return (None, None, None) if one is None else (one.slide, one.tilt, one.lift), (MM, DEGREE, MM)


@dataclass(frozen=True)
class Sheet:
    """Everything on the placement sheet of one layout.

    notes: sentences on what the head is. standard: the 10-5 positions (3,) [m] by name. in_slots: whether some of its
    sensors go into the slots of a helmet.
    """

    title: str
    rank: int
    head: Head
    measures: HeadMeasures
    notes: tuple[str, ...]
    steps: tuple[Step, ...]
    standard: dict[str, np.ndarray]
    in_slots: bool


def sheet_of(result: DesignResult, layout: RankedLayout) -> Sheet:
    """The sheet of one layout; its distances are measured here."""
    tape, sensors = Tape(result.head), layout.sensors
    order = placing_order(sensors, tape.vertex)
    step_of = {at: step for step, at in enumerate(order, 1)}
    rooms = _rooms(result, layout)
    fixes = tape.fixes(sensors)
    steps = []
    for step, at in enumerate(order, 1):
        row = sensors[at]
        near = tape.neighbours(sensors, at)
        steps.append(
            Step(
                step=step,
                sensor=row,
                offsets=tape.offsets(row),
                arcs=tape.arcs(row),
                fix=fixes[at],
                neighbours=tuple((sensors[i].number, length, step_of[i] < step) for i, length in near),
                housing=None if row.kind_type == "electrode" else _housing(result, row),
                room=rooms.get(row.number),
            )
        )
    return Sheet(
        title=result.brief.title,
        rank=layout.rank,
        head=result.head,
        measures=tape.measures(),
        notes=result.head.notes,
        steps=tuple(steps),
        standard=tape.standard,
        in_slots=any(result.brief.stock[kind].sites.slots_csv for kind in {row.kind_number for row in sensors} - {-1}),
    )


def _rooms(result: DesignResult, layout: RankedLayout) -> dict[int, PlacedSensor]:
    """Number of a sensor -> how far it may be off; empty where no evidence was asked for or could be had."""
    if result.evidence is None or not result.evidence.placements:
        return {}
    placement = result.evidence.placements[layout.rank - 1]
    return {one.number: one for one in placement.sensors}


def _housing(result: DesignResult, row: SensorRow) -> Housing:
    entry, candidates = result.brief.stock[row.kind_number], result.candidates
    pose = candidates.housing_pose[row.candidate]
    outward = pose[:3, 2]
    lean = float(np.arccos(np.clip(outward @ row.normal, -1.0, 1.0)))
    axes = [axis_words(row.normal, axis) for axis in row.axes]
    if entry.kind == "gradiometer":
        axes = [_gradient(row, baseline) for baseline in _baselines(candidates, row.candidate)]
    return Housing(
        lift=float((pose[:3, 3] - row.scalp_position) @ outward),
        hair=entry.hair,
        slot=float(candidates.sites.travel_gap[candidates.site[row.candidate]]),
        axes=tuple(axes),
        lean=lean,
        leans_to=direction_words(row.normal, outward) if lean >= LEANS else "",
    )


def _baselines(candidates: Candidates, candidate: int) -> np.ndarray:
    return candidates.baselines[candidates.candidate_of_channel == candidate]


def _gradient(row: SensorRow, baseline: np.ndarray) -> str:
    """A gradiometer's axis is straight out; what is to be set is along which line its coils lie."""
    return f"coils in line {axis_words(row.normal, baseline / np.linalg.norm(baseline))}"
