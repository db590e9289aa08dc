"""report.html: one self-contained page, readable offline, on a phone and on paper."""

from __future__ import annotations

import base64
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from layout.outputs.backdrop import region_colour
from layout.outputs.cautions import CAUTIONS
from layout.outputs.figure import Picture
from layout.outputs.plain import bound_text, fixed, one_line, rounded_up, significant
from layout.outputs.result import DesignResult, RankedLayout, SensorRow
from layout.outputs.words import (
    CLOCK_SENTENCE,
    HOUSINGS_COLUMN,
    RANKED_COLUMNS,
    bound_sentence,
    effort_sentence,
    even_spread_text,
    figure_text,
    housings_sentence,
    meets_housings,
    nearest_text,
    polished_sentence,
    reach_sentence,
)
from layout.units import MM, NAM

TEMPLATE = "report.html.j2"


def report_html(result: DesignResult, pictures: Sequence[Picture]) -> str:
    """The page; `pictures` in the order of the layouts. Every name is escaped, nothing is loaded from
    elsewhere."""
    import jinja2

    environment = jinja2.Environment(
        loader=jinja2.FileSystemLoader(Path(__file__).parent),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    environment.filters.update(
        fixed=lambda value, digits: fixed(value, digits, "–"),
        rounded_up=lambda value, digits: rounded_up(value, digits, "–"),
        bound_text=lambda value, unit: bound_text(value, unit, "–"),
        significant=lambda value, digits: significant(value, digits, "–"),
        one_line=one_line,
    )
    return environment.get_template(TEMPLATE).render(
        result=result,
        brief=result.brief,
        layouts=[_layout(layout, picture) for layout, picture in zip(result.layouts, pictures, strict=True)],
        bars=_bars(result),
        regions=[
            {
                "name": region.name,
                "colour": region_colour(index),
                "sources": len(region.members),
                "moment_nam": region.moment / NAM,
            }
            for index, region in enumerate(result.regions)
        ],
        bound_sentence=bound_sentence(result),
        reach_sentence=reach_sentence(result),
        polished_sentence=polished_sentence(result),
        effort_sentence=effort_sentence(result),
        housings_sentence=housings_sentence(result),
        meets_housings=meets_housings(result),
        columns=RANKED_COLUMNS + (f"; {HOUSINGS_COLUMN}" if meets_housings(result) else ""),
        figures=[(name, figure, figure_text(figure)) for name, figure in result.figures_of_noise.items()],
        with_errors=any(one.error_rms is not None for one in result.layouts[0].per_region.values()),
        clock_sentence=CLOCK_SENTENCE if result.stopped_by_clock else "",
        cautions=CAUTIONS,
    )


def _layout(layout: RankedLayout, picture: Picture) -> dict[str, Any]:
    return {
        "layout": layout,
        "even_spread": even_spread_text(layout),
        "picture": base64.b64encode(picture.png).decode("ascii"),
        "sensors": [_sensor(row) for row in layout.sensors],
        "has_magnetometers": any(row.kind_type != "electrode" for row in layout.sensors),
    }


def _sensor(row: SensorRow) -> dict[str, Any]:
    is_electrode = row.kind_type == "electrode"
    return {
        "row": row,
        "position_mm": [value / MM for value in row.position],
        "nearest": nearest_text(row),
        "landmarks_mm": [value / MM for value in row.landmark_distance],
        "axes": [] if is_electrode else row.axes.tolist(),
    }


def _bars(result: DesignResult) -> list[dict[str, Any]]:
    """The best layout and the baselines as bars; width in per cent of the longest value (the bound)."""
    best = result.layouts[0]
    longest = max([best.bound, best.value, *(base.value for base in result.baselines)])

    def width(value: float) -> float:
        return max(0.0, min(100.0, 100 * value / longest)) if longest > 0 else 0.0

    bars = [{"name": "layout 1", "value": best.value, "percent": 100.0, "width": width(best.value), "note": ""}]
    for base in result.baselines:
        percent = base.percent_of_best
        bars.append(
            {
                "name": base.name,
                "value": base.value,
                "percent": percent,
                "width": width(base.value),
                "note": base.note,
            }
        )
    return bars
