"""A plan of cells that take tenths of a second: two sphere heads, few sites; work that sleeps or ends its worker."""

import os
import signal
import time
from pathlib import Path

from studies import BAND, SPHERE, TWO_REGIONS, cups

from layout.brief.parse_plan import load_plan

QUICK = "[search]\nstarts = 2\nproof_parts = 5\n"
BRIEF = "\n".join(['schema = 1\ntitle = "A study"', SPHERE, TWO_REGIONS, cups(6, 'family = "10-20"'), BAND, QUICK])
PLAN = """\
schema = 1
title = "Two heads, two counts, two noise levels"
brief = "study.toml"
[cross]
heads = ["small", "as stated"]
counts = [4, 6]
noise_factors = [1, 0.3]
[[heads]]
name = "small"
kind = "sphere"
source_mesh = "coarse"
radii_mm = [70, 75, 80]
[[layouts]]
name = "for the cell"
designed_for = "cell"
[[layouts]]
name = "for the brief"
designed_for = "brief"
[[layouts]]
name = "six of ours"
sites = ["Fz", "Cz", "Pz", "P3", "C3", "C4"]
"""
SLEEP = 0.4  # [s] so that a worker can be ended in the midst of a cell


def written(folder: Path, plan: str = PLAN, brief: str = BRIEF) -> Path:
    """The plan and its brief in a folder."""
    (folder / "study.toml").write_text(brief)
    (folder / "plan.toml").write_text(plan)
    return folder / "plan.toml"


def plan_of(folder: Path, plan: str = PLAN, brief: str = BRIEF):
    """The same, read."""
    return load_plan(written(folder, plan, brief))


def slow_work(order):
    """A cell that takes a while."""
    from layout.design.many.work import work

    time.sleep(SLEEP)
    return work(order)


def deadly_work(order):
    """A cell of 6 sensors on the small head under the least noise ends whatever worker takes it."""
    from layout.design.many.work import work

    if order.cell.head == "small" and order.cell.amount == 6 and order.cell.noise_factor < 1:
        os.kill(os.getpid(), signal.SIGKILL)
    return work(order)
