"""`layout lead-field`."""

from __future__ import annotations

from pathlib import Path

import click

from layout.cli.completions import brief_argument
from layout.cli.shared import RUNS, Printing, printing_options, seen_from_here
from layout.cli.stages import LEAD_FIELD


@click.command("lead-field")
@brief_argument
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="The file: .npz, .mat, .h5 or .hdf5; without it results/runs/, the brief's name and -lead-field.npz.",
)
@printing_options
def lead_field(brief: Path, out: Path | None, printing: Printing) -> None:
    """Write the lead field of all candidates of BRIEF to the whole cortex, SI units, head frame.

    Another model's gain in the same arrays can take its place: head.lead_field_file names it in a brief.

    \b
    Example: layout lead-field configs/cap.toml --out cap.npz
    """
    with printing.progress(LEAD_FIELD) as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief

        asked = load_brief(brief)
        place = out or RUNS / f"{brief.stem}-lead-field.npz"
        progress("loading")
        from layout.design.lead_field import export_lead_field
        from layout.outputs.json_texts import written_json

        channels, sources = export_lead_field(asked, place, progress)
    printing.result(
        None,
        lambda: written_json(str(place), channels=channels, sources=sources),
        f"Written to {seen_from_here(place)}: {channels} channels, {sources} sources",
    )
