"""The result as tables on a terminal; plain text in a pipe."""

from __future__ import annotations

from typing import TYPE_CHECKING

from layout.outputs.evidence_words import evidence_sentences
from layout.outputs.plain import bound_text, fixed, one_line, rounded_up, significant
from layout.outputs.result import DesignResult, RankedLayout
from layout.outputs.words import (
    CLOCK_SENTENCE,
    HOUSINGS_COLUMN,
    RANKED_COLUMNS,
    bound_sentence,
    effort_sentence,
    even_spread_text,
    figure_text,
    housings_sentence,
    meets_housings,
    nearest_text,
    polished_sentence,
    reach_sentence,
)

if TYPE_CHECKING:
    from rich.console import Console
    from rich.table import Table

    from layout.noise.calibration import Figure


def print_result(result: DesignResult, console: Console) -> None:
    """Ranked layouts, baselines, the first layout's sensors, noise figures, notes. Fits 80 columns."""
    say(console, result.brief.title, style="bold")
    console.print(_ranked(result))
    say(console, RANKED_COLUMNS + (f"; {HOUSINGS_COLUMN}." if meets_housings(result) else "."))
    for sentence in (
        reach_sentence(result),
        bound_sentence(result),
        polished_sentence(result),
        effort_sentence(result),
        housings_sentence(result),
    ):
        if sentence:
            say(console, sentence)
    if result.stopped_by_clock:
        say(console, CLOCK_SENTENCE, style="yellow")
    console.print(_baselines(result))
    console.print(_sensors(result.layouts[0], result.unit))
    say(
        console,
        f"nearest position: standard position, distance; {result.unit} lost: what layout 1 loses without this sensor",
    )
    for sentence in evidence_sentences(result):
        say(console, sentence)
    if result.figures_of_noise:
        print_figures(result.figures_of_noise, console)
    print_notes(result.notes, console)


def print_notes(notes: dict[str, tuple[str, ...]], console: Console) -> None:
    """Heading -> sentences; a heading with nothing under it is left out."""
    for heading, sentences in notes.items():
        if sentences:
            say(console, heading, style="bold")
        for sentence in sentences:
            say(console, f"- {sentence}")


def say(console: Console, text: str, style: str = "") -> None:
    """Print words that may hold anything: no markup, no control characters."""
    from rich.text import Text

    console.print(Text(one_line(text), style=style))


def new_table(title: str) -> Table:
    """An empty table in the house's form."""
    from rich import box
    from rich.table import Table

    return Table(title=title, title_justify="left", box=box.SIMPLE_HEAD, padding=(0, 1, 0, 0), pad_edge=False)


def _ranked(result: DesignResult) -> Table:
    table = new_table("Ranked layouts")
    for heading in ("rank", result.unit, "bound", "gap %"):
        table.add_column(heading, justify="right", no_wrap=True)
    table.add_column("proven")
    table.add_column("price", justify="right", no_wrap=True)
    table.add_column("sensors moved", justify="right", width=7)
    table.add_column("equals even spread of", justify="right", width=12)
    housings = meets_housings(result)
    if housings:
        table.add_column("housings meet", justify="right", width=8)
    for layout in result.layouts:
        table.add_row(
            str(layout.rank),
            fixed(layout.value, 3, "-"),
            bound_text(layout.bound, result.unit, "-"),
            rounded_up(layout.gap_percent, 2, "-"),
            "yes" if layout.proven else "no",
            significant(layout.cost, 6, "-"),
            "-" if layout.moved is None else str(layout.moved),
            even_spread_text(layout),
            *([str(layout.housings_meet or 0)] if housings else []),
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


def print_figures(figures: dict[str, Figure], console: Console) -> None:
    """Label -> figure, as in DesignResult: a table, and under it where the bands are from."""
    from rich.padding import Padding
    from rich.text import Text

    table = new_table("Noise and model figures, of a single epoch in the brief's band")
    table.add_column("quantity", overflow="fold")
    table.add_column("value", justify="right", no_wrap=True)
    table.add_column("expected band", overflow="fold")
    for name, figure in figures.items():
        number = f"{significant(figure.value, 4, '-')} {one_line(figure.unit)}"
        table.add_row(Text(one_line(name)), Text(number), Text(one_line(figure.band)))
        if remark := figure_text(figure):
            style = "yellow" if figure.outside and figure.judged else ""
            table.add_row(Padding(Text(remark, style=style), (0, 0, 0, 2)))
    console.print(table)
    for figure in figures.values():
        if figure.source:
            say(console, f"- {figure.band}: {figure.source}")


def _sensors(layout: RankedLayout, unit: str) -> Table:
    from rich.text import Text

    rows = layout.sensors
    kinds, axes = len({row.kind for row in rows}) > 1, any(row.axis_name for row in rows)
    table = new_table(f"Sensors of layout {layout.rank}")
    table.add_column("no.", justify="right", no_wrap=True)
    table.add_column("site", overflow="fold")
    if kinds:
        table.add_column("kind", overflow="fold")
    table.add_column("nearest position", overflow="fold", min_width=8)
    if axes:
        table.add_column("axis", overflow="fold")
    table.add_column(f"{unit} lost", justify="right")
    table.add_column("role", overflow="fold")
    for row in rows:
        cells = [one_line(row.site), *([one_line(row.kind)] if kinds else []), nearest_text(row)]
        cells += [one_line(row.axis_name)] if axes else []
        cells += [fixed(row.worth, 3, "-"), row.role]
        table.add_row(str(row.number), *(Text(cell) for cell in cells))
    return table
