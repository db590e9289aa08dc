"""The comma-separated tables: ranking.csv and one sensors.csv per ranked layout."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence

from layout.outputs.plain import fixed, one_line, significant
from layout.outputs.result import DesignResult, RankedLayout
from layout.units import MM

SENSOR_COLUMNS = (
    "number",
    "channel",
    "name",
    "kind",
    "site",
    "x_mm",
    "y_mm",
    "z_mm",
    "scalp_x_mm",
    "scalp_y_mm",
    "scalp_z_mm",
    "axis",
    "axis_x",
    "axis_y",
    "axis_z",
    "nearest_standard_position",
    "offset_mm",
    "from_nasion_mm",
    "from_lpa_mm",
    "from_rpa_mm",
    "from_inion_mm",
    "sagittal_fraction",
    "coronal_fraction",
    "lost_without_{unit}",
    "role",
)


def sensors_csv(layout: RankedLayout, unit: str) -> str:
    """One row per channel; the channels of one sensor share its number and what is lost without it [unit].

    Axes empty where none. columns.json defines the columns.
    """
    rows = []
    for row in layout.sensors:
        for channel, axis in enumerate(row.axes, start=1):
            is_electrode = row.kind_type == "electrode"
            rows.append(
                [
                    str(row.number),
                    str(channel),
                    one_line(row.name),
                    one_line(row.kind),
                    one_line(row.site),
                    *(fixed(value / MM, 2) for value in row.position),
                    *(fixed(value / MM, 2) for value in row.scalp_position),
                    "" if is_electrode else one_line(row.axis_name),
                    *("" if is_electrode else fixed(value, 6) for value in axis),
                    one_line(row.nearest_name),
                    fixed(row.nearest_offset / MM, 2),
                    *(fixed(value / MM, 1) for value in row.landmark_distance),
                    *(fixed(value, 4) for value in row.arc_fractions),
                    significant(row.worth, 6),
                    row.role,
                ]
            )
    return _as_csv([column.format(unit=unit) for column in SENSOR_COLUMNS], rows)


POLISHED_COLUMNS = (
    "name",
    "channel",
    "x_mm",
    "y_mm",
    "z_mm",
    "scalp_x_mm",
    "scalp_y_mm",
    "scalp_z_mm",
    "axis_x",
    "axis_y",
    "axis_z",
    "slid_mm",
)


def polished_csv(result: DesignResult) -> str:
    """Layout 1 slid off the grid: one row per channel; axes empty for electrodes."""
    rows = []
    for sensor in result.polished.sensors:
        for channel, axis in enumerate(sensor.axes, start=1):
            rows.append(
                [
                    one_line(sensor.name),
                    str(channel),
                    *(fixed(value / MM, 2) for value in sensor.position),
                    *(fixed(value / MM, 2) for value in sensor.scalp_position),
                    *(fixed(value, 6) if axis.any() else "" for value in axis),
                    fixed(sensor.slid / MM, 2),
                ]
            )
    return _as_csv(POLISHED_COLUMNS, rows)


def ranking_csv(result: DesignResult) -> str:
    """The ranked layouts, then the baselines; `sensors` are candidate names parted by semicolons."""
    unit = result.unit
    columns = (
        "row",
        "rank",
        "name",
        f"value_{unit}",
        f"bound_{unit}",
        "gap_percent",
        "proven",
        "percent_of_best",
    )
    columns += ("cost", "moved", "housings_meet", "equals_even_spread_of", "even_spread_limit", "sensors", "note")
    best = result.layouts[0].value
    rows = []
    for layout in result.layouts:
        rows.append(
            [
                "layout",
                str(layout.rank),
                f"layout {layout.rank}",
                significant(layout.value, 9),
                significant(layout.bound, 9),
                significant(layout.gap_percent, 6),
                "yes" if layout.proven else "no",
                significant(100 * layout.value / best, 6) if best else "",
                significant(layout.cost, 9),
                "" if layout.moved is None else str(layout.moved),
                "" if layout.housings_meet is None else str(layout.housings_meet),
                "" if layout.equals_even_spread_of is None else str(layout.equals_even_spread_of),
                str(layout.even_spread_limit),
                _names(result, layout.chosen),
                "",
            ]
        )
    for base in result.baselines:
        numbers = [
            significant(base.value, 9),
            "",
            "",
            "",
            significant(base.percent_of_best, 6),
            "",
            "",
            "",
            "",
            "",
        ]
        rows.append(
            [
                "baseline",
                "",
                one_line(base.name),
                *numbers,
                _names(result, base.chosen or ()),
                one_line(base.note),
            ]
        )
    return _as_csv(columns, rows)


def _names(result: DesignResult, chosen: Sequence[int]) -> str:
    return ";".join(one_line(result.candidates.names[index]) for index in chosen)


def _as_csv(columns: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(rows)
    return text.getvalue()
