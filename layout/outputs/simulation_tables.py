"""A simulation as tables: on a terminal, as comma-separated files with their columns explained, as JSON."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Sequence
from dataclasses import asdict
from typing import TYPE_CHECKING

from layout.outputs.plain import fixed, for_json, one_line, significant
from layout.outputs.simulation_result import SCHEMA, ErrorRow, Simulation, SpreadRow, TestedLayout
from layout.outputs.terminal import new_table, say
from layout.units import MM

if TYPE_CHECKING:
    from rich.console import Console
    from rich.table import Table

STANDINGS = {"follows": "follows", "above": "ABOVE", "below": "below", "crosses": "crosses", "no bound": "no bound"}

ERRORS = {
    "layout": ("The layout asked for, or a baseline of as many sensors", ""),
    "over": ("all: all planted dipoles; region: those of one region; depth: those of a band of depth", ""),
    "group": ("Name of the region, or the band of depth under the scalp", ""),
    "noise_factor": ("Factor on all noise amplitudes of the brief; 1 is the brief's own noise", ""),
    "snr": ("rms signal per channel of all plants, in units of the noise, its correlations taken out", ""),
    "fits": ("Planted and fitted dipoles", ""),
    "rms_mm": ("Root mean square distance of the fitted from the planted dipole", "mm"),
    "median_mm": ("Median of that distance", "mm"),
    "p95_mm": ("Distance that 95 % of the fits stay under", "mm"),
    "grid_rms_mm": ("Root mean square distance of the best point of the grid, before the refinement", "mm"),
    "bound_mm": (
        "Root mean square of what the distance should be where the signal is strong: the Cramér-Rao bound, or with "
        "--priors the linearised error; empty where it does not exist",
        "mm",
    ),
    "linearised_mm": ("Root mean square of the linearised error with the priors of the brief's goal", "mm"),
    "ratio": ("Root mean square of each distance divided by its own bound: 1 where errors follow the bound", ""),
    "ratio_low": ("Lower end of the ratio's 95 % interval", ""),
    "ratio_high": ("Upper end of the ratio's 95 % interval", ""),
    "far_percent": ("Fits more than three bounds off: under 0.3 where errors follow the bound", "percent"),
    "standing": (
        "follows: the bound, within 10 % as far as so many fits can tell; above: more noise than the bound holds for, "
        "or fits that end elsewhere; below: the bound is larger than the brain leaves room for; crosses: near it "
        "only on the way from above to below; no bound",
        "",
    ),
}
FILES = ("simulation.csv", "point-spread.csv", "simulation.json", "columns.json")
SPREADS = {
    "layout": ERRORS["layout"],
    "region": ("Region of the planted dipoles", ""),
    "peak_displacement_mm": ("Mean distance of the map's peak from the dipole, without noise", "mm"),
    "spatial_dispersion_mm": ("Mean rms distance of the map from the dipole, weighed by its square, no noise", "mm"),
    "noisy_peak_displacement_mm": ("Median distance of the map's peak from the dipole, with the brief's noise", "mm"),
}


def simulation_files(result: Simulation) -> dict[str, str]:
    """File name -> text of everything that a simulation writes."""
    texts = (errors_csv(result), spreads_csv(result), simulation_json(result), columns_json())
    return dict(zip(FILES, texts, strict=True))


def errors_csv(result: Simulation) -> str:
    """One row for each layout, level of noise and group of plants."""
    return _as_csv(tuple(ERRORS), [_error_cells(row) for row in result.errors])


def spreads_csv(result: Simulation) -> str:
    """One row for each layout and region."""
    rows = [
        [
            one_line(row.layout),
            one_line(row.region),
            *(significant(value / MM, 6) for value in (row.displacement, row.dispersion, row.noisy_displacement)),
        ]
        for row in result.spreads
    ]
    return _as_csv(tuple(SPREADS), rows)


def columns_json() -> str:
    """File name -> column -> Description and, where it has one, Units, in the manner of BIDS sidecar files."""
    content = {
        file: {
            name: {"Description": text} | ({"Units": units} if units else {}) for name, (text, units) in columns.items()
        }
        for file, columns in (("simulation.csv", ERRORS), ("point-spread.csv", SPREADS))
    }
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def simulation_json(result: Simulation) -> str:
    """Everything in the tables and how it was made; lengths in metres."""
    content = {
        "schema": SCHEMA,
        "version": result.version,
        "brief": {"title": result.brief.title, "sha256": result.brief.sha256},
        "seed": result.seed,
        "fits": result.fits,
        "noise_factors": result.noise_factors,
        "shift": result.shift,
        "bound": result.bound,
        "grid": result.grid,
        "layouts": [asdict(layout) for layout in result.layouts],
        "errors": [asdict(row) for row in result.errors],
        "point_spread": [asdict(row) for row in result.spreads],
        "notes": result.notes,
    }
    return json.dumps(for_json(content), indent=2, ensure_ascii=False) + "\n"


def print_simulation(result: Simulation, console: Console) -> None:
    """Errors beside the bound for every layout, by region and depth for the first, the maps' spread. 80 columns."""
    say(console, result.brief.title, style="bold")
    say(
        console,
        f"{result.fits:,} dipoles planted, each found again by maximum likelihood: a scan over {result.grid}, then "
        f"refined off the grid. Seed {result.seed}.",
    )
    whole = [row for row in result.errors if row.over == "all"]
    console.print(_errors("Localisation error, all regions", whole, "layout"))
    for layout in result.layouts:
        say(console, threshold_sentence(layout, result))
    first = result.layouts[0].name
    parts = [row for row in result.errors if row.over != "all" and row.layout == first]
    groups = list(dict.fromkeys((row.over, row.group) for row in parts))
    parts.sort(key=lambda row: groups.index((row.over, row.group)))
    if parts:
        console.print(_errors(f"By region and depth under the scalp: {first}", parts, "group"))
    console.print(_spreads(result.spreads))
    say(
        console,
        f"bound: {result.bound}, rms. ratio: rms of each error over its own bound, ± half its 95 % interval. follows: "
        "within 10 %, as far as so many fits can tell; ABOVE: more than 10 % over it, or fits that end elsewhere; "
        "below: bounds larger than the brain leaves room for; crosses: near it only on the way from above to below.",
    )
    for note in result.notes:
        say(console, f"- {note}")


def threshold_sentence(layout: TestedLayout, result: Simulation) -> str:
    """Up to which noise the errors of a layout follow the bound."""
    if layout.threshold is None:
        return f"{layout.name}: errors leave the bound at every noise tried."
    if layout.threshold == max(result.noise_factors):
        return f"{layout.name}: errors follow the bound at every noise tried."
    above = min(factor for factor in result.noise_factors if factor > layout.threshold)
    return (
        f"{layout.name}: errors follow the bound up to noise x {layout.threshold:g} and leave it by x {above:g}: the "
        "linearised figure does not hold there."
    )


def _errors(title: str, rows: Sequence[ErrorRow], heading: str) -> Table:
    from rich.text import Text

    table = new_table(title)
    table.add_column(heading, overflow="fold")
    for name in ("noise x", "SNR", "rms mm", "median", "bound mm", "ratio"):
        table.add_column(name, justify="right", no_wrap=True)
    table.add_column("standing", no_wrap=True)
    before = None
    for row in rows:
        name, figures = one_line(getattr(row, heading)), row.figures
        half = (figures.high - figures.low) / 2
        table.add_row(
            Text(name if name != before else ""),
            significant(row.noise_factor, 3),
            significant(row.snr, 3),
            significant(figures.rms / MM, 3),
            significant(figures.median / MM, 3),
            significant(figures.bound_rms / MM, 3, "none"),
            f"{fixed(figures.ratio, 2)} ± {fixed(half, 2)}" if figures.standing != "no bound" else "-",
            Text(STANDINGS[figures.standing], style="yellow" if figures.standing == "above" else ""),
        )
        before = name
    return table


def _spreads(rows: Sequence[SpreadRow]) -> Table:
    from rich.text import Text

    table = new_table("Minimum-norm map, noise-normalised")
    table.add_column("layout", overflow="fold")
    table.add_column("region", overflow="fold")
    for name in ("peak off mm", "dispersion mm", "peak off in noise"):
        table.add_column(name, justify="right", width=10)
    for row in rows:
        values = (row.displacement, row.dispersion, row.noisy_displacement)
        table.add_row(Text(one_line(row.layout)), Text(one_line(row.region)), *(fixed(v / MM, 1) for v in values))
    return table


def _error_cells(row: ErrorRow) -> list[str]:
    figures = row.figures
    lengths = (figures.rms, figures.median, figures.largest, figures.grid_rms, figures.bound_rms)
    return [
        one_line(row.layout),
        row.over,
        one_line(row.group),
        significant(row.noise_factor, 6),
        significant(row.snr, 6),
        str(figures.fits),
        *(significant(value / MM, 6) for value in (*lengths, figures.linearised_rms)),
        *(significant(value, 6) for value in (figures.ratio, figures.low, figures.high, 100 * figures.far)),
        figures.standing,
    ]


def _as_csv(columns: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(rows)
    return text.getvalue()
