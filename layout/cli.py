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
@click.argument("brief", type=click.Path(path_type=Path))
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
@click.option("--json", "as_json", is_flag=True, help="Print simulation.json in place of the tables.")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the brief's name and -simulation.",
)
def simulate(
    brief: Path, layout: str, fits: int, noise: str, priors: bool, volume: bool, as_json: bool, out: Path | None
) -> None:
    """Plant dipoles in the regions of BRIEF, fit them from noisy readings, and compare the errors with the bound.

    For one layout, and for an even spread and standard positions of as many sensors.

    \b
    Example: layout simulate configs/readme.toml --layout "Fpz, Fz, Cz, C3, C4, Pz, T7, T8"
    """
    with _progress() as progress:
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
    if as_json:
        click.echo(simulation_json(found), nl=False)
        return
    print_simulation(found, _console())
    click.echo(f"Written to {_seen_from_here(place)}: {', '.join(FILES)}")


@cli.command("lead-field")
@click.argument("brief", type=click.Path(path_type=Path))
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="The file: .npz, .mat, .h5 or .hdf5; without it results/runs/, the brief's name and -lead-field.npz.",
)
def lead_field(brief: Path, out: Path | None) -> None:
    """Write the lead field of all candidates of BRIEF to the whole cortex, SI units, head frame.

    Another model's gain in the same arrays can take its place: head.lead_field_file names it in a brief.

    \b
    Example: layout lead-field configs/cap.toml --out cap.npz
    """
    with _progress() as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief

        asked = load_brief(brief)
        place = out or RUNS / f"{brief.stem}-lead-field.npz"
        progress("loading")
        from layout.design.lead_field import export_lead_field

        channels, sources = export_lead_field(asked, place, progress)
    click.echo(f"Written to {_seen_from_here(place)}: {channels} channels, {sources} sources")


@cli.command()
@click.argument("brief", type=click.Path(path_type=Path))
@click.argument("layouts", nargs=-1, required=True, metavar="LAYOUT...")
@click.option("--within-mm", default=10.0, show_default=True, metavar="MM", help="Farthest from a candidate site.")
@click.option("--other-models", is_flag=True, help="Also judge under other skulls, noise levels and head sizes.")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the brief's name and -assess.",
)
def assess(brief: Path, layouts: tuple[str, ...], within_mm: float, other_models: bool, out: Path | None) -> None:
    """Judge given layouts under BRIEF: value, bound, per region, per channel, side by side.

    LAYOUTS: each an electrodes.tsv, the sensors.csv of an earlier run, or names of positions with commas between.

    \b
    Example: layout assess configs/readme.toml "Fz,Cz,Pz,C3,C4,T7,T8,Oz"
    """
    with _progress() as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.assess_tables import NAMES, assess_files, print_assessment
        from layout.outputs.tables_folder import check_tables_dir, write_tables
        from layout.units import MM

        asked = load_brief(brief)
        place = check_tables_dir(out or RUNS / f"{brief.stem}-assess", "assess", NAMES)
        progress("loading")
        from layout.design.assess import assess as judge

        found = judge(asked, layouts, within=within_mm * MM, other_models=other_models, progress=progress)
        write_tables(assess_files(found), place, "assess")
    print_assessment(found, _console())
    click.echo(f"Written to {_seen_from_here(place)}: layouts.csv, regions.csv and channels.csv")


@cli.command()
@click.argument("brief", type=click.Path(path_type=Path))
@click.option("--counts", metavar="FIRST:LAST:STEP", help="Numbers of sensors, such as 4:32:4 or 4,8,16.")
@click.option("--budgets", metavar="FIRST:LAST:STEP", help="Budgets in their place, where the brief has one.")
@click.option("--nested", is_flag=True, help="Each layout contains the smaller ones.")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the brief's name and -curve. A run cut short there goes on.",
)
def curve(brief: Path, counts: str | None, budgets: str | None, nested: bool, out: Path | None) -> None:
    """Value and certified bound of BRIEF against the number of sensors, or the budget.

    \b
    Example: layout curve configs/readme.toml --counts 4:12:4
    """
    if (counts is None) == (budgets is None):
        raise click.UsageError("One of --counts and --budgets must be given.")
    with _progress() as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.curve_tables import print_curve

        asked = load_brief(brief)
        progress("loading")
        from layout.design.curve import curve as trace
        from layout.design.curve import parse_amounts, run_key
        from layout.outputs.curve_folder import CurveFolder

        amounts = parse_amounts("budget", budgets) if counts is None else parse_amounts("count", counts)
        folder = CurveFolder(out or RUNS / f"{brief.stem}-curve", run_key(asked, amounts, nested))
        found = trace(asked, amounts, nested, folder.known, folder.keep, progress)
        progress("drawing and writing")
        folder.finish(found)
    print_curve(found, _console())
    click.echo(f"Written to {_seen_from_here(folder.place)}: curve.csv and curve.png")


@cli.command()
@click.argument("brief", type=click.Path(path_type=Path))
@click.option("--rank", default=1, show_default=True, metavar="N", help="Which of the layouts that a search finds.")
@click.option("--layout", metavar="LAYOUT", help="A given layout in its place, as in `layout assess`.")
@click.option("--within-mm", default=10.0, show_default=True, metavar="MM", help="As in `layout assess`.")
@click.option("--shift-mm", default=5.0, show_default=True, metavar="MM", help="rms random shift along each tangent.")
@click.option("--tilt-deg", default=5.0, show_default=True, metavar="DEG", help="rms random tilt about each tangent.")
@click.option("--failing", default=3, show_default=True, metavar="M", help="Most sensors that fail at once.")
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Output folder; without it results/runs/, the brief's name and -placement.",
)
def placement(
    brief: Path,
    rank: int,
    layout: str | None,
    within_mm: float,
    shift_mm: float,
    tilt_deg: float,
    failing: int,
    out: Path | None,
) -> None:
    """How exactly each sensor of a layout must be placed, what replaces it, and what failures and misplacement cost.

    The layout is the best for BRIEF, another rank, or a given one.

    \b
    Example: layout placement configs/readme.toml
    """
    with _progress() as progress:
        progress("reading the brief")
        from layout.brief.parse import load_brief
        from layout.outputs.placement_tables import NAMES, placement_files, print_placement
        from layout.outputs.tables_folder import check_tables_dir, write_tables
        from layout.units import DEGREE, MM

        asked = load_brief(brief)
        place = check_tables_dir(out or RUNS / f"{brief.stem}-placement", "placement", NAMES)
        progress("loading")
        from layout.design.placement import placement as examine_placement

        found = examine_placement(
            asked,
            rank,
            layout,
            within=within_mm * MM,
            shift=shift_mm * MM,
            tilt=tilt_deg * DEGREE,
            most_failing=failing,
            progress=progress,
        )
        write_tables(placement_files(found), place, "placement")
    print_placement(found, _console())
    click.echo(f"Written to {_seen_from_here(place)}: placement.csv, substitutes.csv and expected_loss.csv")


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
