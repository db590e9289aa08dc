"""How long 1,000 dipole fits take: 20 electrodes or magnetometers, every source of the cortex as the starting grid.

Run from the root: python tests/bench/simulation.py. Prints a table; nothing is compared with another program.
"""

from __future__ import annotations

import sys
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent))
from studies import BAND, HANDS, TWO_REGIONS, brief_of, coils, cups

from layout.design import build_problem, lay_out_study
from layout.evidence.dipole_fit import fit_dipoles
from layout.evidence.simulation import ChannelNoise, plant
from layout.evidence.simulation_forward import fields_at, forward_of, held_inside, some_channels

FITS = 1000
SPHERE = '[head]\nkind = "sphere"\nsource_mesh = "fine"\n'
TEMPLATE = '[head]\nkind = "template"\nmodel = "{model}"\n'
CASES = {
    "sphere head, electrodes": (SPHERE, TWO_REGIONS, cups(20)),
    "sphere head, magnetometers": (SPHERE, TWO_REGIONS, coils(20)),
    "template, spheres, electrodes": (TEMPLATE.format(model="spheres"), HANDS, cups(20)),
    "template, boundary elements, electrodes": (TEMPLATE.format(model="boundary_elements"), HANDS, cups(20)),
}


def timed(tables: tuple[str, ...]) -> tuple[int, list[float], float]:
    """(sources, seconds for lead fields to them and for the fits, rms error in mm at a tenth of the noise)."""
    study = lay_out_study(brief_of(*tables, BAND + "averages = 100\n"))
    problem, rng = build_problem(study), np.random.default_rng(1)
    rows = problem.model.channels_of(np.linspace(0, len(study.candidates) - 1, 20).astype(int))
    noise = ChannelNoise(problem.sensor_sd[rows], problem.model.nuisance[rows], problem.model.offset[rows])
    channels, whitener = some_channels(problem.scenario.channels, rows), noise.whitener()
    forward = forward_of(channels, study.cortex, whitener)
    plants = plant(study.head, study.regions, FITS, 2e-3, rng)
    places = held_inside(study.cortex, plants.places)
    gain = np.tensordot(whitener, fields_at(channels, study.cortex, places[:1], plants.moments[:1]).gain, 1)
    fit_dipoles(forward, places[:1], gain, gain[:, :, 0])  # compiled before the clock starts
    data = np.einsum("ink,nk->in", forward.gain(places), plants.moments)
    data += 0.1 * whitener @ noise.draw(FITS, rng)
    grid = study.head.cortex.positions
    clock = [time.perf_counter()]
    grid_gain = forward.gain(grid)
    clock.append(time.perf_counter())
    fits = fit_dipoles(forward, grid, grid_gain, data, 0.1)
    clock.append(time.perf_counter())
    error = np.sqrt(((fits.places - places) ** 2).sum(axis=1).mean())
    return len(grid), list(np.diff(clock)), 1e3 * float(error)


def main() -> None:
    """Print the table."""
    print(f"| head and sensors | sources | lead fields [s] | {FITS:,} fits [s] | together [s] | rms error [mm] |")
    print("|---|---|---|---|---|---|")
    for name, tables in CASES.items():
        sources, (fields, fits), error = timed(tables)
        print(f"| {name} | {sources:,} | {fields:.1f} | {fits:.1f} | {fields + fits:.1f} | {error:.2f} |", flush=True)


if __name__ == "__main__":
    main()
