"""Time and certified gap of search and bound on the template head: the README's brief and harder variants of it.

Run `python tests/bench/search_and_bound.py`; it prints the table and writes results/search_and_bound.md. Small kernels
are compiled once before the clock starts (about 3 s on a fresh installation). Not a test: it asserts nothing.
"""

from __future__ import annotations

import datetime
import os
import platform
import time
from dataclasses import replace
from pathlib import Path

from layout.brief.objects import Brief
from layout.brief.parse import load_brief
from layout.design import build_problem, lay_out_study
from layout.engine.ranking import rank_layouts
from layout.units import NAM

ROOT = Path(__file__).parents[2]


def variants(brief: Brief) -> list[tuple[str, Brief]]:
    """The brief with other regions, epochs, axes or spacing."""
    stock = brief.stock[0]
    spread = tuple(replace(region, coherent=False, moment=10 * NAM) for region in brief.regions)
    single = replace(brief.noise, averages=1)
    return [
        ("as it is: coherent regions, 300 averages", brief),
        ("the same, heads of three axes (60 channels)", replace(brief, stock=(replace(stock, axes="three_axis"),))),
        ("the same, normal axes only", replace(brief, stock=(replace(stock, axes="normal"),))),
        ("the same, 20 mm spacing", replace(brief, stock=(replace(stock, spacing=20e-3),))),
        ("the same, single epochs", replace(brief, noise=single)),
        ("regions without coherence, 10 nAm, 300 averages", replace(brief, regions=spread)),
        ("regions without coherence, 10 nAm, single epochs", replace(brief, regions=spread, noise=single)),
    ]


def row(label: str, brief: Brief) -> str:
    """One line of the table."""
    study = lay_out_study(brief)
    problem = build_problem(study)
    start = time.perf_counter()
    ranking = rank_layouts(
        problem.model, study.feasible, places=study.candidates.site, starts=brief.search.starts, seed=brief.search.seed
    )
    seconds = time.perf_counter() - start
    best = ranking.layouts[0]
    sizes = f"{len(study.candidates.sites)} | {len(study.candidates)} | {problem.model.n_channels}"
    dimensions = f"{problem.model.target.shape[1]}, {problem.model.nuisance.shape[1]}"
    return (
        f"| {label} | {sizes} | {dimensions} | {best.value:.3f} | {best.bound:.3f} | "
        f"{best.gap_percent:.2f} | {seconds:.1f} |"
    )


def main() -> None:
    """Print the table and keep it."""
    brief = load_brief(ROOT / "configs" / "readme.toml")
    rows = [row(label, variant) for label, variant in [("", brief), *variants(brief)]][1:]
    machine = (
        f"{os.cpu_count()} cores, {platform.processor() or platform.machine()}, Python {platform.python_version()}"
    )
    text = "\n".join(
        [
            "# Search and bound on the template head, 20 magnetometers",
            "",
            f"`python tests/bench/search_and_bound.py`, {machine}, {datetime.date.today()}.",
            "Greedy, 20 exchange starts and the root bound together; lead fields and noise are not in the time.",
            "",
            "| variant of the brief | sites | candidates | channels | target, noise | bits | bound | gap % | s |",
            "|---|---|---|---|---|---|---|---|---|",
            *rows,
            "",
        ]
    )
    print(text)
    (ROOT / "results" / "search_and_bound.md").write_text(text)


if __name__ == "__main__":
    main()
