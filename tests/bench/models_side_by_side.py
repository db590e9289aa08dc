"""The template by boundary elements and by layered spheres: how much lead fields, choices and values differ.

Run `python tests/bench/models_side_by_side.py`; it prints a table and writes results/models.md (about two minutes).
Each brief is designed with either model; either choice is then judged by either. Not a test: it asserts nothing.
"""

from __future__ import annotations

import datetime
import os
import platform
from dataclasses import replace
from pathlib import Path

import numpy as np

from layout.brief.objects import Brief
from layout.brief.parse import load_brief
from layout.design import build_problem, lay_out_study
from layout.engine.information import information
from layout.engine.ranking import rank_layouts
from layout.units import MM

ROOT = Path(__file__).parents[2]
BRIEFS = ("cap", "helmet", "readme")


def row(name: str, brief: Brief) -> str:
    """One brief under both models."""
    chosen, models, studies = {}, {}, {}
    for model in ("boundary_elements", "spheres"):
        study = lay_out_study(replace(brief, head=replace(brief.head, model=model)))
        models[model], studies[model] = build_problem(study).model, study
        ranking = rank_layouts(models[model], study.feasible, places=study.candidates.site, starts=10)
        chosen[model] = ranking.layouts[0].chosen
    by, ball = (models[model] for model in ("boundary_elements", "spheres"))
    mine, other = (chosen[model] for model in ("boundary_elements", "spheres"))
    candidates = studies["spheres"].candidates
    same = int(np.isin(candidates.site[mine], candidates.site[other]).sum())
    points = candidates.sites.positions
    away = np.linalg.norm(points[candidates.site[mine]][:, None] - points[candidates.site[other]][None], axis=2).min(1)
    true = information(by, mine)
    lost = 100 * (1 - information(by, other) / true)
    return (
        f"| {name} | {true:.3f} | {information(ball, other):.3f} | {same} of {len(mine)} | "
        f"{np.median(away) / MM:.0f}, {away.max() / MM:.0f} | {information(by, other):.3f} ({lost:.1f} %) |"
    )


def main() -> None:
    """Print the table and keep it."""
    rows = []
    for name in BRIEFS:
        brief = load_brief(ROOT / "configs" / f"{name}.toml")
        rows.append(row(name, brief))
    text = "\n".join(
        [
            "# The template by boundary elements and by layered spheres",
            "",
            f"`python tests/bench/models_side_by_side.py`, {os.cpu_count()} cores, "
            f"{platform.processor() or platform.machine()}, Python {platform.python_version()}, "
            f"{datetime.date.today()}.",
            "",
            "Bits of the layout chosen with either model, by that model; sites in common; distance from each site",
            "chosen by boundary elements to the nearest chosen by spheres (median, largest, mm); and what the spheres'",
            "choice is worth by boundary elements (in brackets: below the choice made with them).",
            "",
            "| brief | boundary elements | spheres | same sites | apart | spheres' choice by boundary elements |",
            "|" + "---|" * 6,
            *rows,
            "",
        ]
    )
    print(text)
    (ROOT / "results" / "models.md").write_text(text)


if __name__ == "__main__":
    main()
