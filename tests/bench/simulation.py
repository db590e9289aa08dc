"""How long 1,000 dipole fits take: 20 electrodes or magnetometers, every source of the cortex as the starting grid.

Run `python tests/bench/simulation.py` from the root; it keeps results/simulation.md. In boundary elements the same fits
are made twice in the same run: with the quick lead fields of layout/evidence/simulation_boundary.py, and with those
that all other commands use and differences along three axes, as fits were made before. Nothing is compared with
another program.
"""

from __future__ import annotations

import datetime
import os
import platform
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent))
from studies import BAND, HANDS, TWO_REGIONS, brief_of, coils, cups

from layout.design import build_problem, lay_out_study
from layout.evidence.dipole_fit import Forward, fit_dipoles
from layout.evidence.simulation import ChannelNoise, plant
from layout.evidence.simulation_boundary import STEP
from layout.evidence.simulation_forward import fields_at, fields_on, forward_of, held_inside, some_channels
from layout.physics.boundary_cortex import BoundaryCortex
from layout.physics.channels import Channels

ROOT = Path(__file__).parents[2]
FITS = 1000
NOISE = 0.1
SPHERE = '[head]\nkind = "sphere"\nsource_mesh = "fine"\n'
TEMPLATE = '[head]\nkind = "template"\nmodel = "{model}"\n'
ELEMENTS, COILS = TEMPLATE.format(model="boundary_elements"), coils(20, more="standoff_mm = 6.5\n")
CASES = {
    "sphere head, electrodes": (SPHERE, TWO_REGIONS, cups(20)),
    "sphere head, magnetometers": (SPHERE, TWO_REGIONS, coils(20)),
    "template, spheres, electrodes": (TEMPLATE.format(model="spheres"), HANDS, cups(20)),
    "template, boundary elements, electrodes": (ELEMENTS, HANDS, cups(20)),
    "template, boundary elements, magnetometers": (ELEMENTS, HANDS, COILS),
}
BRIEFS = ("readme", "cap", "helmet")
FACTORS = "1,0.1"


def plain_forward(channels: Channels, cortex: BoundaryCortex, whitener: np.ndarray) -> Forward:
    """The lead fields of all other commands, and one-sided differences along three axes."""

    def gain(places: np.ndarray) -> np.ndarray:
        return np.tensordot(whitener, channels.lead_field_at(cortex, places, None), 1)

    def slopes(places: np.ndarray, moments: np.ndarray, gain_there: np.ndarray) -> np.ndarray:
        moved = gain((places[:, None] + STEP * np.eye(3)).reshape(-1, 3))
        apart = moved.reshape(len(moved), len(places), 3, 3) - gain_there[:, :, None]
        return np.einsum("nmdj,mj->nmd", apart, moments) / STEP

    return Forward(gain, slopes, lambda places: held_inside(cortex, places))


def timed(name: str, tables: tuple[str, ...]) -> list[str]:
    """Lines of the table for one head and its sensors."""
    study = lay_out_study(brief_of(*tables, BAND + "averages = 100\n"))
    problem, rng = build_problem(study), np.random.default_rng(1)
    rows = problem.model.channels_of(np.linspace(0, len(study.candidates) - 1, 20).astype(int))
    noise = ChannelNoise(problem.sensor_sd[rows], problem.model.nuisance[rows], problem.model.offset[rows])
    channels, whitener = some_channels(problem.scenario.channels, rows), noise.whitener()
    plants = plant(study.head, study.regions, FITS, 2e-3, rng)
    places = held_inside(study.cortex, plants.places)
    data = np.einsum("ink,nk->in", fields_at(channels, study.cortex, places, plants.moments).gain, plants.moments)
    data = whitener @ data + NOISE * whitener @ noise.draw(FITS, rng)
    grid = study.head.cortex.positions
    ways = {name: (forward_of(channels, study.cortex, whitener), lambda: fields_on(channels, study.cortex, None))}
    if isinstance(study.cortex, BoundaryCortex):
        plain = plain_forward(channels, study.cortex, whitener)
        ways["the same, as before"] = (plain, lambda: channels.lead_field_at(study.cortex, grid, None))
    lines = []
    for called, (forward, field) in ways.items():
        few = np.tensordot(whitener, fields_at(channels, study.cortex, places[:1], plants.moments[:1]).gain, 1)
        fit_dipoles(forward, places[:1], few, few[:, :, 0])  # compiled before the clock starts
        load, clock, busy = os.getloadavg()[0], [time.perf_counter()], [time.process_time()]
        grid_gain = np.tensordot(whitener, field(), 1)
        clock.append(time.perf_counter())
        fits = fit_dipoles(forward, grid, grid_gain, data, NOISE)
        clock.append(time.perf_counter())
        busy.append(time.process_time())
        error = 1e3 * float(np.sqrt(((fits.places - places) ** 2).sum(axis=1).mean()))
        fields, fitting = np.diff(clock)
        lines.append(
            f"| {called} | {len(grid):,} | {fields:.1f} | {fitting:.1f} | {fields + fitting:.1f} | "
            f"{busy[1] - busy[0]:.1f} | {error:.2f} | {load:.1f} |"
        )
        print(lines[-1], flush=True)
    return lines


def command(stem: str) -> str:
    """The line of a whole `layout simulate` of a brief in configs/."""
    with tempfile.TemporaryDirectory() as folder:
        load, before, start = os.getloadavg()[0], resource.getrusage(resource.RUSAGE_CHILDREN), time.perf_counter()
        words = [sys.executable, "-m", "layout", "simulate", f"configs/{stem}.toml", "--noise", FACTORS]
        subprocess.run([*words, "--out", f"{folder}/out"], cwd=ROOT, check=True, capture_output=True)
        seconds, after = time.perf_counter() - start, resource.getrusage(resource.RUSAGE_CHILDREN)
        tables = (Path(folder) / "out" / "simulation.csv").read_text(encoding="utf-8").splitlines()
    runs = sum(1 for line in tables if ",all," in line)
    busy = after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime
    line = f"| {stem}.toml | {runs} | {seconds:.0f} | {seconds / runs:.1f} | {busy:.0f} | {load:.1f} |"
    print(line, flush=True)
    return line


def page(fits: list[str], commands: list[str]) -> str:
    """The whole page of the lines that are there."""
    machine = f"{os.cpu_count()} cores, {platform.machine()}, Python {platform.python_version()}"
    lines = [
        "# Simulated dipole fits",
        "",
        f"`python tests/bench/simulation.py`, {machine}, {datetime.date.today()}. Seconds are by the clock; where",
        "the load before a run was well above 0 others were using the machine, and the processors' own seconds (of",
        "all cores together) say more.",
        "",
        f"{FITS:,} fits of 20 sensors at {NOISE:g} of the noise. Lead fields: to every source of the cortex. As",
        "before: with the lead fields of all other commands and differences along three axes, and the same fit.",
        "",
        "| head and sensors | sources | lead fields s | fits s | together s | s of the processors | rms error mm | "
        "load before |",
        "|" + "---|" * 8,
        *fits,
        "",
    ]
    if commands:
        lines += [
            f"Whole commands, `layout simulate configs/<brief> --noise {FACTORS}`: search of the layout, lead fields",
            f"and noise included, then {FITS:,} fits for each of three layouts at each noise.",
            "",
            f"| brief | runs of {FITS:,} fits | s by the clock | s a run | s of the processors | load before |",
            "|" + "---|" * 6,
            *commands,
            "",
        ]
    return "\n".join(lines)


def main() -> None:
    """Run all and keep results/simulation.md, as far as it is, after each."""
    fits, commands = [], []
    for name, tables in CASES.items():
        fits += timed(name, tables)
        (ROOT / "results" / "simulation.md").write_text(page(fits, commands), encoding="utf-8")
    for stem in BRIEFS:
        commands.append(command(stem))
        (ROOT / "results" / "simulation.md").write_text(page(fits, commands), encoding="utf-8")


if __name__ == "__main__":
    main()
