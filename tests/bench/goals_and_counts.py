"""Gap and time of both goals, electrodes and magnetometers, with and without spacing, from 4 to 64 sensors.

Run `python tests/bench/goals_and_counts.py [SECONDS]`; it writes results/goals_and_counts.md. Each row may take SECONDS
(default 15) of search, bound and proof; lead fields are not in the time. Not a test: it asserts nothing.
"""

from __future__ import annotations

import datetime
import os
import platform
import sys
import time
from dataclasses import replace
from pathlib import Path

import numpy as np

from layout.brief.objects import Brief
from layout.brief.parse import load_brief
from layout.design import Study, build_problem, lay_out_study
from layout.design.objective import Objective, build_objective
from layout.engine.ranking import rank_layouts

ROOT = Path(__file__).parents[2]
COUNTS = (4, 8, 16, 32, 64)
PARTS = 100_000
PITCH = 18e-3  # [m] of the magnetometers' grid: about 250 sites of three axes


def variants() -> list[tuple[str, Brief]]:
    """Electrodes of the cap's study and magnetometers of the README's, each with 20 mm spacing and without."""
    cap, readme = (load_brief(ROOT / "configs" / f"{name}.toml") for name in ("cap", "readme"))
    electrodes = replace(cap.stock[0], sites=replace(cap.stock[0].sites, family="10-5"), count=64)
    coils = replace(readme.stock[0], sites=replace(readme.stock[0].sites, grid_pitch=PITCH), count=64)
    found = []
    for label, brief, entry in (("electrodes", cap, electrodes), ("magnetometers", readme, coils)):
        for spacing in (0.0, 20e-3):
            stock = (replace(entry, spacing=spacing),)
            found.append((f"{label}, {'20 mm apart' if spacing else 'no spacing'}", replace(brief, stock=stock)))
    return found


def cell(study: Study, objective: Objective, count: int, seconds: float) -> str:
    """Value, gap and time of one count."""
    feasible = replace(study.feasible, counts=np.array([count]), least=np.array([count]))
    start = time.perf_counter()
    ranking = rank_layouts(
        objective.goal, feasible, places=study.candidates.site, parts=PARTS, time_allowance=seconds, starts=10
    )
    best = ranking.layouts[0]
    parts = best.proof.nodes if best.proof else 0
    value, bound = objective.printed(best.value), objective.printed(best.bound)
    spent = time.perf_counter() - start
    return f"{count} | {value:.2f} | {bound:.2f} | {best.gap_percent:.2f} | {parts} | {spent:.1f} |"


def main() -> None:
    """Print the table and keep it."""
    seconds = float(sys.argv[1]) if len(sys.argv) > 1 else 15.0
    rows = []
    for label, brief in variants():
        for goal in ("information", "localisation"):
            asked = replace(brief, goal=replace(brief.goal, kind=goal))
            study = lay_out_study(asked)
            objective = build_objective(study, (build_problem(study),))
            cell(study, objective, 4, 1.0)
            for count in COUNTS:
                rows.append(f"| {label} | {len(study.candidates)} | {goal}, {objective.unit} | ")
                rows[-1] += cell(study, objective, count, seconds)
                print(rows[-1], flush=True)
    text = "\n".join(
        [
            "# Both goals, electrodes and magnetometers, 4 to 64 sensors",
            "",
            f"`python tests/bench/goals_and_counts.py {seconds:g}`, {os.cpu_count()} cores, "
            f"{platform.processor() or platform.machine()}, Python {platform.python_version()}, "
            f"{datetime.date.today()}.",
            "",
            f"Boundary elements; up to {seconds:g} s of search, bound and branch and bound for each row, so some "
            "bounds of the localisation error are cut short by the clock.",
            "",
            "| sensors | candidates | goal | count | value | bound | gap % | parts | s |",
            "|" + "---|" * 9,
            *rows,
            "",
        ]
    )
    (ROOT / "results" / "goals_and_counts.md").write_text(text)


if __name__ == "__main__":
    main()
