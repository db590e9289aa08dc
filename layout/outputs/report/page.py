"""report.html: one self-contained page, readable offline, on a phone and on paper."""

from __future__ import annotations

import base64
import hashlib
import io
import json
import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from layout.outputs.cautions import CAUTIONS
from layout.outputs.curve_tables import Curve, curve_sentences, gap_of
from layout.outputs.evidence_result import ChannelNoise
from layout.outputs.methods.text import methods_text
from layout.outputs.pictures.backdrop import region_colour
from layout.outputs.pictures.figure import Picture
from layout.outputs.placement_tables import Placement, case_text
from layout.outputs.plain import bound_text, fixed, one_line, rounded_up, significant
from layout.outputs.report.charts import (
    correlation_labels,
    correlation_png,
    curve_key,
    curve_svg,
    middle_correlation,
    noise_rows,
    part_colour,
    standing,
    strongest_pairs,
)
from layout.outputs.report.files import files_of, shared_files
from layout.outputs.report.scene import scene_json, sensitivity_top, sensor_colour
from layout.outputs.report.sensors import levels, sensor_rows
from layout.outputs.report.words import NO_CURVE, NO_NOISE, NO_ROOM, limits_of
from layout.outputs.result import DesignResult
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
    polished_sentence,
    reach_sentence,
)
from layout.units import NAM

HERE = Path(__file__).parent
TEMPLATE = "report.html.j2"
RAMP = ("#F7F4EA", "#E4B669", "#CB7330", "#993A2B", "#48101F")  # of the sensitivity: from light to dark for every eye
PAPER = "#F4F2EB"  # behind the head
PICTURE_QUALITY = 80  # of 100: small print on the flat pictures stays sharp
LOOK_UP = 25  # degrees above the horizon, of the first look at the head


def report_html(result: DesignResult, pictures: Sequence[Picture], beside: Sequence[str] = ()) -> str:
    """The page; `pictures` in the order of the layouts, `beside`: files to link to, relative to the page.

    Every name is escaped, nothing is loaded from elsewhere, and the page's policy lets no script run but the two that
    it brings.
    """
    import jinja2
    from markupsafe import Markup

    environment = jinja2.Environment(
        loader=jinja2.FileSystemLoader(HERE),
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
    evidence = result.evidence
    scripts = [_own("report_head.js"), _own("report.js")]
    return environment.get_template(TEMPLATE).render(
        result=result,
        brief=result.brief,
        layouts=[
            _layout(result, place, picture, beside)
            for place, picture in zip(range(len(result.layouts)), pictures, strict=True)
        ],
        regions=[
            {
                "name": region.name,
                "colour": region_colour(index),
                "sources": len(region.members),
                "moment_nam": region.moment / NAM,
            }
            for index, region in enumerate(result.regions)
        ],
        colour_of={region.name: region_colour(index) for index, region in enumerate(result.regions)},
        kinds=_kinds(result),
        arrows=any(row.kind_type != "electrode" for layout in result.layouts for row in layout.sensors),
        look=_look(result),
        ramp=RAMP,
        paper=PAPER,
        sensitivity_top=sensitivity_top(evidence.sensitivity) if evidence is not None and evidence.sensitivity else 0.0,
        probe_nam=evidence.probe_moment / NAM if evidence is not None else 0.0,
        curve=_curve(evidence.curve) if evidence is not None and evidence.curve is not None else None,
        levels=levels(),
        no_room=NO_ROOM,
        no_curve=NO_CURVE,
        no_noise=NO_NOISE,
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
        methods=methods_text(result).strip(),
        limits=limits_of(result),
        cautions=CAUTIONS,
        shared_files=shared_files(beside),
        css=Markup(_own("report.css")),
        scene=Markup(scene_json(result)),
        scripts=[Markup(script) for script in scripts],
        script_digests=Markup(" ".join(_digest(script) for script in scripts)),
    )


def _own(name: str) -> str:
    return (HERE / name).read_text(encoding="utf-8")


def _digest(script: str) -> str:
    return f"'sha256-{base64.b64encode(hashlib.sha256(script.encode('utf-8')).digest()).decode('ascii')}'"


def _layout(result: DesignResult, place: int, picture: Picture, beside: Sequence[str]) -> dict[str, Any]:
    layout, evidence = result.layouts[place], result.evidence
    placement = evidence.placements[place] if evidence is not None and evidence.placements else None
    return {
        "place": place,
        "layout": layout,
        "even_spread": even_spread_text(layout),
        "picture": base64.b64encode(webp(picture.png)).decode("ascii"),
        "sensors": sensor_rows(layout, placement, result.unit),
        "has_magnetometers": any(row.kind_type != "electrode" for row in layout.sensors),
        "standing": standing(result, layout),
        "has_room": placement is not None,
        "losses": _losses(placement),
        "room_notes": [one_line(note) for note in placement.notes] if placement is not None else [],
        "noise": _noise(result, evidence.noise[place]) if evidence is not None and evidence.noise else None,
        "files": files_of(layout.rank, beside),
    }


def webp(png: bytes) -> bytes:
    """The same picture in an eighth of the bytes, so that a page of fifty layouts stays light."""
    from PIL import Image

    file = io.BytesIO()
    Image.open(io.BytesIO(png)).convert("RGB").save(file, "WEBP", quality=PICTURE_QUALITY, method=4)
    return file.getvalue()


def _losses(placement: Placement | None) -> list[dict[str, str]]:
    if placement is None:
        return []
    return [
        {
            "case": case_text(one),
            "mean": fixed(one.loss.mean, 3),
            "interval": "exact" if one.loss.exact else f"{fixed(one.loss.low, 3)} to {fixed(one.loss.high, 3)}",
            "percent": fixed(100 * one.loss.mean / placement.value, 1) if placement.value else "–",
            "tail": fixed(one.loss.tail, 3),
            "worst": fixed(one.loss.worst, 3),
            "cases": str(one.loss.cases),
        }
        for one in placement.losses
    ]


def _noise(result: DesignResult, noise: ChannelNoise) -> dict[str, Any]:
    averages = result.brief.noise.averages
    return {
        "parts": [(one_line(name), part_colour(index)) for index, name in enumerate(noise.parts)],
        "rows": noise_rows(noise),
        "averaged": "" if averages == 1 else f", of the mean of {averages} epochs",
        "correlation": correlation_png(noise.correlation),
        "labels": correlation_labels(noise),
        "strongest": strongest_pairs(noise),
        "middle": middle_correlation(noise),
    }


def _curve(curve: Curve) -> dict[str, Any]:
    from markupsafe import Markup

    return {
        "svg": Markup(curve_svg(curve)),
        "key": [(Markup(svg), colour, words) for svg, colour, words in curve_key(curve)],
        "by": curve.by,
        "sentences": curve_sentences(curve),
        "warnings": [one_line(warning) for warning in curve.warnings],
        "rows": [_curve_row(curve, place) for place in range(len(curve.points))],
    }


def _curve_row(curve: Curve, place: int) -> list[str]:
    one = curve.points[place]
    equal = "–" if one.equals_even_spread_of is None else str(one.equals_even_spread_of)
    if one.equals_even_spread_of is None and one.even_spread_limit:
        equal = f"more than {one.even_spread_limit}"
    return [
        significant(one.spent, 6),
        f"{one.sensors}{'*' if place == curve.knee else ''}",
        fixed(one.value, 3),
        bound_text(one.bound, curve.unit),
        rounded_up(gap_of(one.value, one.bound, curve.unit), 1),
        fixed(curve.share(one.value), 1),
        fixed(one.even_spread, 3, "–"),
        fixed(one.standard, 3, "–"),
        equal,
        fixed(None if one.next_value is None else abs(one.next_value - one.value), 3, "–"),
    ]


def _kinds(result: DesignResult) -> list[dict[str, Any]]:
    """Colour and name of each kind of sensor that some layout holds, the reference and the ground by themselves."""
    kinds: dict[tuple[str, str], dict[str, Any]] = {}
    for layout in result.layouts:
        for row in layout.sensors:
            entry = {"name": row.role or row.kind, "colour": sensor_colour(row), "hollow": row.role == "reference"}
            kinds.setdefault((row.role, "" if row.role else row.kind), entry)
    return list(kinds.values())


def _look(result: DesignResult) -> str:
    """Where the first look is from: most of layout 1 and of the regions is seen from there.

    [degrees from the right ear towards the nose, degrees above the horizon, factor of the distance at which a ball
    around the head fills the view].
    """
    sensors = result.layouts[0].sensors
    middle = result.head.scalp.vertices.mean(axis=0)
    outward = np.array([region.centre - middle for region in result.regions])
    outward /= np.maximum(np.linalg.norm(outward, axis=1, keepdims=True), 1e-9)
    up = math.radians(LOOK_UP)
    seen = {}
    for around in range(-180, 180, 15):
        turned = math.radians(around)
        toward = np.array([math.cos(up) * math.cos(turned), math.cos(up) * math.sin(turned), math.sin(up)])
        facing = (np.maximum(way @ toward, 0.0).mean() for way in (np.array([row.normal for row in sensors]), outward))
        seen[around] = round(sum(facing), 6)
    far = 0.9 if all(row.kind_type == "electrode" for row in sensors) else 1.0  # room for arrows
    return json.dumps([max(seen, key=lambda around: seen[around]), LOOK_UP, far])
