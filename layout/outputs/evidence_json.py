"""The evidence of a design as part of ranking.json."""

from __future__ import annotations

import json
from typing import Any

import numpy as np

from layout.outputs.evidence_result import ChannelNoise, Evidence
from layout.outputs.json_texts import curve_json, placement_json
from layout.units import FT, NAM, UV

SAID_ABOVE = ("schema", "version", "title", "unit", "cautions")  # of the whole file


def evidence_content(evidence: Evidence | None, regions: tuple[np.ndarray, ...]) -> dict[str, Any] | None:
    """Curve, and for each layout its placement, noise and sensitivity at the median source; None without evidence.

    regions: of each region its sources, numbers into the cortex.
    """
    if evidence is None:
        return None
    return {
        "curve": None if evidence.curve is None else _inner(curve_json(evidence.curve)),
        "placements": [_inner(placement_json(one)) for one in evidence.placements],
        "noise": [_noise(one) for one in evidence.noise],
        "probe_moment_nam": evidence.probe_moment / NAM,
        "sensitivity": [
            {
                "median_of_cortex": np.median(one),
                "median_of_regions": [np.median(one[members]) for members in regions],
            }
            for one in evidence.sensitivity
        ],
    }


def _inner(text: str) -> dict[str, Any]:
    return {name: value for name, value in json.loads(text).items() if name not in SAID_ABOVE}


def _noise(noise: ChannelNoise) -> dict[str, Any]:
    """Standard deviations in µV or fT."""
    scale = np.array([UV if unit == "V" else FT for unit in noise.units])
    return {
        "channels": noise.names,
        "sensors": noise.sensor.tolist(),
        "units": ["uV" if unit == "V" else "fT" for unit in noise.units],
        "sd": {name: values / scale for name, values in noise.parts.items()},
    }
