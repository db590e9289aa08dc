"""`layout curve`."""

from __future__ import annotations

from pathlib import Path

import click

from layout.cli.completions import brief_argument
from layout.cli.shared import RUNS, Printing, printing_options, seen_from_here
from layout.cli.stages import CURVE


@click.command()
@brief_argument
@click.option("--counts", metavar="FIRST:LAST:STEP", help="Numbers of sensors, such as 4:32:4 or 4,8,16.")
@click.option("--budgets", metavar="FIRST:LAST:STEP", help="Budgets in their place, where the brief has one.")
@click.option("--nested", is_flag=True, help="Each layout contains the smaller ones.")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the brief's name and -curve. A run cut short there goes on.",
)
@printing_options
def curve(
    brief: Path, counts: str | None, budgets: str | None, nested: bool, out: Path | None, printing: Printing
) -> None:
    """Value and certified bound of BRIEF against the number of sensors, or the budget.

    \b
    Example: layout curve configs/readme.toml --counts 4:12:4
    """
    if (counts is None) == (budgets is None):
        raise click.UsageError("One of --counts and --budgets must be given, and not both.")
    with printing.progress(CURVE) as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.curve_tables import print_curve

        asked = load_brief(brief)
        progress("loading")
        from layout.design.curve import curve as trace
        from layout.design.curve import parse_amounts, run_key
        from layout.outputs.curve_folder import CurveFolder
        from layout.outputs.json_texts import curve_json

        amounts = parse_amounts("budget", budgets) if counts is None else parse_amounts("count", counts)
        folder = CurveFolder(out or RUNS / f"{brief.stem}-curve", run_key(asked, amounts, nested))
        found = trace(asked, amounts, nested, folder.known, folder.keep, progress)
        progress("drawing and writing")
        folder.finish(found)
    printing.result(
        lambda console: print_curve(found, console),
        lambda: curve_json(found),
        f"Written to {seen_from_here(folder.place)}: curve.csv and curve.png",
    )
