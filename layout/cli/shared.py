"""What the commands share: errors and Ctrl-C as a shell expects them, --json and --quiet, and printing a result."""

from __future__ import annotations

import functools
from collections.abc import Callable, Sequence
from contextlib import AbstractContextManager
from pathlib import Path
from typing import TYPE_CHECKING

import click

from layout.cli.course import Stage
from layout.cli.progress import progress_shown
from layout.errors import LayoutError

if TYPE_CHECKING:
    from rich.console import Console

RUNS = Path("results") / "runs"
ABOVE_ZERO = click.FloatRange(min=0, min_open=True)


class OneSentence(click.ClickException):
    """A user's error on one line, exit code 2."""

    exit_code = 2

    def __init__(self, problem: LayoutError) -> None:
        text = "".join(c if c.isprintable() else " " for c in str(problem))
        super().__init__(text.rstrip(" .") + ".")


class Commands(click.Group):
    """Turns the library's errors and Ctrl-C into what a shell expects; all other exceptions stay tracebacks."""

    def invoke(self, ctx: click.Context) -> object:
        """Run the command named on the line."""
        try:
            return super().invoke(ctx)
        except LayoutError as problem:
            raise OneSentence(problem) from None
        except KeyboardInterrupt:
            click.echo("Stopped.", err=True)
            ctx.exit(130)


class Printing:
    """How a command speaks: tables for people, JSON for machines (--json), or nothing but errors (--quiet)."""

    def __init__(self, as_json: bool, quiet: bool) -> None:
        if as_json and quiet:
            raise click.UsageError("--json and --quiet cannot be given together.")
        self._as_json, self.quiet = as_json, quiet

    def progress(self, stages: Sequence[Stage] = ()) -> AbstractContextManager[Callable[[str], None]]:
        """A function that says on a terminal what is being done, and at which Ctrl-C stops (see `progress_shown`)."""
        return progress_shown(stages, self.quiet)

    def result(self, tables: Callable[[Console], None] | None, json_text: Callable[[], str], written: str) -> None:
        """Print a result: what `tables` writes to a console, if any, and the line `written`; or the JSON text alone."""
        if self._as_json:
            click.echo(json_text().rstrip("\n"))
        elif not self.quiet:
            if tables is not None:
                tables(_console())
            click.echo(written)


def printing_options(command: Callable[..., None]) -> Callable[..., None]:
    """The options --json and --quiet; the command receives them as one Printing under the name `printing`."""

    @click.option("--json", "as_json", is_flag=True, help="Print JSON in place of the tables.")
    @click.option("--quiet", "-q", is_flag=True, help="Print nothing but errors, and show no progress.")
    @functools.wraps(command)
    def with_printing(as_json: bool, quiet: bool, **options: object) -> None:
        command(printing=Printing(as_json, quiet), **options)

    return with_printing


def _console() -> Console:
    """Standard output for tables."""
    from rich.console import Console

    return Console(highlight=False)


def seen_from_here(place: Path) -> Path:
    """A path as short as the working folder allows."""
    here = Path.cwd()
    return place.relative_to(here) if place.is_relative_to(here) else place
