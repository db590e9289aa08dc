"""`layout new`."""

from __future__ import annotations

import os
from pathlib import Path

import click

from layout.cli import asking
from layout.cli.completions import starter_kinds
from layout.cli.shared import Printing, printing_options
from layout.errors import FileError


@click.command()
@click.argument("kind", required=False, shell_complete=starter_kinds)
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="The file to write, which must not exist yet; without it KIND.toml.",
)
@click.option("--defaults", is_flag=True, help="Ask nothing on a terminal: write the starter with its own values.")
@printing_options
def new(kind: str | None, out: Path | None, defaults: bool, printing: Printing) -> None:
    """Write a commented starter brief; KIND is cap, helmet or budget.

    On a terminal it asks a few questions; in a pipe, with --quiet or with --defaults it asks none.

    \b
    Example: layout new cap --out my-study.toml
    """
    may_ask = asking.on_a_terminal() and not defaults and not printing.quiet
    if kind is None and not may_ask:
        raise click.UsageError("KIND must be given: cap, helmet or budget.")
    from layout.brief.starter import brief_text, usual_answers

    answers = usual_answers(kind) if kind is not None else asking.ask_kind()
    place = out or Path(f"{answers.kind}.toml")
    if may_ask:
        if os.path.lexists(place):  # told before the questions, not after them
            raise FileError(f"the file {str(place)!r} must not exist yet: it is not overwritten")
        answers = asking.ask_rest(answers)
    from layout.outputs.json_texts import written_json
    from layout.outputs.writer import write_new_text

    write_new_text(brief_text(answers), place)
    printing.result(
        None,
        lambda: written_json(str(place), kind=answers.kind),
        f"Written to {place}; see what it asks for with: layout check {place}",
    )
