"""`layout simulate`."""

from __future__ import annotations

from pathlib import Path

import click

from layout.cli.completions import brief_argument
from layout.cli.shared import RUNS, Printing, printing_options, seen_from_here
from layout.cli.stages import SIMULATE


@click.command()
@brief_argument
@click.option(
    "--layout",
    default="1",
    metavar="WHICH",
    show_default=True,
    help="A rank, found by a quick search; or a sensors.csv or electrodes.tsv; or names of sites parted by commas.",
)
@click.option("--fits", default=1000, show_default=True, metavar="N", help="How many dipoles to plant and fit.")
@click.option(
    "--noise",
    default="1,0.3,0.1,0.05",
    show_default=True,
    metavar="FACTORS",
    help="Factors on all noise amplitudes, parted by commas; the fits run once for each.",
)
@click.option("--priors", is_flag=True, help="Fits know the priors of the brief's goal; errors go beside its error.")
@click.option("--volume", is_flag=True, help="Fits start from a lattice through the brain, not from the cortex.")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the brief's name and -simulation.",
)
@printing_options
def simulate(
    brief: Path, layout: str, fits: int, noise: str, priors: bool, volume: bool, out: Path | None, printing: Printing
) -> None:
    """Plant dipoles in the regions of BRIEF, fit them from noisy readings, and compare the errors with the bound.

    For one layout, and for an even spread and standard positions of as many sensors.

    \b
    Example: layout simulate configs/readme.toml --layout "Fpz, Fz, Cz, C3, C4, Pz, T7, T8"
    """
    with printing.progress(SIMULATE) as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.simulation_tables import FILES, print_simulation, simulation_files, simulation_json
        from layout.outputs.tables_folder import check_tables_dir, write_tables

        asked = load_brief(brief)
        place = check_tables_dir(out or RUNS / f"{brief.stem}-simulation", "simulate", FILES)
        progress("loading")
        from layout.design.simulate import factors_in, simulate

        found = simulate(asked, layout, fits, factors_in(noise), priors, volume, progress)
        write_tables(simulation_files(found), place, "simulate")
    printing.result(
        lambda console: print_simulation(found, console),
        lambda: simulation_json(found),
        f"Written to {seen_from_here(place)}: {', '.join(FILES)}",
    )
