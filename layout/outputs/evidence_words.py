"""The evidence of a design in a few sentences."""

from __future__ import annotations

import numpy as np

from layout.evidence.tolerance import LEVELS
from layout.outputs.curve_tables import Curve
from layout.outputs.placement_tables import LossRow, Placement
from layout.outputs.plain import bound_text, fixed
from layout.outputs.result import DesignResult
from layout.units import DEGREE, MM, PERCENT

LEVEL = 1  # of LEVELS: the drop that is told in words


def evidence_sentences(result: DesignResult) -> tuple[str, ...]:
    """On layout 1: how exactly it must be placed, what failures cost, and what other numbers of sensors give."""
    evidence = result.evidence
    if evidence is None:
        return ()
    first = evidence.placements[:1]
    sentences = [*(_room(one) for one in first), *(_losses(one) for one in first)]
    if evidence.curve is not None:
        sentences.append(_curve(evidence.curve))
    return tuple(sentences)


def _room(placement: Placement) -> str:
    worst = np.array([one.slide.worst[LEVEL] for one in placement.sensors])
    moves = "drops" if placement.unit == "bits" else "grows"
    drop = f"before the value {moves} by {LEVELS[LEVEL] / PERCENT:g} %"
    if not np.isfinite(worst).any():
        tried = min(one.slide.tried for one in placement.sensors)
        return f"Room: any one sensor may be off by {tried / MM:.0f} mm along the scalp, the farthest tried, {drop}."
    least = placement.sensors[int(worst.argmin())]
    return (
        f"Room: one sensor may be off by {fixed(worst.min() / MM, 1)} mm along the scalp (number {least.number}, "
        f"which must sit most exactly) or more (all others), in the worst direction, {drop}."
    )


def _losses(placement: Placement) -> str:
    parts = [_loss(one, placement) for one in placement.losses if one.failing == 1 or one.what == "misplacement"]
    return f"Expected losses: {'; '.join(parts)}."


def _loss(one: LossRow, placement: Placement) -> str:
    share = 100.0 * one.loss.mean / placement.value if placement.value else 0.0
    size = f"{fixed(one.loss.mean, 3)} {placement.unit} ({fixed(share, 1)} %) on average"
    if one.what == "failures":
        return f"if any one sensor fails, {size}, {fixed(one.loss.worst, 3)} at worst"
    shift, tilt = fixed(one.shift / MM, 0), fixed(one.tilt / DEGREE, 0)
    return f"if all sit {shift} mm{f' and {tilt}°' if one.tilt else ''} rms beside their places, {size}"


def _curve(curve: Curve) -> str:
    what = "sensors" if curve.by == "count" else "to spend"
    points = [
        f"{one.spent:g} {what}: {fixed(one.value, 3)} (bound {bound_text(one.bound, curve.unit)})"
        for one in curve.points
    ]
    knee = "" if curve.knee is None else f"; knee at {curve.points[curve.knee].spent:g}"
    return f"Other sizes, best value met in {curve.unit}: {', '.join(points)}{knee}."
