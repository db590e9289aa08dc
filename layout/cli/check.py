"""`layout check`."""

from __future__ import annotations

from pathlib import Path

import click

from layout.cli.completions import brief_argument
from layout.cli.shared import RUNS, Printing, printing_options, seen_from_here
from layout.cli.stages import CHECK


@click.command()
@brief_argument
@click.option(
    "--picture",
    type=click.Path(path_type=Path),
    metavar="FILE.png",
    help="Where the picture goes, an .svg beside it; without it results/runs/, the brief's name and -check.png.",
)
@printing_options
def check(brief: Path, picture: Path | None, printing: Printing) -> None:
    """Check BRIEF and show what a design would work on.

    Head, regions, sites, rules, the physical model and the noise as text; regions and sites as a picture.

    \b
    Example: layout check configs/readme.toml
    """
    with printing.progress(CHECK) as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.writer import check_picture_file

        asked = load_brief(brief)
        place = check_picture_file(picture or RUNS / f"{brief.stem}-check.png")
        progress("loading")
        from layout.design import examine
        from layout.outputs.check import check_picture, print_check
        from layout.outputs.check_json import check_json
        from layout.outputs.writer import write_picture

        found = examine(asked, progress)
        progress("drawing")
        write_picture(check_picture(found), place)
    printing.result(
        lambda console: print_check(found, console),
        lambda: check_json(found),
        f"Picture: {seen_from_here(place)} (and .svg)",
    )
