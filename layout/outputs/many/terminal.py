"""Many cells on a terminal: how each layout fares over all of them, each cell, and how often the order changes."""

from __future__ import annotations

from typing import TYPE_CHECKING

from layout.outputs.cautions import CAUTIONS
from layout.outputs.many.result import Cell, CellResult, Many
from layout.outputs.many.tables import gap_in
from layout.outputs.plain import fixed, one_line, rounded_up, shortened, significant

if TYPE_CHECKING:
    from rich.console import Console

MOST_ROWS = 60
MOST_COLUMNS = 4  # layouts with a column each; of more, the best alone is shown
LETTERS = "ABCDEFGHIJKLMNOPQRSTUVWXYZ"
MOST_ERRORS = 5
MOST_NUMBERS = 12
# Heading of the terminal -> the field of a cell, shown where it differs among the cells.
VARIED = {
    "skull": "skull_factor",
    "S/m": "conductivities",
    "noise": "noise_factor",
    "sensor noise": "sensor_factor",
    "back-ground": "background_factor",
}


def print_many(found: Many, console: Console) -> None:
    """Standing of the layouts, the cells, the changes of order, errors and notes. Fits 80 columns."""
    from layout.outputs.terminal import say

    say(console, found.title, style="bold")
    _print_layouts(found, console)
    _print_cells(found, console)
    for sentence in many_sentences(found):
        say(console, sentence)
    _print_errors(found, console)
    for warning in found.warnings:
        say(console, f"- {warning}", style="yellow")
    say(console, CAUTIONS[0])
    say(console, CAUTIONS[-1])


def _print_layouts(found: Many, console: Console) -> None:
    from rich.text import Text

    from layout.outputs.terminal import new_table

    table = new_table(f"Layouts over {len(found.cells)} cells")
    table.add_column("")
    table.add_column("layout", overflow="fold")
    for heading, width in (("cells", 5), ("best in", 7), ("median %", 8), ("worst %", 7), ("in cell", 7)):
        table.add_column(heading, justify="right", max_width=width, no_wrap=True)
    for place, one in enumerate(found.standings()):
        table.add_row(
            _letter(place),
            Text(shortened(one.name, 60)),
            str(one.judged),
            str(one.best),
            fixed(one.median_share, 1, "-"),
            fixed(one.worst_share, 1, "-"),
            "-" if one.worst_cell is None else str(one.worst_cell + 1),
        )
    console.print(table)


def _print_cells(found: Many, console: Console) -> None:
    from rich.text import Text

    from layout.outputs.terminal import new_table

    table = new_table("Cells: value and gap to the bound of the layout that a search there finds")
    table.add_column("no.", justify="right", no_wrap=True)
    varied = _varied(found)
    heads = len({one.cell.head for one in found.cells}) > 1
    if heads:
        table.add_column("head", overflow="fold", max_width=23)
    if found.by:
        table.add_column("count" if found.by == "count" else "budget", justify="right", no_wrap=True)
    for heading in varied:
        table.add_column(heading, justify="right", max_width=6)
    for heading in (found.unit, "gap %"):
        table.add_column(heading, justify="right", no_wrap=True)
    singly = len(found.layouts) <= MOST_COLUMNS
    for heading in [f"% {_letter(place)}" for place in range(len(found.layouts))] if singly else ["best"]:
        table.add_column(heading, justify="right" if singly else "left", no_wrap=True)
    for number, cell in enumerate(found.cells[:MOST_ROWS], 1):
        row = [str(number)]
        row += [one_line(cell.cell.head)] if heads else []
        row += [significant(cell.cell.amount, 6)] if found.by else []
        row += [_shown(cell.cell, name) for name in varied.values()]
        row += [fixed(cell.designed, 3, "-"), rounded_up(gap_in(found, cell, cell.designed), 2, "-")]
        row += _layout_cells(found, cell, singly)
        table.add_row(*(Text(text) for text in row))
    console.print(table)


def _layout_cells(found: Many, cell: CellResult, singly: bool) -> list[str]:
    best = found.best(cell)
    if not singly:
        return [" ".join(_letter(place) for place, name in enumerate(found.layouts) if name in best) or "-"]
    shares = [(fixed(found.share(cell, one), 1, "-"), one.name in best) for one in cell.layouts]
    return [f"{share}{'*' if is_best else ' '}" for share, is_best in shares]


def _letter(place: int) -> str:
    """A, B ... Z, then numbers: what the tables call a layout."""
    return LETTERS[place] if place < len(LETTERS) else str(place + 1)


def _varied(found: Many) -> dict[str, str]:
    """The headings of what differs among the cells; conductivities only where no factor on the skull tells them."""
    heads = len({one.cell.head for one in found.cells})
    differ = {
        heading: name
        for heading, name in VARIED.items()
        if len({(one.cell.head, getattr(one.cell, name)) for one in found.cells}) > heads
    }
    if "skull" in differ:
        differ.pop("S/m", None)
    return differ


def _shown(cell: Cell, name: str) -> str:
    value = getattr(cell, name)
    if isinstance(value, tuple):
        return " ".join(significant(one, 4) for one in value)
    return f"x{significant(value, 4)}"


def many_sentences(found: Many) -> tuple[str, ...]:
    """What the tables show, and how often the order of the layouts changes, in words."""
    said = []
    if len(found.cells) > MOST_ROWS:
        said.append(f"Cells {MOST_ROWS + 1} to {len(found.cells)} are in cells.csv.")
    share = "value as a share of that of" if found.unit == "bits" else "share of the value that is the error of"
    said.append(f"%: {share} the layout that a search in the cell finds; *: no other layout is better there.")
    orders = [(number, order) for number, cell in enumerate(found.cells, 1) if (order := found.order(cell)) is not None]
    told = [(number, order) for number, order in orders if order.pairs]
    if not told:
        return (*said, "Order of the layouts: no two cells tell two layouts apart, so that it cannot change.")
    changed = [number for number, order in told if order.reversed]
    pairs, turned = sum(order.pairs for _, order in told), sum(order.reversed for _, order in told)
    same = {"count": " of as many sensors", "budget": " of this budget"}.get(found.by, "")
    text = (
        f"Order of the layouts: against the first cell{same} it changes in {len(changed)} of {len(told)} cells "
        f"({turned} of {pairs} pairs)"
    )
    if changed:
        least, at = min((order.tau, number) for number, order in told)
        mean = sum(order.tau for _, order in told) / len(told)
        text += f"; Kendall's tau is {fixed(mean, 2)} on average and {fixed(least, 2)} at the least, in cell {at}"
    return (*said, text + ".")


def _print_errors(found: Many, console: Console) -> None:
    from layout.outputs.terminal import say

    failed: dict[str, list[str]] = {}
    for number, cell in enumerate(found.cells, 1):
        if cell.error:
            failed.setdefault(cell.error.rstrip("."), []).append(str(number))
    if failed:
        total = sum(len(numbers) for numbers in failed.values())
        say(console, f"{total} of {len(found.cells)} cells have no result:", style="yellow")
    for error, numbers in list(failed.items())[:MOST_ERRORS]:
        more = f" and {len(numbers) - MOST_NUMBERS} more" if len(numbers) > MOST_NUMBERS else ""
        word = "cell" if len(numbers) == 1 else "cells"
        say(console, f"- {word} {', '.join(numbers[:MOST_NUMBERS])}{more}: {error}.")
    if len(failed) > MOST_ERRORS:
        say(console, f"- {len(failed) - MOST_ERRORS} other errors are in cells.csv.")
