"""Synthetic evidence for a made result: numbers without meaning, of the right shapes, with every special case."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from layout.evidence.dropout import ExpectedLoss
from layout.outputs.curve_tables import Curve, CurvePoint
from layout.outputs.evidence_result import ChannelNoise, Evidence
from layout.outputs.placement_tables import LossRow, PlacedSensor, Placement, Room
from layout.outputs.result import DesignResult, RankedLayout


def with_evidence(result: DesignResult) -> DesignResult:
    """The result with evidence on each of its layouts."""
    return replace(
        result,
        evidence=Evidence(
            placements=tuple(_placement(result, layout) for layout in result.layouts),
            curve=_curve(result),
            sensitivity=tuple(_sensitivity(result, layout) for layout in result.layouts),
            probe_moment=10e-9,
            noise=tuple(_noise(layout) for layout in result.layouts),
        ),
    )


def _placement(result: DesignResult, layout: RankedLayout) -> Placement:
    sensors = []
    for row in layout.sensors:
        near = row.number * 1e-3
        slide = Room((near, 3 * near, math.inf), (2 * near, 4 * near, math.inf), ("45", "270", ""), 30e-3)
        housed = row.kind_type != "electrode"
        tilt = Room((0.1, 0.3, math.inf), (0.2, 0.4, math.inf), ("0", "90", ""), 0.7)
        lift = Room((2e-3, 6e-3, math.inf), (2e-3, 6e-3, math.inf), ("0", "0", ""), 20e-3)
        others = [name for name in result.candidates.names if name != row.name][row.number : row.number + 4]
        instead = tuple((name, layout.value * (1 - 0.011 * k)) for k, name in enumerate(others))
        sensors.append(
            PlacedSensor(
                row.number,
                row.name,
                row.kind,
                row.site,
                row.worth,
                slide,
                tilt if housed else None,
                lift if housed else None,
                () if row.number == 3 else instead,
            )
        )
    loss = ExpectedLoss(0.31, 0.29, 0.33, 0.8, 1.1, 200, False)
    losses = (
        LossRow("failures", 1, 0.0, 0.0, replace(loss, exact=True, cases=len(sensors))),
        LossRow("misplacement", 0, 3e-3, 0.05, loss),
    )
    name = f"Layout of rank {layout.rank}"
    return Placement(result.brief.title, name, result.unit, layout.value, tuple(sensors), losses, ("A <note>.",))


def _curve(result: DesignResult) -> Curve:
    points = tuple(
        CurvePoint(
            spent=float(n),
            sensors=n,
            channels=n,
            value=4 * math.log2(1 + n),
            bound=4.2 * math.log2(1 + n),
            cost=float(n),
            chosen=(),
            names=(),
            even_spread=2.5 * math.log2(1 + n),
            standard=None if n > 16 else 2.2 * math.log2(1 + n),
            equals_even_spread_of=None if n > 8 else 3 * n,
            even_spread_limit=64,
            next_value=4 * math.log2(2 + n),
            next_name="s001",
        )
        for n in (2, 4, 8, 16, 32)
    )
    return Curve(result.brief.title, result.unit, "count", False, points, 31.0, 300, ("Mind <this>.",))


def _sensitivity(result: DesignResult, layout: RankedLayout) -> np.ndarray:
    middle = np.mean([row.position for row in layout.sensors], axis=0)
    return 3.0 / layout.rank * np.exp(-np.linalg.norm(result.head.cortex.positions - middle, axis=1) / 0.03)


def _noise(layout: RankedLayout) -> ChannelNoise:
    rows = [(row, k) for row in layout.sensors for k in range(len(row.axes))]
    n = len(rows)
    size = np.array([1e-6 if row.kind_type == "electrode" else 1e-13 for row, _ in rows])
    apart = np.abs(np.subtract.outer(np.arange(n), np.arange(n)))
    return ChannelNoise(
        names=tuple(f"{row.name} {k + 1}" for row, k in rows),
        sensor=np.array([row.number for row, _ in rows]),
        units=tuple("V" if row.kind_type == "electrode" else "T" for row, _ in rows),
        parts={"sensor": size, "background": 3 * size, "eyes": 0.5 * size, "<surroundings>": 0.1 * size},
        correlation=np.cos(0.3 * apart) * 0.9**apart,
    )
