"""The result as tables on a terminal; plain text in a pipe."""

from __future__ import annotations

from typing import TYPE_CHECKING

from layout.outputs.plain import fixed, one_line, rounded_up, significant
from layout.outputs.result import DesignResult, RankedLayout
from layout.outputs.words import CLOCK_SENTENCE, bound_sentence, even_spread_text

if TYPE_CHECKING:
    from rich.console import Console
    from rich.table import Table


def print_result(result: DesignResult, console: Console) -> None:
    """Ranked layouts, baselines, the first layout's sensors, noise figures, notes. Fits 80 columns."""
    say(console, result.brief.title, style="bold")
    console.print(_ranked(result))
    say(console, bound_sentence(result))
    if result.stopped_by_clock:
        say(console, CLOCK_SENTENCE, style="yellow")
    console.print(_baselines(result))
    say(console, f"Sensors of layout 1: {_sensors(result.layouts[0])}")
    if result.figures_of_noise:
        console.print(noise_table(result.figures_of_noise))
    for note in result.notes:
        say(console, f"- {note}")


def say(console: Console, text: str, style: str = "") -> None:
    """Print words that may hold anything: no markup, no control characters."""
    from rich.text import Text

    console.print(Text(one_line(text), style=style))


def new_table(title: str) -> Table:
    """An empty table in the house's form."""
    from rich import box
    from rich.table import Table

    return Table(title=title, title_justify="left", box=box.SIMPLE_HEAD, padding=(0, 1), pad_edge=False)


def _ranked(result: DesignResult) -> Table:
    table = new_table("Ranked layouts")
    for heading in ("rank", result.unit, "bound", "gap %"):
        table.add_column(heading, justify="right", no_wrap=True)
    table.add_column("proven", no_wrap=True)
    table.add_column("cost", justify="right", no_wrap=True)
    table.add_column("moved", justify="right", no_wrap=True)
    table.add_column("equals even spread of", justify="right")
    for layout in result.layouts:
        table.add_row(
            str(layout.rank),
            fixed(layout.value, 3, "-"),
            rounded_up(layout.bound, 3, "-"),
            rounded_up(layout.gap_percent, 2, "-"),
            "yes" if layout.proven else "no",
            significant(layout.cost, 6, "-"),
            "-" if layout.moved is None else str(layout.moved),
            even_spread_text(layout),
        )
    return table


def _baselines(result: DesignResult) -> Table:
    from rich.text import Text

    count = len(result.layouts[0].chosen)
    table = new_table(f"Without a search, with the same {count} sensors")
    table.add_column("baseline", overflow="fold")
    table.add_column(result.unit, justify="right", no_wrap=True)
    table.add_column("% of best", justify="right", no_wrap=True)
    table.add_column("note", overflow="fold")
    for base in result.baselines:
        percent = fixed(base.percent_of_best, 1, "-")
        table.add_row(Text(one_line(base.name)), fixed(base.value, 3, "-"), percent, Text(one_line(base.note)))
    return table


def noise_table(figures: dict[str, tuple[float, str, str]]) -> Table:
    """Label -> (value, unit, expected band), as in DesignResult."""
    from rich.text import Text

    table = new_table("Noise and model figures")
    table.add_column("quantity", overflow="fold")
    table.add_column("value", justify="right", no_wrap=True)
    table.add_column("expected band", overflow="fold")
    for name, (value, unit, band) in figures.items():
        number = f"{significant(value, 4, '-')} {one_line(unit)}"
        table.add_row(Text(one_line(name)), Text(number), Text(one_line(band)))
    return table


def _sensors(layout: RankedLayout) -> str:
    return ", ".join(one_line(row.name) + (" (reference)" if row.role == "reference" else "") for row in layout.sensors)
