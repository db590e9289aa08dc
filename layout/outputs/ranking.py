"""ranking.json: everything printed and more, for programs."""

from __future__ import annotations

import json
from typing import Any

from layout.noise.calibration import Figure
from layout.outputs.cautions import CAUTIONS
from layout.outputs.evidence_json import evidence_content
from layout.outputs.plain import for_json
from layout.outputs.result import SCHEMA, Baseline, DesignResult, RankedLayout, SensorRow
from layout.units import MM, NAM


def ranking_json(result: DesignResult) -> str:
    """The result as JSON text: fixed key order, 9 significant digits, null for what has no number, no time of
    day."""
    brief = result.brief
    content = {
        "schema": SCHEMA,
        "version": result.version,
        "title": brief.title,
        "brief_sha256": brief.sha256,
        "seed": brief.search.seed,
        "goal": result.goal,
        "unit": result.unit,
        "bound": result.bound,
        "bound_from": result.bound_from,
        "root_bound": result.root_bound,
        "proven_within_percent": result.proven_within,
        "reach": None if result.reach is None else vars(result.reach),
        "polished": None
        if result.polished is None
        else {
            "value": result.polished.value,
            "gain_percent": result.polished.gain_percent,
            "sensors": [
                {
                    "name": sensor.name,
                    "position_mm": sensor.position / MM,
                    "scalp_position_mm": sensor.scalp_position / MM,
                    "axes": sensor.axes if sensor.axes.any() else [],
                    "slid_mm": sensor.slid / MM,
                }
                for sensor in result.polished.sensors
            ],
        },
        "stopped_by_clock": result.stopped_by_clock,
        "head": result.head.name,
        "sites": len(result.candidates.sites),
        "candidates": len(result.candidates),
        "channels": len(result.candidates.candidate_of_channel),
        "regions": [
            {
                "name": region.name,
                "centre_mm": region.centre / MM,
                "sources": len(region.members),
                "moment_nam": region.moment / NAM,
                "coherent": region.coherent,
                "orientation": "free" if region.free_orientation else "normal",
            }
            for region in result.regions
        ],
        "layouts": [_layout(layout) for layout in result.layouts],
        "baselines": [_baseline(result, base) for base in result.baselines],
        "evidence": evidence_content(result.evidence, tuple(region.members for region in result.regions)),
        "noise_figures": noise_figures(result.figures_of_noise),
        "search_effort": result.search_effort,
        "notes": result.notes,
        "cautions": CAUTIONS,
    }
    return json.dumps(for_json(content), indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def noise_figures(figures: dict[str, Figure]) -> list[dict[str, Any]]:
    """Figures of noise with their bands, in their own units."""
    return [
        {
            "name": name,
            "value": figure.value,
            "unit": figure.unit,
            "low": figure.low,
            "high": figure.high,
            "outside": figure.outside,
            "judged": figure.judged,
            "band": figure.band,
            "source": figure.source,
            "remark": figure.remark,
        }
        for name, figure in figures.items()
    ]


def _layout(layout: RankedLayout) -> dict[str, Any]:
    return {
        "rank": layout.rank,
        "value": layout.value,
        "bound": layout.bound,
        "gap_percent": layout.gap_percent,
        "proven": layout.proven,
        "cost": layout.cost,
        "moved": layout.moved,
        "housings_meet": layout.housings_meet,
        "per_region": {
            name: {
                "bits": figure.bits,
                "error_rms_mm": None if figure.error_rms is None else figure.error_rms / MM,
                "error_worst_mm": None if figure.error_worst is None else figure.error_worst / MM,
            }
            for name, figure in layout.per_region.items()
        },
        "equals_even_spread_of": layout.equals_even_spread_of,
        "even_spread_limit": layout.even_spread_limit,
        "chosen": layout.chosen,
        "sensors": [_sensor(row) for row in layout.sensors],
    }


def _sensor(row: SensorRow) -> dict[str, Any]:
    is_electrode = row.kind_type == "electrode"
    return {
        "number": row.number,
        "candidate": row.candidate,
        "name": row.name,
        "kind": row.kind,
        "kind_type": row.kind_type,
        "role": row.role,
        "site": row.site,
        "position_mm": row.position / MM,
        "scalp_position_mm": row.scalp_position / MM,
        "axis": None if is_electrode else row.axis_name,
        "axes": [] if is_electrode else row.axes,
        "nearest": row.nearest_name,
        "offset_mm": row.nearest_offset / MM,
        "from_landmarks_mm": dict(zip(("NAS", "LPA", "RPA", "inion"), row.landmark_distance / MM, strict=True)),
        "arc_fractions": row.arc_fractions,
        "lost_without": row.worth,
    }


def _baseline(result: DesignResult, base: Baseline) -> dict[str, Any]:
    return {
        "name": base.name,
        "value": base.value,
        "percent_of_best": base.percent_of_best,
        "note": base.note,
        "sensors": None if base.chosen is None else [result.candidates.names[index] for index in base.chosen],
    }
