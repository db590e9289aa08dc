"""Runs every brief in configs/ and keeps the small tables in results/, with the time that each took.

Run `python tests/bench/briefs.py`. Each brief is a fresh process of the command itself, so the times are what a user
waits for, imports included; the head comes from the user's cache (building it takes about 3 s more, once).
"""

from __future__ import annotations

import datetime
import json
import os
import platform
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).parents[2]
KEPT = (
    "ranking.csv",
    "curve.csv",
    "methods.txt",
    *(f"layout-1/{name}.csv" for name in ("sensors", "placement", "sheet", "helmet-poses")),
    "layout-1/bids/sub-plan/eeg/sub-plan_electrodes.tsv",
)
PICTURE = "layout-1/scalp.png"  # kept for the README's brief only
COLUMNS = 100  # of the kept terminal output


def run(brief: Path) -> str:
    """Run one brief, keep its small tables, and return its line of the table."""
    with tempfile.TemporaryDirectory() as folder:
        out = Path(folder).resolve() / brief.stem
        start = time.perf_counter()
        command = [sys.executable, "-m", "layout", "design", str(brief), "--out", str(out)]
        env = {**os.environ, "COLUMNS": str(COLUMNS), "PYTHONIOENCODING": "utf-8"}
        printed = subprocess.run(
            command, cwd=ROOT, env=env, check=True, stdout=subprocess.PIPE, encoding="utf-8"
        ).stdout
        seconds = time.perf_counter() - start
        keep = ROOT / "results" / brief.stem
        shutil.rmtree(keep / "layout-1", ignore_errors=True)  # evidence.py keeps its own tables beside it
        keep.mkdir(parents=True, exist_ok=True)
        for name in [*KEPT, *([PICTURE] if brief.stem == "readme" else [])]:
            if (out / name).exists():
                (keep / name).parent.mkdir(parents=True, exist_ok=True)
                shutil.copy(out / name, keep / name)
        if brief.stem == "readme":  # as without --out
            text = printed.replace(str(out), f"results/runs/{brief.stem}")
            lines = (line.rstrip() for line in text.splitlines())
            (keep / "terminal.txt").write_text("\n".join([*lines, ""]), encoding="utf-8")
        ranking = json.loads((out / "ranking.json").read_text())
    best = ranking["layouts"][0]
    baselines = {one["name"]: one["value"] for one in ranking["baselines"]}
    even = best["equals_even_spread_of"] or f"more than {best['even_spread_limit']}"
    return (
        f"| {brief.name} | {len(best['sensors'])} | {best['value']:.2f} | {best['bound']:.2f} | "
        f"{best['gap_percent']:.2f} | {baselines['even spread']:.2f} | {baselines.get('standard positions', 0):.2f} | "
        f"{baselines['best single channels']:.2f} | {baselines['random']:.2f} | {even} | {seconds:.0f} |"
    )


def main() -> None:
    """Run all briefs and keep results/briefs.md."""
    plans = {"many.toml"}
    rows = [run(brief) for brief in sorted((ROOT / "configs").glob("*.toml")) if brief.name not in plans]
    machine = (
        f"{os.cpu_count()} cores, {platform.processor() or platform.machine()}, Python {platform.python_version()}"
    )
    head = "| brief | sensors | bits | bound | gap % | even spread | standard | singles | random | equals even | s |"
    text = "\n".join(
        [
            "# The briefs in configs/",
            "",
            f"`python tests/bench/briefs.py`, {machine}, {datetime.date.today()}.",
            "Bits per sample of the first layout, its certified bound, what as many sensors give without a search,",
            "and the size of the even spread that does as well; seconds of the whole command.",
            "",
            head,
            "|" + "---|" * 11,
            *rows,
            "",
        ]
    )
    print(text)
    (ROOT / "results" / "briefs.md").write_text(text)


if __name__ == "__main__":
    main()
