"""`layout placement`."""

from __future__ import annotations

from pathlib import Path

import click
from click.core import ParameterSource

from layout.cli.completions import brief_argument
from layout.cli.shared import ABOVE_ZERO, RUNS, Printing, printing_options, seen_from_here
from layout.cli.stages import PLACEMENT


@click.command()
@brief_argument
@click.option("--rank", default=1, show_default=True, metavar="N", help="Which of the layouts that a search finds.")
@click.option("--layout", metavar="LAYOUT", help="A given layout in its place, as in `layout assess`.")
@click.option(
    "--within-mm", type=ABOVE_ZERO, default=10.0, show_default=True, metavar="MM", help="As in `layout assess`."
)
@click.option("--shift-mm", default=5.0, show_default=True, metavar="MM", help="rms random shift along each tangent.")
@click.option("--tilt-deg", default=5.0, show_default=True, metavar="DEG", help="rms random tilt about each tangent.")
@click.option("--failing", default=3, show_default=True, metavar="M", help="Most sensors that fail at once.")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the brief's name and -placement.",
)
@printing_options
def placement(
    brief: Path,
    rank: int,
    layout: str | None,
    within_mm: float,
    shift_mm: float,
    tilt_deg: float,
    failing: int,
    out: Path | None,
    printing: Printing,
) -> None:
    """How exactly each sensor of a layout must be placed, what replaces it, and what failures and misplacement cost.

    The layout is the best for BRIEF, another rank, or a given one.

    \b
    Example: layout placement configs/readme.toml
    """
    if layout is not None and click.get_current_context().get_parameter_source("rank") != ParameterSource.DEFAULT:
        raise click.UsageError("One of --rank and --layout can be given, not both.")
    with printing.progress(PLACEMENT) as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.json_texts import placement_json
        from layout.outputs.placement_tables import NAMES, placement_files, print_placement
        from layout.outputs.tables_folder import check_tables_dir, write_tables
        from layout.units import DEGREE, MM

        asked = load_brief(brief)
        place = check_tables_dir(out or RUNS / f"{brief.stem}-placement", "placement", NAMES)
        progress("loading")
        from layout.design.placement import placement as examine_placement

        found = examine_placement(
            asked,
            rank,
            layout,
            within=within_mm * MM,
            shift=shift_mm * MM,
            tilt=tilt_deg * DEGREE,
            most_failing=failing,
            progress=progress,
        )
        write_tables(placement_files(found), place, "placement")
    printing.result(
        lambda console: print_placement(found, console),
        lambda: placement_json(found),
        f"Written to {seen_from_here(place)}: placement.csv, substitutes.csv and expected_loss.csv",
    )
