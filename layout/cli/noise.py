"""`layout noise`."""

from __future__ import annotations

from pathlib import Path

import click

from layout.cli.completions import brief_argument
from layout.cli.shared import RUNS, Printing, printing_options, seen_from_here
from layout.cli.stages import NOISE


@click.command()
@brief_argument
@click.option(
    "--recording",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="An .edf, .bdf, .npz or .npy in place of the file that the brief names.",
)
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the brief's name and -noise.",
)
@printing_options
def noise(brief: Path, recording: Path | None, out: Path | None, printing: Printing) -> None:
    """Fit the strengths of BRIEF's noise to a recording of rest, beside what the brief assumes.

    With intervals, how well the model fits, what the recording cannot tell, and the lines that state it in a brief.

    \b
    Example: layout noise configs/cap.toml --recording rest.edf
    """
    with printing.progress(NOISE) as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.noise_tables import FILES, noise_files, noise_json, print_noise
        from layout.outputs.tables_folder import check_tables_dir, write_tables

        asked = load_brief(brief)
        place = check_tables_dir(out or RUNS / f"{brief.stem}-noise", "noise", FILES)
        progress("loading")
        from layout.design.noise_fit import fit_noise

        found = fit_noise(asked, recording, progress)
        write_tables(noise_files(found), place, "noise")
    printing.result(
        lambda console: print_noise(found, console),
        lambda: noise_json(found),
        f"Written to {seen_from_here(place)}: {', '.join(FILES)}",
    )
