"""`layout many`."""

from __future__ import annotations

from pathlib import Path

import click

from layout.cli.shared import RUNS, Printing, printing_options, seen_from_here


@click.command()
@click.argument("plan", type=click.Path(path_type=Path))
@click.option(
    "--workers",
    type=click.IntRange(0, 1000),
    metavar="N",
    help="Processes on this machine, one thread each; without it one for each core; 0: no process but this one.",
)
@click.option(
    "--scheduler",
    metavar="ADDRESS",
    help="A dask scheduler that runs already, in their place. Files that the brief names must be on its workers too.",
)
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the plan's name and -many. Cells that are there already stay.",
)
@printing_options
def many(plan: Path, workers: int | None, scheduler: str | None, out: Path | None, printing: Printing) -> None:
    """Design and judge layouts in every cell that PLAN makes: heads x counts or budgets x noise x layouts.

    PLAN is a TOML file that names a brief and the values to cross. Each cell is kept as it ends: a run cut short goes
    on where it was, and the death of a worker costs no cell.

    \b
    Example: layout many configs/many.toml --workers 3
    """
    if workers is not None and scheduler is not None:
        raise click.UsageError("--workers and --scheduler cannot be given together.")
    with printing.progress() as progress:
        progress("reading the plan")
        from layout.brief.parse_plan import load_plan
        from layout.outputs.many.folder import ManyFolder
        from layout.outputs.many.tables import many_json
        from layout.outputs.many.terminal import print_many

        asked = load_plan(plan)
        folder = ManyFolder(out or RUNS / f"{plan.stem}-many")
        progress("loading")
        from layout.design.many.run import ManyCells

        found = ManyCells(asked, progress).run(folder.known, folder.keep, workers, scheduler)
        folder.finish(found)
    printing.result(
        lambda console: print_many(found, console),
        lambda: many_json(found),
        f"Written to {seen_from_here(folder.place)}: many.csv, cells.csv, layouts.csv and many.json",
    )
