"""What `check` shows: the sizes, counts and distances that a design would work on, and a picture of them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.spatial import cKDTree

from layout.anatomy.head import Head, Region
from layout.anatomy.head_size import head_size
from layout.brief.objects import Brief, BudgetBrief, ZoneBrief
from layout.noise.calibration import Figure
from layout.outputs.pictures.backdrop import Backdrop, paint_backdrop
from layout.outputs.pictures.figure import (
    KIND_COLOURS,
    STYLE,
    Picture,
    behind,
    draw_head,
    four_panels,
    frame_view,
    nasion_legend,
    region_legend,
    rendered,
)
from layout.outputs.pictures.views import View, four_views
from layout.outputs.plain import fixed, one_line, shortened
from layout.outputs.terminal import new_table, print_figures, print_notes, say
from layout.physics.boundary_cortex import BoundaryCortex
from layout.physics.channels import CortexModel
from layout.physics.nearest_point import nearest_on_surface
from layout.physics.sphere_model import Displacements
from layout.sensing.candidates import Candidates
from layout.units import CM2, MM

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from rich.console import Console
    from rich.table import Table

FACING = 0.45  # cosine: sites more aslant than this are named in another view
LETTER = (2.3e-3, 3.6e-3)  # m on the head that a letter of a name takes


@dataclass(frozen=True)
class Check:
    """A brief laid out on its head, before any search.

    standard: name -> position (3,) [m]. conflicts (n_candidates, n_candidates) bool: which exclude each other. kept:
    candidates that every layout holds. reference: the candidate the brief names as reference, None for any.
    figures_of_noise as in DesignResult.
    """

    brief: Brief
    head: Head
    standard: dict[str, np.ndarray]
    regions: tuple[Region, ...]
    candidates: Candidates
    conflicts: np.ndarray
    kept: tuple[int, ...]
    reference: int | None
    model: CortexModel
    displacements: Displacements
    figures_of_noise: dict[str, Figure]


def print_check(check: Check, console: Console) -> None:
    """Head, regions, stock, rules, physical model and noise, as text that fits 80 columns."""
    say(console, check.brief.title, style="bold")
    size = [f"{value / MM:.0f}" for value in head_size(check.head)]
    say(
        console,
        f"Head: {check.head.name}, length {size[0]} mm, breadth {size[1]} mm, circumference {size[2]} mm, "
        f"{len(check.head.cortex)} sources over {check.head.cortex.areas.sum() / CM2:.0f} cm² of cortex",
    )
    say(console, model_text(check))
    console.print(_regions(check))
    console.print(_stock(check))
    for line in rule_sentences(check):
        say(console, line)
    print_figures(check.figures_of_noise, console)
    print_notes({"Sites": check.candidates.notes, "Head and model": check.head.notes}, console)


def model_text(check: Check) -> str:
    """The physical model in one sentence without its full stop."""
    if isinstance(check.model, BoundaryCortex):
        return f"Physical model: {check.model.note()}; {check.displacements.summary()}"
    sphere = check.model.sphere
    layers = ", ".join(
        f"{radius / MM:.1f} ({conductivity:g})"
        for radius, conductivity in zip(sphere.radii, sphere.conductivities, strict=True)
    )
    text = f"Physical model: spheres of radius {layers} mm (S/m), from the brain outwards"
    if check.head.sphere is not None:
        return f"{text}; the head is that sphere"
    centre = ", ".join(fixed(value / MM, 0) for value in sphere.centre)
    return f"{text}, centre at ({centre}) mm; {check.displacements.summary()}"


def _regions(check: Check) -> Table:
    from rich.text import Text

    table = new_table("Regions (centre x right, y front, z up of the ear line's middle)")
    table.add_column("region", overflow="fold")
    for heading in ("sources", "cm²", "centre, mm", "depth, mm"):
        table.add_column(heading, justify="right", no_wrap=True)
    table.add_column("nearest position", overflow="fold")
    for region, (depth, nearest, away) in zip(check.regions, region_places(check), strict=True):
        table.add_row(
            Text(one_line(region.name)),
            str(len(region.members)),
            fixed(region.areas.sum() / CM2, 1),
            ", ".join(fixed(value / MM, 0) for value in region.centre),
            fixed(depth / MM, 1),
            f"{nearest}, {away / MM:.0f} mm off",
        )
    table.caption = "depth: nearest source under the scalp; nearest position: to the middle of the region's sources"
    table.caption_justify = "left"
    return table


def region_places(check: Check) -> list[tuple[float, str, float]]:
    """Of each region: its nearest source under the scalp [m], the standard position nearest to the middle of its
    sources, and that one's distance [m] from there.
    """
    labels = [name for name in check.standard if name not in ("A1", "A2")]
    tree = cKDTree(np.array([check.standard[name] for name in labels]))
    places = []
    for region in check.regions:
        points = check.head.cortex.positions[region.members]
        away, nearest = tree.query(np.average(points, axis=0, weights=region.areas))
        depth = nearest_on_surface(check.head.scalp, points).inside_depth.min()
        places.append((float(depth), labels[nearest], float(away)))
    return places


def _stock(check: Check) -> Table:
    from rich.text import Text

    table = new_table("Stock and places")
    table.add_column("stock", overflow="fold")
    for heading in ("count", "sites", "candidates", "channels"):
        table.add_column(heading, justify="right", no_wrap=True)
    table.add_column("neighbour, mm", justify="right", no_wrap=True)
    candidates = check.candidates
    for index, entry in enumerate(check.brief.stock):
        sites = sites_of(candidates, index)
        own = candidates.kind == index
        table.add_row(
            Text(f"{one_line(entry.name)} ({entry.kind})"),
            str(entry.count),
            str(len(sites)),
            str(int(own.sum())),
            str(int(own[candidates.candidate_of_channel].sum())),
            _neighbours(candidates.sites.positions[sites]),
        )
    table.caption = "neighbour: straight distance from site to nearest site: least, median, most"
    table.caption_justify = "left"
    return table


def sites_of(candidates: Candidates, entry: int) -> np.ndarray:
    """Rows of the sites that an entry may use, both sides of left-right pairs among them."""
    return np.unique(candidates.singles.site[candidates.single_sensors(np.flatnonzero(candidates.kind == entry))])


def _neighbours(points: np.ndarray) -> str:
    if len(points) < 2:
        return "-"
    distance = cKDTree(points).query(points, k=2)[0][:, 1] / MM
    return f"{distance.min():.1f}, {np.median(distance):.1f}, {distance.max():.1f}"


def rule_sentences(check: Check) -> list[str]:
    """The brief's rules on layouts, one sentence each."""
    names, site = check.candidates.names, check.candidates.site
    first, second = np.nonzero(np.triu(check.conflicts))
    apart = site[first] != site[second]
    pairs = len(np.unique(np.sort(np.stack([site[first[apart]], site[second[apart]]], axis=1), axis=1), axis=0))
    spacings = ", ".join(f"{entry.spacing / MM:g} mm" for entry in check.brief.stock)
    lines = [f"Rules: one sensor per site; spacing {spacings}: {pairs} pairs of sites exclude each other."]
    lines += [_zone_rule(zone) for zone in check.brief.places.zones if zone.at_least or zone.at_most is not None]
    if check.brief.places.left_right_pairs:
        lines.append("Layouts are symmetrical: a site is chosen exactly if its mirror image is.")
    if check.brief.budget is not None:
        lines.append(_budget_rule(check.brief.budget))
    if check.kept:
        lines.append("Kept in every layout: " + ", ".join(names[number] for number in check.kept) + ".")
    if any(entry.kind == "electrode" for entry in check.brief.stock):
        who = "any of the counted electrodes" if check.reference is None else names[check.reference]
        lines.append(f"Reference: {who}.")
    lines.append("An allowed layout exists: the counts fit among these sites under these rules.")
    return lines


def _zone_rule(zone: ZoneBrief) -> str:
    limits = [f"at least {zone.at_least}"] if zone.at_least else []
    limits += [f"at most {zone.at_most}"] if zone.at_most is not None else []
    kinds = f" of {', '.join(one_line(kind) for kind in zone.kinds)}" if zone.kinds else ""
    return f"Zone {one_line(zone.name)}: {' and '.join(limits)} sensors{kinds}."


def _budget_rule(budget: BudgetBrief) -> str:
    blocks = ""
    if budget.block_channels is not None:
        blocks = f", {budget.block_price:g} for each started block of {budget.block_channels} channels included"
    return f"Budget: at most {budget.total:g} in all{blocks}."


def check_picture(check: Check) -> Picture:
    """The head from four sides with regions and every candidate site, named where there is room."""
    import matplotlib

    backdrops: dict[str, Backdrop] = {}
    views = four_views(check.candidates.sites.normals)

    def draw(axes: Axes, view: View) -> None:
        backdrops[view.name] = paint_backdrop(check.head, check.regions, view)
        draw_sites(axes, check, view, backdrops[view.name])

    entries = check.brief.stock
    subtitle = "; ".join(
        f"{entry.count} of {len(sites_of(check.candidates, index))} sites for {shortened(entry.name, 30)}"
        for index, entry in enumerate(entries)
    )
    with matplotlib.rc_context(STYLE):
        return rendered(four_panels(views, draw, check.brief.title, shortened(subtitle, 120), _legend(check)))


def draw_sites(axes: Axes, check: Check, view: View, backdrop: Backdrop) -> Axes:
    """One view of the head with the sites on its near side; a second stock entry is a wider ring, and so on."""
    draw_head(axes, check.head, view, backdrop)
    sites = check.candidates.sites
    flat = view.project(sites.positions)
    near = ~behind(flat, backdrop)
    for index in range(len(check.brief.stock)):
        own = np.zeros(len(sites), dtype=bool)
        own[sites_of(check.candidates, index)] = True
        axes.scatter(*flat[own & near, :2].T, zorder=4, **_mark(index))
    kept = np.unique(check.candidates.site[list(check.kept)]) if check.kept else np.zeros(0, dtype=int)
    kept = kept[near[kept]]
    axes.scatter(*flat[kept, :2].T, s=95, marker="s", facecolors="none", edgecolors="#333333", zorder=5)
    facing = sites.normals @ view.toward
    _write_names(axes, sites.names, flat, np.flatnonzero(near & (facing > FACING)), facing)
    return frame_view(axes, check.head, view)


def _write_names(axes: Axes, names: tuple[str, ...], flat: np.ndarray, shown: np.ndarray, facing: np.ndarray) -> None:
    """Names above their dots, those facing the viewer most first; a name that would cover another is left out."""
    written: list[tuple[float, float, float]] = []
    for number in shown[np.argsort(-facing[shown], kind="stable")]:
        name = shortened(names[number], 8)
        x, y, half = flat[number, 0], flat[number, 1], len(name) * LETTER[0] / 2
        if any(abs(x - at) < half + other and abs(y - height) < LETTER[1] for at, height, other in written):
            continue
        written.append((x, y, half))
        axes.text(x, y + 2.4e-3, name, size=6, ha="center", va="bottom", zorder=6)


def _mark(index: int) -> dict[str, object]:
    colour = KIND_COLOURS[index % len(KIND_COLOURS)]
    if index == 0:
        return {"s": 13, "color": colour, "linewidths": 0}
    return {"s": 13 + 26 * index, "facecolors": "none", "edgecolors": colour, "linewidths": 0.9}


def _legend(check: Check) -> list[tuple[object, str]]:
    from matplotlib.lines import Line2D

    entries = region_legend(check.regions)
    for index, entry in enumerate(check.brief.stock):
        colour = KIND_COLOURS[index % len(KIND_COLOURS)]
        face = colour if index == 0 else "none"
        handle = Line2D(
            [],
            [],
            linestyle="none",
            marker="o",
            markersize=4 + 2 * index,
            markerfacecolor=face,
            markeredgecolor=colour,
        )
        entries.append((handle, f"site for {shortened(entry.name, 24)}"))
    if check.kept:
        style = {"markersize": 9, "markerfacecolor": "none", "markeredgecolor": "#333333"}
        entries.append((Line2D([], [], linestyle="none", marker="s", **style), "kept in every layout"))
    return [*entries, nasion_legend()]
