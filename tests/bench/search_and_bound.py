"""Time and certified gap of search and bound on the template head: the README's brief and harder variants of it.

Run `python tests/bench/search_and_bound.py`; it prints two tables and writes results/search_and_bound.md (about four
minutes). Small kernels are compiled before the clock starts (about 3 s on a fresh installation). Not a test: it asserts
nothing.
"""

from __future__ import annotations

import datetime
import os
import platform
import time
from dataclasses import replace
from pathlib import Path

import numpy as np

from layout.brief.objects import Brief
from layout.brief.parse import load_brief
from layout.design import Study, build_problem, lay_out_study
from layout.engine.model import LinearModel
from layout.engine.ranking import Ranking, rank_layouts
from layout.units import NAM

ROOT = Path(__file__).parents[2]
COUNTS = (4, 8, 16, 32)
PARTS = 100


def variants(brief: Brief) -> list[tuple[str, Brief]]:
    """The brief and variants with other regions, epochs, axes or spacing."""
    stock = replace(brief.stock[0], spacing=0.0)
    brief = replace(brief, stock=(stock,))
    spread = tuple(replace(region, coherent=False, moment=10 * NAM) for region in brief.regions)
    single = replace(brief.noise, averages=1)
    return [
        ("one sensor per site, coherent regions, 300 averages", brief),
        ("the same, heads of three axes (60 channels)", replace(brief, stock=(replace(stock, axes="three_axis"),))),
        ("the same, normal axes only", replace(brief, stock=(replace(stock, axes="normal"),))),
        ("the same, 20 mm spacing", replace(brief, stock=(replace(stock, spacing=20e-3),))),
        ("the same, single epochs", replace(brief, noise=single)),
        ("regions without coherence, 10 nAm, 300 averages", replace(brief, regions=spread)),
        ("regions without coherence, 10 nAm, single epochs", replace(brief, regions=spread, noise=single)),
    ]


def ranked(study: Study, model: LinearModel, count: int, parts: int) -> tuple[Ranking, float]:
    """The first layout of `count` sensors and the seconds that search and bounds took."""
    feasible = replace(study.feasible, counts=np.array([count]), least=np.array([count]))
    search = study.brief.search
    start = time.perf_counter()
    ranking = rank_layouts(
        model, feasible, places=study.candidates.site, starts=search.starts, seed=search.seed, parts=parts
    )
    return ranking, time.perf_counter() - start


def gap(limit: float, value: float) -> str:
    """Distance of a value to a limit in per cent of the limit."""
    return f"{max(0.0, 100 * (limit - value) / limit):.2f}"


def root_row(label: str, study: Study, model: LinearModel) -> str:
    """20 sensors, search and root bounds only."""
    ranking, seconds = ranked(study, model, 20, parts=0)
    best = ranking.layouts[0]
    sizes = f"{len(study.candidates.sites)} | {len(study.candidates)} | {model.n_channels}"
    dimensions = f"{model.target.shape[1]}, {model.nuisance.shape[1]}"
    gaps = f"{best.value:.3f} | {best.bound:.3f} | {best.gap_percent:.2f}"
    return f"| {label} | {sizes} | {dimensions} | {gaps} | {seconds:.1f} |"


def count_row(label: str, count: int, study: Study, model: LinearModel) -> str:
    """Another count, with branch and bound."""
    ranking, seconds = ranked(study, model, count, PARTS)
    best = ranking.layouts[0]
    by_rank = gap(min(ranking.by_rank.value, ranking.root.value), best.value) if ranking.by_rank else "-"
    parts = ranking.proof.nodes if ranking.proof else 0
    gaps = f"{gap(ranking.root.value, best.value)} | {by_rank} | {best.gap_percent:.2f}"
    return f"| {label} | {count} | {best.value:.3f} | {gaps} | {parts} | {seconds:.1f} |"


def main() -> None:
    """Print the tables and keep them."""
    brief = load_brief(ROOT / "configs" / "readme.toml")
    roots, counts = [], []
    for number, (label, variant) in enumerate(variants(brief)):
        study = lay_out_study(variant)
        model = build_problem(study).model
        ranked(study, model, 4, parts=1)
        roots.append(root_row(label, study, model))
        if number in (0, 3, 5):
            counts += [count_row(label, count, study, model) for count in COUNTS]
    machine = (
        f"{os.cpu_count()} cores, {platform.processor() or platform.machine()}, Python {platform.python_version()}"
    )
    text = "\n".join(
        [
            "# Search and bound on the template head",
            "",
            f"`python tests/bench/search_and_bound.py`, {machine}, {datetime.date.today()}.",
            "",
            "20 magnetometers: greedy, 20 exchange starts and the root bounds; lead fields are not in the time.",
            "",
            "| variant of the brief | sites | candidates | channels | target, noise | bits | bound | gap % | s |",
            "|" + "---|" * 9,
            *roots,
            "",
            f"Other counts, with up to {PARTS} parts of branch and bound: gap of the plain and of the rank-aware",
            "relaxation (- where it cannot be lower), and in the end.",
            "",
            "| variant of the brief | sensors | bits | plain % | rank-aware % | gap % | parts | s |",
            "|" + "---|" * 8,
            *counts,
            "",
        ]
    )
    print(text)
    (ROOT / "results" / "search_and_bound.md").write_text(text)


if __name__ == "__main__":
    main()
