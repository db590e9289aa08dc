"""Time and memory of lead fields, 1,000 sites x 10,000 sources. Run: python tests/bench/lead_field_speed.py

Each row runs in a process of its own, so its peak memory is its own; a small call first takes the compiled
kernels from the cache. The last column is the same work in plain numpy (series or formula written out on
whole arrays), timed on 1 % of the sources in the same process and scaled up.
"""

import datetime
import multiprocessing
import os
import platform
import resource
import sys
import time
from pathlib import Path

import numpy as np

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT))
SITES, SOURCES = 1_000, 10_000
RADII, CONDUCTIVITIES = np.array([79e-3, 80e-3, 85e-3, 90e-3]), np.array([0.3, 1.5, 0.015, 0.3])


def directions(rng, n):
    v = rng.normal(size=(n, 3))
    return v / np.linalg.norm(v, axis=1, keepdims=True)


def plain_series(unit, sources):
    """Free EEG lead field (n, m, 3) with whole-array recursions, as many terms as the outermost source
    needs."""
    from layout.physics.layered_sphere import degree_factors

    radius = np.linalg.norm(sources, axis=1)
    towards = sources / radius[:, None]
    c, x = unit @ towards.T, radius / RADII[-1]
    n_terms = int(np.log(1e-11) / np.log(x.max()))
    factors = degree_factors(RADII, CONDUCTIVITIES, n_terms)
    before, now, slope = np.ones_like(c), c, np.ones_like(c)
    radial, tangential = factors[0] * c, np.full_like(c, factors[0])
    for n in range(2, n_terms + 1):
        before, now, slope = now, ((2 * n - 1) * c * now - (n - 1) * before) / n, c * slope + n * now
        weight = factors[n - 1] * x ** (n - 1)
        radial = radial + n * weight * now
        tangential = tangential + weight * slope
    gain = (radial - c * tangential)[:, :, None] * towards + tangential[:, :, None] * unit[:, None]
    return gain / (4 * np.pi * RADII[-1] ** 2)


def plain_sarvas(points, axes, sources):
    """Free magnetic lead field (n, m, 3) on whole arrays."""
    r, r0, n = points[:, None], sources[None], axes[:, None]
    a_vec = r - r0
    a, r_len = np.linalg.norm(a_vec, axis=2, keepdims=True), np.linalg.norm(r, axis=2, keepdims=True)
    f = a * (r_len * a + r_len**2 - np.sum(r * r0, axis=2, keepdims=True))
    a_r = np.sum(a_vec * r, axis=2, keepdims=True) / a
    grad = (a * a / r_len + a_r + 2 * a + 2 * r_len) * r - (a + 2 * r_len + a_r) * r0
    along = np.sum(grad * n, axis=2, keepdims=True)
    return 1e-7 * (np.cross(r0, n) / f - np.cross(r0, r) * along / f**2)


def measure(kind, fixed, answers):
    from layout.physics.layered_sphere import electric_lead_field
    from layout.physics.sarvas import magnetic_lead_field

    rng = np.random.default_rng(1)
    unit, axes = directions(rng, SITES), directions(rng, SITES)
    sources = rng.uniform(0.6, 0.98, (SOURCES, 1)) * RADII[0] * directions(rng, SOURCES)
    moments = directions(rng, SOURCES) if fixed else None

    def run(count):
        part = None if moments is None else moments[:count]
        if kind == "EEG":
            return electric_lead_field(unit, sources[:count], RADII, CONDUCTIVITIES, moments=part)
        return magnetic_lead_field(0.1 * unit, axes, sources[:count], moments=part)

    start = time.perf_counter()
    run(16)
    first = time.perf_counter() - start
    start = time.perf_counter()
    gain = run(SOURCES)
    seconds = time.perf_counter() - start
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024**2
    few = slice(0, SOURCES // 100)
    start = time.perf_counter()
    if kind == "EEG":
        plain = plain_series(unit, sources[few])
    else:
        plain = plain_sarvas(0.1 * unit, axes, sources[few])
    if fixed:
        plain = np.einsum("nmk,mk->nm", plain, moments[few])
    slow = 100 * (time.perf_counter() - start)
    error = np.abs(plain - gain[:, few]).max() / np.abs(plain).max()
    answers.put((first, seconds, peak, slow / seconds, error))


def measure_mapping(answers):
    import trimesh

    from layout.anatomy.head import Surface
    from layout.physics.nearest_point import nearest_on_surface

    ball = trimesh.creation.icosphere(subdivisions=4)
    surface = Surface(ball.vertices * [0.068, 0.084, 0.072], ball.faces)
    points = 0.9 * surface.vertices[np.random.default_rng(1).integers(0, len(surface.vertices), 20_000)]
    nearest_on_surface(surface, points[:10])
    start = time.perf_counter()
    nearest_on_surface(surface, points)
    answers.put(time.perf_counter() - start)


def main():
    spawn = multiprocessing.get_context("spawn")
    answers = spawn.Queue()

    def alone(function, *arguments):
        process = spawn.Process(target=function, args=(*arguments, answers))
        process.start()
        answer = answers.get()
        process.join()
        return answer

    rows = []
    for kind in ("EEG", "MEG"):
        for fixed in (False, True):
            first, seconds, peak, ratio, error = alone(measure, kind, fixed)
            name = f"{kind}, {'fixed' if fixed else 'free'} orientation"
            rows.append(f"| {name} | {first:.2f} | {seconds:.2f} | {peak:.2f} | {ratio:.0f} | {error:.1e} |")
    machine = (
        f"{os.cpu_count()} cores, {platform.processor() or platform.machine()}, Python {platform.python_version()}"
    )
    text = "\n".join(
        [
            f"# Lead fields, {SITES:,} sites x {SOURCES:,} sources",
            "",
            f"`python tests/bench/lead_field_speed.py`, {machine}, {datetime.date.today()}.",
            "Times in the same process as plain numpy on whole arrays; the relative difference is to numpy's result.",
            "",
            "| lead field | first call s | time s | peak GB | numpy time / this | relative difference |",
            "|" + "---|" * 6,
            *rows,
            "",
            f"Placing 20,000 sources under a surface of 5,120 triangles: {alone(measure_mapping):.2f} s.",
            "",
        ]
    )
    print(text)
    (ROOT / "results" / "lead_field_speed.md").write_text(text)


if __name__ == "__main__":
    main()
