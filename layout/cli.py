"""The command line: each command opens, calls one function of the library and prints. Heavy imports wait until used."""

from __future__ import annotations

import signal
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

import click

from layout import __version__
from layout.errors import LayoutError

if TYPE_CHECKING:
    from rich.console import Console

RUNS = Path("results") / "runs"


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


@contextmanager
def _remembered_interrupt() -> Iterator[Callable[[], None]]:
    """A function that raises KeyboardInterrupt if Ctrl-C was pressed: some libraries swallow it while they load."""
    pressed = []

    def note(number: int, frame: object) -> None:
        pressed.append(number)
        raise KeyboardInterrupt

    def check() -> None:
        if pressed:
            raise KeyboardInterrupt

    before = signal.getsignal(signal.SIGINT)
    if before is not signal.default_int_handler:  # a parent that wants it ignored keeps its way
        yield check
        return
    signal.signal(signal.SIGINT, note)
    try:
        yield check
    finally:
        signal.signal(signal.SIGINT, before)


@contextmanager
def _progress() -> Iterator[Callable[[str], None]]:
    """A function that shows what is being done and for how long, on a terminal, and at which Ctrl-C stops."""
    with _remembered_interrupt() as stop_if_asked, _spinner() as show:

        def progress(doing: str) -> None:
            stop_if_asked()
            show(doing)

        yield progress


@contextmanager
def _spinner() -> Iterator[Callable[[str], None]]:
    from rich.console import Console
    from rich.markup import escape
    from rich.progress import Progress, SpinnerColumn, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    columns = (SpinnerColumn(), TextColumn("{task.description}"), TimeElapsedColumn())
    with Progress(*columns, console=console, transient=True, disable=not console.is_terminal) as shown:
        task = shown.add_task("starting")
        yield lambda doing: shown.update(task, description=escape(doing))


def _console() -> Console:
    from rich.console import Console

    return Console(highlight=False)


def _seen_from_here(place: Path) -> Path:
    here = Path.cwd()
    return place.relative_to(here) if place.is_relative_to(here) else place


@click.group(cls=Commands, invoke_without_command=True, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="layout")
@click.pass_context
def cli(ctx: click.Context) -> None:
    """Choose where EEG electrodes and on-scalp magnetometers go, and prove how good the choice is.

    \b
    Example: layout design configs/readme.toml
    """
    if ctx.invoked_subcommand is None:
        click.echo(ctx.get_help())


@cli.command()
@click.argument("brief", type=click.Path(path_type=Path))
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/ and the brief's name. An earlier output there is replaced.",
)
@click.option("--audit", is_flag=True, help="Also write audit.npz: arrays to recompute every value and the bound.")
def design(brief: Path, out: Path | None, audit: bool) -> None:
    """Choose, certify and write the ranked layouts that BRIEF asks for.

    \b
    Example: layout design configs/readme.toml
    """
    with _progress() as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.writer import check_out_dir

        asked = load_brief(brief)
        place = check_out_dir(out or RUNS / brief.stem)
        progress("loading")
        from layout.design import design as find_layouts
        from layout.outputs.terminal import print_result
        from layout.outputs.writer import write_result

        result = find_layouts(asked, progress)
        progress("drawing and writing")
        # Written before it is printed: a closed pipe behind the tables must not cost the folder.
        write_result(result, place, audit=audit)
    print_result(result, _console())
    click.echo(f"Written to {_seen_from_here(place)}: report.html, ranking.json and one folder per layout")


@cli.command()
@click.argument("brief", type=click.Path(path_type=Path))
@click.option(
    "--picture",
    type=click.Path(path_type=Path),
    metavar="FILE.png",
    help="Where the picture goes, an .svg beside it; without it results/runs/, the brief's name and -check.png.",
)
def check(brief: Path, picture: Path | None) -> None:
    """Check BRIEF and show what a design would work on.

    Head, regions, sites, rules, the physical model and the noise as text; regions and sites as a picture.

    \b
    Example: layout check configs/readme.toml
    """
    with _progress() as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.writer import check_picture_file

        asked = load_brief(brief)
        place = check_picture_file(picture or RUNS / f"{brief.stem}-check.png")
        progress("loading")
        from layout.design import examine
        from layout.outputs.check import check_picture, print_check
        from layout.outputs.writer import write_picture

        found = examine(asked, progress)
        progress("drawing")
        write_picture(check_picture(found), place)
    print_check(found, _console())
    click.echo(f"Picture: {_seen_from_here(place)} (and .svg)")


@cli.command()
@click.argument("kind")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="The file to write, which must not exist yet; without it KIND.toml.",
)
def new(kind: str, out: Path | None) -> None:
    """Write a commented starter brief; KIND is cap, helmet or budget.

    \b
    Example: layout new cap --out my-study.toml
    """
    from layout.brief.starter import starter_brief
    from layout.outputs.writer import write_new_text

    text = starter_brief(kind)
    place = write_new_text(text, out or Path(f"{kind}.toml"))
    click.echo(f"Written to {place}; see what it asks for with: layout check {place}")


def main() -> None:
    """The `layout` command."""
    for stream in (sys.stdout, sys.stderr):
        stream.reconfigure(errors="replace")  # a terminal without µ or ² shows ? instead of a traceback
    cli(prog_name="layout")
