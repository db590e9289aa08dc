"""`layout check` for programs."""

from __future__ import annotations

from typing import Any

from layout import __version__
from layout.anatomy.head_size import head_size
from layout.outputs.check import Check, model_text, region_places, rule_sentences, sites_of
from layout.outputs.json_texts import json_text
from layout.outputs.ranking import noise_figures
from layout.units import CM2, MM

SCHEMA = 1


def check_json(check: Check) -> str:
    """Head, regions, stock, rules, model and noise figures as JSON text; lengths in mm, head frame."""
    length, breadth, circumference = (value / MM for value in head_size(check.head))
    candidates, names = check.candidates, check.candidates.names
    stock = []
    for index, entry in enumerate(check.brief.stock):
        own = candidates.kind == index
        sites = sites_of(candidates, index)
        stock.append(
            {
                "name": entry.name,
                "kind": entry.kind,
                "count": entry.count,
                "sites": [candidates.sites.names[one] for one in sites],
                "candidates": int(own.sum()),
                "channels": int(own[candidates.candidate_of_channel].sum()),
                "spacing_mm": entry.spacing / MM,
            }
        )
    return json_text(
        {
            "schema": SCHEMA,
            "version": __version__,
            "title": check.brief.title,
            "brief_sha256": check.brief.sha256,
            "goal": check.brief.goal.kind,
            "head": {
                "name": check.head.name,
                "length_mm": length,
                "breadth_mm": breadth,
                "circumference_mm": circumference,
                "sources": len(check.head.cortex),
                "cortex_cm2": check.head.cortex.areas.sum() / CM2,
            },
            "model": model_text(check),
            "regions": _regions(check),
            "stock": stock,
            "rules": rule_sentences(check),
            "kept": [names[one] for one in check.kept],
            "reference": None if check.reference is None else names[check.reference],
            "noise_figures": noise_figures(check.figures_of_noise),
            "notes": {"sites": check.candidates.notes, "head": check.head.notes},
        }
    )


def _regions(check: Check) -> list[dict[str, Any]]:
    return [
        {
            "name": region.name,
            "sources": len(region.members),
            "area_cm2": region.areas.sum() / CM2,
            "centre_mm": region.centre / MM,
            "least_depth_mm": depth / MM,
            "nearest_position": nearest,
            "nearest_position_off_mm": away / MM,
        }
        for region, (depth, nearest, away) in zip(check.regions, region_places(check), strict=True)
    ]
