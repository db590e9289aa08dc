"""`layout design`."""

from __future__ import annotations

from pathlib import Path

import click

from layout.cli.completions import brief_argument
from layout.cli.shared import RUNS, Printing, printing_options, seen_from_here
from layout.cli.stages import DESIGN, QUICK_DESIGN


@click.command()
@brief_argument
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/ and the brief's name. An earlier output there is replaced.",
)
@click.option("--audit", is_flag=True, help="Also write audit.npz: arrays to recompute every value and the bound.")
@click.option(
    "--quick",
    is_flag=True,
    help="Leave out the evidence: room and substitutes of each sensor, channel curve, sensitivity, noise.",
)
@printing_options
def design(brief: Path, out: Path | None, audit: bool, quick: bool, printing: Printing) -> None:
    """Choose, certify and write the ranked layouts that BRIEF asks for.

    \b
    Example: layout design configs/readme.toml
    """
    with printing.progress(QUICK_DESIGN if quick else DESIGN) as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.writer import check_out_dir

        asked = load_brief(brief)
        place = check_out_dir(out or RUNS / brief.stem)
        progress("loading")
        from layout.design import design as find_layouts
        from layout.outputs.ranking import ranking_json
        from layout.outputs.terminal import print_result
        from layout.outputs.writer import write_result

        result = find_layouts(asked, progress, evidence=not quick)
        # Written before it is printed: a closed pipe behind the tables must not cost the folder.
        write_result(result, place, audit=audit, progress=progress)
    printing.result(
        lambda console: print_result(result, console),
        lambda: ranking_json(result),
        f"Written to {seen_from_here(place)}: report.html, ranking.json and one folder per layout",
    )
