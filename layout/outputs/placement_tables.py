"""How exactly each sensor must be placed, what replaces it and what failures cost: tables and terminal."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from layout.evidence.dropout import ExpectedLoss
from layout.evidence.tolerance import LEVELS
from layout.outputs.cautions import CAUTIONS
from layout.outputs.curve_tables import columns_text, csv_text
from layout.outputs.plain import fixed, one_line, significant
from layout.units import DEGREE, MM, PERCENT

if TYPE_CHECKING:
    from rich.console import Console

NAMES = ("placement.csv", "substitutes.csv", "expected_loss.csv", "columns.json")


@dataclass(frozen=True)
class Room:
    """How far a sensor may be off before the value drops by each of LEVELS: in the worst direction and in the mean over
    directions, SI units, inf where not within `tried`. toward: the worst direction at each level, "" where there is
    none.
    """

    worst: tuple[float, ...]
    mean: tuple[float, ...]
    toward: tuple[str, ...]
    tried: float


@dataclass(frozen=True)
class PlacedSensor:
    """One sensor of the layout. slide [m] along the scalp; tilt [rad] and lift [m]: None for electrodes.

    lost: what the value loses without it, in the printed unit. substitutes: (candidate, value with it in this one's
    place), best first.
    """

    number: int
    name: str
    kind: str
    site: str
    lost: float
    slide: Room
    tilt: Room | None
    lift: Room | None
    substitutes: tuple[tuple[str, float], ...]


@dataclass(frozen=True)
class LossRow:
    """An expected loss in the printed unit. what: "failures" or "misplacement"; failing: how many sensors fail; shift
    [m] along each tangent and tilt [rad] about each, rms.
    """

    what: str
    failing: int
    shift: float
    tilt: float
    loss: ExpectedLoss


@dataclass(frozen=True)
class Placement:
    """Evidence on the placement of one layout. value in the printed unit; notes: what to know."""

    title: str
    layout: str
    unit: str
    value: float
    sensors: tuple[PlacedSensor, ...]
    losses: tuple[LossRow, ...]
    notes: tuple[str, ...]


def _drops() -> list[str]:
    return [f"{level / PERCENT:g}" for level in LEVELS]


def _room_columns(way: str, unit: str, words: str) -> dict[str, tuple[str, str]]:
    columns = {}
    for level in _drops():
        drop = f"before the value drops by {level} % of itself; > and the most tried where it does not"
        columns[f"{way}_worst_{unit}_{level}_percent"] = (f"{words}, in the worst direction, {drop}", unit)
        columns[f"{way}_mean_{unit}_{level}_percent"] = (f"{words}, mean drop over the directions, {drop}", unit)
    return columns


PLACEMENT = {
    "number": ("Number of the sensor in the layout", ""),
    "name": ("The choice by name", ""),
    "kind": ("Name of the sensor's kind in the brief's stock", ""),
    "site": ("Name of the site", ""),
    "lost_without_{unit}": ("What the layout loses if this sensor fails", "{unit}"),
    "lost_without_percent": ("The same as a share of the value", "percent"),
    **_room_columns("slide", "mm", "How far along the scalp from its site"),
    "slide_worst_direction": (
        "The worst direction at the least drop reached; degrees from the scalp's first tangent (to the front) to the "
        "left, empty where no drop is reached",
        "degrees",
    ),
    **_room_columns("tilt", "deg", "How far tilted where it meets the scalp; empty for electrodes"),
    "tilt_worst_direction": ("As slide_worst_direction: which way its top leans", "degrees"),
    **{
        name: value
        for name, value in _room_columns("lift", "mm", "How far off the scalp; empty for electrodes").items()
        if "mean" not in name
    },
}
SUBSTITUTES = {
    "number": ("Number of the sensor that is replaced", ""),
    "name": ("The choice that is replaced", ""),
    "order": ("1: the best substitute", ""),
    "substitute": ("Candidate that takes its part, every rule of the brief kept, all others staying", ""),
    "value_{unit}": ("Value of the layout then", "{unit}"),
    "percent_of_value": ("The same as a share of the layout's value (above 100: larger)", "percent"),
}
LOSSES = {
    "what": ("failures: sensors fail at random; misplacement: all sensors sit somewhat elsewhere", ""),
    "failing": ("How many sensors fail", ""),
    "shift_mm": ("rms displacement along each tangent of the scalp, of each sensor independently", "mm"),
    "tilt_deg": ("rms tilt about each tangent; electrodes do not tilt", "degrees"),
    "mean_loss_{unit}": ("Mean loss of value", "{unit}"),
    "mean_low_{unit}": ("Lower end of the 95 % interval of the mean", "{unit}"),
    "mean_high_{unit}": ("Upper end of the 95 % interval of the mean", "{unit}"),
    "mean_percent": ("Mean loss as a share of the value", "percent"),
    "tail_loss_{unit}": ("Loss that 95 % of the cases do not pass", "{unit}"),
    "worst_loss_{unit}": ("Largest loss met", "{unit}"),
    "cases": ("Cases gone through or drawn", ""),
    "exact": ("yes: every case there is, once; no: independent draws", ""),
}


def placement_files(found: Placement) -> dict[str, str]:
    """File name -> content."""
    return {
        "placement.csv": placement_csv(found),
        "substitutes.csv": substitutes_csv(found),
        "expected_loss.csv": losses_csv(found),
        "columns.json": columns_text(
            {"placement.csv": PLACEMENT, "substitutes.csv": SUBSTITUTES, "expected_loss.csv": LOSSES}, unit=found.unit
        ),
    }


def placement_csv(found: Placement) -> str:
    """One row for each sensor."""
    rows = []
    for one in found.sensors:
        rows.append(
            [
                str(one.number),
                one_line(one.name),
                one_line(one.kind),
                one_line(one.site),
                significant(one.lost, 6),
                significant(_percent(one.lost, found.value), 6),
                *_room_cells(one.slide, MM),
                _toward(one.slide),
                *_room_cells(one.tilt, DEGREE),
                _toward(one.tilt),
                *_room_cells(one.lift, MM)[::2],
            ]
        )
    return csv_text([name.format(unit=found.unit) for name in PLACEMENT], rows)


def substitutes_csv(found: Placement) -> str:
    """One row for each substitute, best first."""
    rows = [
        [
            str(one.number),
            one_line(one.name),
            str(order),
            one_line(name),
            significant(value, 9),
            significant(_percent(value, found.value), 6),
        ]
        for one in found.sensors
        for order, (name, value) in enumerate(one.substitutes, 1)
    ]
    return csv_text([name.format(unit=found.unit) for name in SUBSTITUTES], rows)


def losses_csv(found: Placement) -> str:
    """One row for each number of failures and each size of misplacement."""
    rows = []
    for one in found.losses:
        fails = one.what == "failures"
        loss = one.loss
        rows.append(
            [
                one.what,
                str(one.failing) if fails else "",
                "" if fails else fixed(one.shift / MM, 3),
                "" if fails else fixed(one.tilt / DEGREE, 3),
                *(significant(value, 6) for value in (loss.mean, loss.low, loss.high)),
                significant(_percent(loss.mean, found.value), 6),
                *(significant(value, 6) for value in (loss.tail, loss.worst)),
                str(loss.cases),
                "yes" if loss.exact else "no",
            ]
        )
    return csv_text([name.format(unit=found.unit) for name in LOSSES], rows)


def print_placement(found: Placement, console: Console) -> None:
    """Tolerances, substitutes and expected losses. Fits 80 columns."""
    from rich.text import Text

    from layout.outputs.terminal import new_table, say

    say(console, found.title, style="bold")
    say(console, f"{found.layout}: {fixed(found.value, 3)} {found.unit}")
    tilts = any(one.tilt is not None for one in found.sensors)
    worse = "drops" if found.unit == "bits" else "grows"
    table = new_table(f"Room before the value {worse} by {', '.join(_drops())} %, in the worst direction")
    for heading in ("no.", "sensor", f"{found.unit} lost", "slide mm", *(["tilt °", "lift mm"] if tilts else [])):
        table.add_column(heading, justify="left" if heading == "sensor" else "right", no_wrap=heading != "sensor")
    for one in found.sensors:
        rooms = [_room_text(one.slide, MM)]
        rooms += [_room_text(one.tilt, DEGREE), _room_text(one.lift, MM)] if tilts else []
        table.add_row(str(one.number), Text(one_line(one.name)), fixed(one.lost, 3), *rooms)
    console.print(table)
    table = new_table("Substitutes, best first, and the value left in per cent")
    table.add_column("sensor", overflow="fold")
    table.add_column("substitutes", overflow="fold")
    for one in found.sensors:
        instead = ", ".join(
            f"{one_line(name)} {fixed(_percent(value, found.value), 1)}" for name, value in one.substitutes[:3]
        )
        table.add_row(Text(one_line(one.name)), Text(instead or "none that keeps the rules"))
    console.print(table)
    table = new_table("Expected losses, with the 95 % interval of the mean")
    table.add_column("case (cases)", min_width=16)
    for heading in (f"{found.unit} lost", "interval", "% of value", "95 % under", "worst"):
        table.add_column(heading, justify="right", max_width=13)
    for one in found.losses:
        loss = one.loss
        table.add_row(
            Text(f"{case_text(one)} ({loss.cases})"),
            fixed(loss.mean, 3),
            "exact" if loss.exact else f"{fixed(loss.low, 3)} to {fixed(loss.high, 3)}",
            fixed(_percent(loss.mean, found.value), 1),
            fixed(loss.tail, 3),
            fixed(loss.worst, 3),
        )
    console.print(table)
    for note in found.notes:
        say(console, f"- {note}")
    say(console, CAUTIONS[1])


def case_text(one: LossRow) -> str:
    """A loss's case in words."""
    if one.what == "failures":
        return "any 1 fails" if one.failing == 1 else f"any {one.failing} fail"
    parts = [f"{fixed(one.shift / MM, 1)} mm"] if one.shift else []
    parts += [f"{fixed(one.tilt / DEGREE, 1)}°"] if one.tilt else []
    return f"all off by {' and '.join(parts)} rms"


def _percent(part: float, whole: float) -> float:
    return 100.0 * part / whole if whole else 0.0


def _room_cells(room: Room | None, unit: float) -> list[str]:
    if room is None:
        return [""] * (2 * len(LEVELS))
    return [_within(value, room.tried, unit, 3) for pair in zip(room.worst, room.mean, strict=True) for value in pair]


def _room_text(room: Room | None, unit: float) -> str:
    return "-" if room is None else "/".join(_within(value, room.tried, unit, 1) for value in room.worst)


def _within(value: float, tried: float, unit: float, digits: int) -> str:
    return fixed(value / unit, digits) if np.isfinite(value) else f">{tried / unit:.0f}"


def _toward(room: Room | None) -> str:
    return "" if room is None else next((one for one in room.toward if one), "")


def compass(direction: int, of: int) -> str:
    """The direction's angle in degrees, as the tables have it."""
    return f"{math.degrees(2 * math.pi * direction / of):g}"
