"""Accuracy and speed of the boundary elements. Run: python tests/bench/boundary_elements.py [timing]

Writes results/boundary_elements.md and results/boundary_elements.png. Accuracy: three-layer spheres against the series
and the Sarvas formula, polyhedra of the spheres' volumes. Each timing runs in a process of its own with an empty cache,
so its peak memory is its own; kernels are compiled before. With `timing` the accuracy of the last run is kept.
"""

import datetime
import multiprocessing
import os
import platform
import resource
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

ROOT = Path(__file__).parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "tests" / "physics")]
os.environ["SCALPSITE_CACHE"] = tempfile.mkdtemp()

FREQUENCIES = (5, 7, 10, 16)
DEPTHS_MM = (2, 3, 5, 7, 10, 15, 20, 30, 40)
KINDS = ("EEG radial", "EEG tangential", "MEG normal axis", "MEG tangential axes")
TIMED = ((5, 1000, 10_000), (7, 1000, 10_000), (10, 1000, 2_500), (10, 1000, 10_000), (16, 1000, 10_000))


def accuracy(frequency):
    """(depth, kind, [median RDM, largest RDM, smallest MAG, largest MAG])."""
    from boundary_spheres import RADII, SIGMA, dipoles_at, directions, magnetometers, rdm_and_mag, sphere_model

    from layout.physics import layered_sphere, sarvas

    rng = np.random.default_rng(0)
    model = sphere_model(frequency)
    electrodes, (points, axes) = RADII[-1] * directions(rng, 120), magnetometers(rng, 80)
    on_scalp, outside = model.potentials_transfer(electrodes), model.field_transfer(points, axes)
    out = np.empty((len(DEPTHS_MM), len(KINDS), 4))
    third = len(points) // 3
    for d, depth in enumerate(DEPTHS_MM):
        sources, radial, tangential = dipoles_at(rng, depth * 1e-3, 100)
        pairs = [
            (
                model.lead_field(on_scalp, sources, moments),
                layered_sphere.electric_lead_field(electrodes, sources, RADII, SIGMA, moments=moments),
            )
            for moments in (radial, tangential)
        ]
        found = model.lead_field(outside, sources, tangential)
        exact = sarvas.magnetic_lead_field(points, axes, sources, moments=tangential)
        pairs += [(found[:third], exact[:third]), (found[third:], exact[third:])]
        for k, pair in enumerate(pairs):
            rdm, mag = rdm_and_mag(*pair)
            out[d, k] = np.median(rdm), rdm.max(), mag.min(), mag.max()
    return out


def timing(job, answers):
    from boundary_spheres import RADII, dipoles_at, directions, magnetometers, sphere_model

    frequency, sites, sources_wanted = job
    rng = np.random.default_rng(0)
    small = sphere_model(1)
    small.lead_field(small.potentials_transfer(RADII[-1:, None] * np.eye(3)[:1]), np.zeros((1, 3)))
    small.lead_field(small.field_transfer(0.1 * np.eye(3)[:1], np.eye(3)[:1]), np.zeros((1, 3)))
    seconds, spent = [], []

    def lap():
        usage = resource.getrusage(resource.RUSAGE_SELF)
        seconds.append(time.perf_counter())
        spent.append(usage.ru_utime + usage.ru_stime)

    lap()
    model = sphere_model(frequency)
    model.solved  # noqa: B018
    lap()
    electric = model.potentials_transfer(RADII[-1] * directions(rng, sites))
    magnetic = model.field_transfer(*magnetometers(rng, sites))
    lap()
    sources = dipoles_at(rng, 10e-3, sources_wanted)[0]
    gains = [model.lead_field(transfer, sources) for transfer in (electric, magnetic)]
    lap()
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024**2
    answers.put((np.diff(seconds), np.diff(spent), peak, sum(gain.nbytes for gain in gains) / 1024**3))


def alone(job):
    spawn = multiprocessing.get_context("spawn")
    answers = spawn.Queue()
    process = spawn.Process(target=timing, args=(job, answers))
    process.start()
    answer = answers.get()
    process.join()
    return answer


def figure(tables, path):
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt
    from boundary_spheres import RADII

    eccentricity = 1 - np.array(DEPTHS_MM) * 1e-3 / RADII[0]
    panels, axes = plt.subplots(2, len(KINDS), figsize=(14, 6), sharex=True, sharey="row")
    for k, kind in enumerate(KINDS):
        for shade, (frequency, table) in zip((0.75, 0.55, 0.3, 0.0), tables.items(), strict=True):
            label = f"3 x {10 * frequency**2 + 2:,} nodes"
            axes[0, k].semilogy(eccentricity, table[:, k, 0], "o-", ms=3, color=str(shade), label=label)
            axes[0, k].semilogy(eccentricity, table[:, k, 1], ":", color=str(shade))
            axes[1, k].fill_between(eccentricity, table[:, k, 2], table[:, k, 3], color=str(shade), alpha=0.5, lw=0)
        axes[0, k].axhline(0.03, color="C3", lw=0.8)
        axes[1, k].axhspan(0.95, 1.05, edgecolor="C3", facecolor="none", lw=0.8)
        axes[0, k].set_title(kind, fontsize=10)
        axes[1, k].set_xlabel("source radius / inner skull radius")
    axes[0, 0].set_ylabel("RDM* (line: median, dots: largest)")
    axes[1, 0].set_ylabel("MAG (smallest to largest)")
    axes[1, 0].set_ylim(0.85, 1.15)
    axes[0, 0].legend(fontsize=8)
    panels.tight_layout()
    panels.savefig(path, dpi=110)


def accuracy_text(tables):
    lines = [
        "## Accuracy against closed forms",
        "",
        "Spheres of 80, 85 and 92 mm, 0.33, 0.33/80 and 0.33 S/m; 120 electrodes, 80 three-axis magnetometers 6.5 mm",
        "above the scalp, 100 random sources per depth under the inner skull. RDM* median / largest; MAG range.",
        "",
        "| nodes | mean edge mm | depth mm | " + " | ".join(f"{kind} RDM* | MAG" for kind in KINDS) + " |",
        "|" + "---|" * (3 + 2 * len(KINDS)),
    ]
    for frequency, table in tables.items():
        nodes = 10 * frequency**2 + 2
        edge = 80 * np.sqrt(4 * np.pi / (2 * nodes - 4) * 4 / np.sqrt(3))
        for d, depth in enumerate(DEPTHS_MM):
            cells = [f"{a:.4f} / {b:.4f} | {c:.3f} to {e:.3f}" for a, b, c, e in table[d]]
            lines.append(f"| 3 x {nodes:,} | {edge:.1f} | {depth} | " + " | ".join(cells) + " |")
    frequencies = np.array(list(tables))
    deep = DEPTHS_MM.index(20)
    orders = [
        -np.polyfit(np.log(frequencies), np.log([tables[f][deep:, k, 0].mean() for f in frequencies]), 1)[0]
        for k in range(len(KINDS))
    ]
    said = ", ".join(f"{kind} {order:.1f}" for kind, order in zip(KINDS, orders, strict=True))
    lines += ["", f"Order of convergence in the edge length (median RDM*, 20 to 40 mm): {said}; expected 2.", ""]
    return lines


def timing_text():
    lines = [
        "## Time and memory",
        "",
        "Electrode sites and as many three-axis magnetometers, free sources; each row in its own process, empty cache.",
        "Wall-clock seconds (processor seconds): a busy machine lengthens the first, not the second.",
        "",
        "| nodes | sites | sources | assemble and solve | sensors | sources | total | peak GB | of which gain GB |",
        "|" + "---|" * 9,
    ]
    for job in TIMED:
        walls, cpus, peak, gain = alone(job)
        cells = [f"{wall:.1f} ({cpu:.1f})" for wall, cpu in zip([*walls, sum(walls)], [*cpus, sum(cpus)], strict=True)]
        frequency, sites, sources = job
        lines.append(
            f"| 3 x {10 * frequency**2 + 2:,} | {sites:,} | {sources:,} "
            f"| {' | '.join(cells)} | {peak:.2f} | {gain:.2f} |"
        )
        print(lines[-1], flush=True)
    return [*lines, ""]


def main():
    machine = f"{os.cpu_count()} cores, {platform.machine()}, Python {platform.python_version()}"
    path = ROOT / "results" / "boundary_elements.md"
    if sys.argv[1:] == ["timing"]:
        kept = path.read_text().split("## Time and memory")[0]
        path.write_text(kept + "\n".join(timing_text()))
        return
    lines = [
        "# Boundary elements",
        "",
        f"`python tests/bench/boundary_elements.py`, {machine}, {datetime.date.today()}.",
        "",
    ]
    tables = {frequency: accuracy(frequency) for frequency in FREQUENCIES}
    figure(tables, ROOT / "results" / "boundary_elements.png")
    lines += accuracy_text(tables)
    lines += ["![RDM and MAG against eccentricity](boundary_elements.png)", ""]
    print("\n".join(lines), flush=True)
    lines += timing_text()
    path.write_text("\n".join(lines))


if __name__ == "__main__":
    main()
