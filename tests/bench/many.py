"""Runs the plan configs/many.toml on three workers and on one, and keeps results/many.md.

Run `python tests/bench/many.py`, twice on a new machine: heads and their solved matrices come from the user's cache,
which the first run fills. Each run is a fresh process of the command in a fresh folder.
"""

from __future__ import annotations

import csv
import datetime
import os
import platform
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).parents[2]
PLAN = ROOT / "configs" / "many.toml"
WORKERS = (3, 1)
COLUMNS = 80  # of the kept terminal output
CORES = os.cpu_count()
BUSY = "The machine was busy with other work, unevenly between the two runs: these times do not compare the workers."


def run(workers: int, out: Path) -> tuple[float, str, float]:
    """Seconds of the whole command, what it printed, and the seconds that its cells took on their workers."""
    command = [sys.executable, "-m", "layout", "many", str(PLAN), "--workers", str(workers), "--out", str(out)]
    env = {**os.environ, "COLUMNS": str(COLUMNS), "PYTHONIOENCODING": "utf-8"}
    start = time.perf_counter()
    done = subprocess.run(command, cwd=ROOT, env=env, check=True, stdout=subprocess.PIPE, encoding="utf-8")
    seconds = time.perf_counter() - start
    with (out / "times.csv").open() as file:
        inside = sum(float(row["seconds"]) for row in csv.DictReader(file))
    return seconds, done.stdout, inside


def cells(out: Path) -> list[dict[str, str]]:
    """Rows of many.csv."""
    with (out / "many.csv").open() as file:
        return list(csv.DictReader(file))


def main() -> None:
    """Run all and keep results/many.md."""
    with tempfile.TemporaryDirectory() as folder:
        load = os.getloadavg()[0]
        found = {workers: run(workers, Path(folder) / f"of-{workers}") for workers in WORKERS}
        rows = cells(Path(folder) / f"of-{WORKERS[0]}")
        if any(cells(Path(folder) / f"of-{workers}") != rows for workers in WORKERS):
            raise RuntimeError("the tables differ between numbers of workers")
    count = len({row["cell"] for row in rows})
    serial = found[1][0]
    machine = f"{CORES} cores, {platform.machine()}, Python {platform.python_version()}"
    printed = "\n".join(line.rstrip() for line in found[WORKERS[0]][1].splitlines()[:-1])
    lines = [
        "# Many cells at once",
        "",
        f"`python tests/bench/many.py`, {machine}, {datetime.date.today()}; load by others before: {load:.1f}.",
        f"`layout many configs/many.toml`: {count} cells (3 heads, 3 counts, 3 noise levels), 2 layouts in each.",
        "Whole command, imports and start of the workers included; the same bytes of tables from both.",
        "",
        "| workers | s | cells per second | against one worker | s of a cell on its worker, mean |",
        "|---|---|---|---|---|",
        *(
            f"| {workers} | {seconds:.0f} | {count / seconds:.2f} | {serial / seconds:.2f} | {inside / count:.1f} |"
            for workers, (seconds, _, inside) in found.items()
        ),
        "",
        f"There are {CORES} cores here, so that more than {CORES} workers cannot be more than {CORES} times as fast.",
        *([BUSY] if load > CORES / 2 else []),
        "",
        "```text",
        printed,
        "```",
        "",
    ]
    text = "\n".join(lines)
    print(text)
    (ROOT / "results" / "many.md").write_text(text, encoding="utf-8")


if __name__ == "__main__":
    main()
