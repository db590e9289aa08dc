"""`layout assess`."""

from __future__ import annotations

from pathlib import Path

import click

from layout.cli.completions import brief_argument
from layout.cli.shared import ABOVE_ZERO, RUNS, Printing, printing_options, seen_from_here
from layout.cli.stages import ASSESS


@click.command()
@brief_argument
@click.argument("layouts", nargs=-1, required=True, metavar="LAYOUT...")
@click.option(
    "--within-mm",
    type=ABOVE_ZERO,
    default=10.0,
    show_default=True,
    metavar="MM",
    help="Farthest from a candidate site.",
)
@click.option("--other-models", is_flag=True, help="Also judge under other skulls, noise levels and head sizes.")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the brief's name and -assess.",
)
@printing_options
def assess(
    brief: Path, layouts: tuple[str, ...], within_mm: float, other_models: bool, out: Path | None, printing: Printing
) -> None:
    """Judge given layouts under BRIEF: value, bound, per region, per channel, side by side.

    LAYOUTS: each an electrodes.tsv, the sensors.csv of an earlier run, or names of positions with commas between.

    \b
    Example: layout assess configs/readme.toml "Fz,Cz,Pz,C3,C4,T7,T8,Oz"
    """
    with printing.progress(ASSESS) as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.assess_tables import NAMES, assess_files, print_assessment
        from layout.outputs.json_texts import assess_json
        from layout.outputs.tables_folder import check_tables_dir, write_tables
        from layout.units import MM

        asked = load_brief(brief)
        place = check_tables_dir(out or RUNS / f"{brief.stem}-assess", "assess", NAMES)
        progress("loading")
        from layout.design.assess import assess as judge

        found = judge(asked, layouts, within=within_mm * MM, other_models=other_models, progress=progress)
        write_tables(assess_files(found), place, "assess")
    printing.result(
        lambda console: print_assessment(found, console),
        lambda: assess_json(found),
        f"Written to {seen_from_here(place)}: layouts.csv, regions.csv and channels.csv",
    )
