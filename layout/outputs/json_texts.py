"""What --json prints where a command has no JSON file of its own: curve, assess, placement, and written files.

Every text carries the number of its form under "schema" and the version of the tool. Values stand in the "unit" at the
top (bits or mm), every other quantity names its unit in its key; null: there is no such number.
"""

from __future__ import annotations

import json
import math
from dataclasses import asdict
from typing import Any

from layout import __version__
from layout.outputs.assess_tables import AssessedLayout, Assessment, OtherModel
from layout.outputs.cautions import CAUTIONS
from layout.outputs.curve_tables import Curve, CurvePoint, gap_of, share_of
from layout.outputs.placement_tables import LEVELS, LossRow, PlacedSensor, Placement, Room
from layout.outputs.plain import for_json
from layout.outputs.result import RegionFigure
from layout.units import DEGREE, MM, PERCENT

SCHEMA = 1


def json_text(content: dict[str, Any]) -> str:
    """A dictionary as JSON: its own order of keys, 9 significant digits, null for NaN and infinities."""
    return json.dumps(for_json(content), indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def written_json(file: str, **facts: object) -> str:
    """What a command says that only writes one file."""
    return json_text({"schema": SCHEMA, "version": __version__, "file": file, **facts})


def curve_json(curve: Curve) -> str:
    """The points of a curve, its knee and its ceiling."""
    return json_text(
        {
            "schema": SCHEMA,
            "version": __version__,
            "title": curve.title,
            "unit": curve.unit,
            "by": curve.by,
            "nested": curve.nested,
            "ceiling": curve.ceiling,
            "ceiling_channels": curve.ceiling_channels,
            "knee": None if curve.knee is None else curve.points[curve.knee].spent,
            "points": [_point(one, curve) for one in curve.points],
            "warnings": curve.warnings,
            "cautions": CAUTIONS,
        }
    )


def _point(one: CurvePoint, curve: Curve) -> dict[str, Any]:
    gap, share = gap_of(one.value, one.bound, curve.unit), curve.share(one.value)
    return {**asdict(one), "gap_percent": gap, "percent_of_ceiling": share}


def assess_json(found: Assessment) -> str:
    """Given layouts side by side, the ceilings, and other models where they were asked for."""
    return json_text(
        {
            "schema": SCHEMA,
            "version": __version__,
            "title": found.title,
            "unit": found.unit,
            "layouts": [_assessed(one, found) for one in found.layouts],
            "ceilings": [asdict(one) for one in found.ceilings],
            "models": [_model(one, found.unit) for one in found.models],
            "notes": found.notes,
            "cautions": CAUTIONS,
        }
    )


def _assessed(one: AssessedLayout, found: Assessment) -> dict[str, Any]:
    def share(best: float | None) -> float | None:
        return None if best is None else share_of(one.value, best, found.unit)

    return {
        "name": one.name,
        "value": one.value,
        "best_found": one.best,
        "bound": one.bound,
        "percent_of_best_found": share(one.best),
        "percent_of_bound": share(one.bound),
        "percent_of_ceiling": share(found.ceilings[-1].value),
        "channels": one.channels,
        "cost": one.cost,
        "keeps_rules": one.keeps_rules,
        "per_region": {name: _region(figure) for name, figure in one.per_region.items()},
        "sensors": [{"name": name, "lost_without": lost} for name, lost in zip(one.names, one.lost, strict=True)],
        "notes": one.notes,
    }


def _region(figure: RegionFigure) -> dict[str, float | None]:
    return {
        "bits": figure.bits,
        "error_rms_mm": None if figure.error_rms is None else figure.error_rms / MM,
        "error_worst_mm": None if figure.error_worst is None else figure.error_worst / MM,
    }


def _model(one: OtherModel, unit: str) -> dict[str, Any]:
    return {
        "name": one.name,
        "designed_for_it": one.designed,
        "bound": one.bound,
        "gap_percent": gap_of(one.designed, one.bound, unit),
        "values": one.values,
        "pairs": None if one.order is None else one.order.pairs,
        "pairs_reversed": None if one.order is None else one.order.reversed,
        "kendall_tau": None if one.order is None else one.order.tau,
    }


def placement_json(found: Placement) -> str:
    """Room, worth and substitutes of every sensor; expected losses."""
    return json_text(
        {
            "schema": SCHEMA,
            "version": __version__,
            "title": found.title,
            "layout": found.layout,
            "unit": found.unit,
            "value": found.value,
            "drops_percent": [level / PERCENT for level in LEVELS],
            "sensors": [_placed(one) for one in found.sensors],
            "losses": [_loss(one) for one in found.losses],
            "notes": found.notes,
            "cautions": CAUTIONS,
        }
    )


def _placed(one: PlacedSensor) -> dict[str, Any]:
    return {
        "number": one.number,
        "name": one.name,
        "kind": one.kind,
        "site": one.site,
        "lost_without": one.lost,
        "slide": _room(one.slide, "mm", MM),
        "tilt": _room(one.tilt, "deg", DEGREE),
        "lift": _room(one.lift, "mm", MM),
        "substitutes": [{"name": name, "value": value} for name, value in one.substitutes],
    }


def _room(room: Room | None, unit: str, size: float) -> dict[str, Any] | None:
    """One entry of each list for each of `drops_percent`; null where the drop is not reached within what was tried."""
    if room is None:
        return None
    return {
        f"worst_{unit}": [value / size for value in room.worst],
        f"mean_{unit}": [value / size for value in room.mean],
        "worst_direction_deg": [float(one) if one else math.nan for one in room.toward],
        f"tried_{unit}": room.tried / size,
    }


def _loss(one: LossRow) -> dict[str, Any]:
    fails = one.what == "failures"
    return {
        "what": one.what,
        "failing": one.failing if fails else None,
        "shift_mm": None if fails else one.shift / MM,
        "tilt_deg": None if fails else one.tilt / DEGREE,
        "mean": one.loss.mean,
        "mean_low": one.loss.low,
        "mean_high": one.loss.high,
        "tail": one.loss.tail,
        "worst": one.loss.worst,
        "cases": one.loss.cases,
        "exact": one.loss.exact,
    }
