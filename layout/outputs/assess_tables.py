"""Given layouts side by side: value, bound, regions, channels, ceilings, other models; tables and terminal."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from layout.evidence.wrong_models import OrderChange
from layout.outputs.cautions import CAUTIONS
from layout.outputs.curve_tables import columns_text, csv_text, gap_of, share_of
from layout.outputs.plain import bound_text, fixed, one_line, rounded_up, shortened, significant
from layout.outputs.result import RegionFigure
from layout.units import MM

if TYPE_CHECKING:
    from rich.console import Console

NAMES = ("layouts.csv", "regions.csv", "channels.csv", "models.csv", "columns.json")


@dataclass(frozen=True)
class AssessedLayout:
    """One given layout; numbers as printed (bits or mm). best: what a search of as many sensors of each kind finds, and
    bound: what no such layout can pass; None where none keeps the brief's rules. names: its candidates, lost: what the
    value loses without each. keeps_rules: whether it keeps the brief's rules itself, its cost aside.
    """

    name: str
    value: float
    best: float | None
    bound: float | None
    cost: float
    names: tuple[str, ...]
    lost: tuple[float, ...]
    channels: int
    per_region: dict[str, RegionFigure]
    keeps_rules: bool
    notes: tuple[str, ...]


@dataclass(frozen=True)
class Ceiling:
    """What a dense cap would give: its name, value and channels."""

    name: str
    value: float
    channels: int


@dataclass(frozen=True)
class OtherModel:
    """How layouts fare under one model. values: layout name -> value there. designed: value and bound there of the
    layout that a search under this model finds, of as many sensors as the first given layout. order: how the order of
    all these layouts changes against the brief's own model; None for that model itself.
    """

    name: str
    values: dict[str, float]
    designed: float
    bound: float
    order: OrderChange | None


@dataclass(frozen=True)
class Assessment:
    """Given layouts under a brief. models: empty where they were not asked for."""

    title: str
    unit: str
    layouts: tuple[AssessedLayout, ...]
    ceilings: tuple[Ceiling, ...]
    models: tuple[OtherModel, ...]
    notes: tuple[str, ...]


LAYOUTS = {
    "row": ("layout: a given layout; ceiling: a dense cap, more sensors than the brief allows", ""),
    "name": ("Name of the layout or ceiling", ""),
    "sensors": ("Sensors of the layout, empty for ceilings", ""),
    "channels": ("Channels, the reference contact counted", ""),
    "value_{unit}": ("{goal} under the brief's model of head and noise", "{unit}"),
    "best_found_{unit}": (
        "Best layout that a search finds with as many sensors of each kind under the brief's rules, money aside",
        "{unit}",
    ),
    "bound_{unit}": ("What no layout of as many sensors of each kind that keeps these rules can pass", "{unit}"),
    "percent_of_best_found": ("{share} best found", "percent"),
    "percent_of_bound": ("{share} bound: at least so near to the best possible", "percent"),
    "percent_of_ceiling": ("{share} ceiling of all candidates at once", "percent"),
    "cost": ("Price of the layout, in the brief's own unit", ""),
    "keeps_rules": ("yes: it keeps the brief's rules, counts and money aside; no: it does not", ""),
    "note": ("What was moved or guessed to find it among the candidates", ""),
}
REGIONS = {
    "layout": ("Name of the layout", ""),
    "region": ("Name of the region", ""),
    "bits": ("Information about this region alone, the others being nuisance", "bits"),
    "error_rms_mm": ("Linearised localisation error, rms over the region; empty where no errors were asked for", "mm"),
    "error_worst_mm": ("The largest in the region", "mm"),
}
CHANNELS = {
    "layout": ("Name of the layout", ""),
    "sensor": ("Candidate by name", ""),
    "lost_without_{unit}": ("What the layout loses without this sensor", "{unit}"),
    "percent_of_value": ("The same as a share of the value", "percent"),
}
MODELS = {
    "model": ("Model of head or noise under which the layouts are judged", ""),
    "layout": ("Name of the layout", ""),
    "value_{unit}": ("Value under that model", "{unit}"),
    "designed_for_it_{unit}": ("Value there of the layout that a search under that model finds", "{unit}"),
    "bound_{unit}": ("What no layout of as many sensors as the first can pass there", "{unit}"),
    "percent_of_designed": ("{share} layout designed for that model", "percent"),
    "pairs": ("Pairs of layouts that both models tell apart; empty for the brief's own model", ""),
    "pairs_reversed": ("How many of them change their order against the brief's own model", ""),
    "kendall_tau": ("1 - 2 x reversed / pairs", ""),
}


def assess_files(found: Assessment) -> dict[str, str]:
    """File name -> content."""
    bits = found.unit == "bits"
    tables = {"layouts.csv": LAYOUTS, "regions.csv": REGIONS, "channels.csv": CHANNELS}
    files = {"layouts.csv": layouts_csv(found), "regions.csv": regions_csv(found), "channels.csv": channels_csv(found)}
    if found.models:
        tables["models.csv"], files["models.csv"] = MODELS, models_csv(found)
    files["columns.json"] = columns_text(
        tables,
        unit=found.unit,
        goal="Information about the regions" if bits else "Linearised localisation error, smaller is better,",
        share="Value as a share of that of the" if bits else "Share of the value that is the error of the",
    )
    return files


def layouts_csv(found: Assessment) -> str:
    """The given layouts, then the ceilings."""
    rows = []
    top = found.ceilings[-1].value
    for one in found.layouts:
        rows.append(
            [
                "layout",
                one_line(one.name),
                str(len(one.names)),
                str(one.channels),
                *(significant(value, 9) for value in (one.value, one.best, one.bound)),
                *(significant(_share(one.value, best, found.unit), 6) for best in (one.best, one.bound, top)),
                significant(one.cost, 9),
                "yes" if one.keeps_rules else "no",
                "; ".join(one_line(note) for note in one.notes),
            ]
        )
    for one in found.ceilings:
        share = significant(_share(one.value, top, found.unit), 6)
        value = significant(one.value, 9)
        rows.append(["ceiling", one.name, "", str(one.channels), value, "", "", "", "", share, "", "", ""])
    return _csv(LAYOUTS, rows, found)


def regions_csv(found: Assessment) -> str:
    """One row for each layout and region."""
    rows = [
        [
            one_line(one.name),
            one_line(name),
            significant(figure.bits, 9),
            significant(None if figure.error_rms is None else figure.error_rms / MM, 9),
            significant(None if figure.error_worst is None else figure.error_worst / MM, 9),
        ]
        for one in found.layouts
        for name, figure in one.per_region.items()
    ]
    return _csv(REGIONS, rows, found)


def channels_csv(found: Assessment) -> str:
    """One row for each layout and sensor."""
    rows = [
        [
            one_line(one.name),
            one_line(name),
            significant(lost, 6),
            significant(100 * lost / one.value if one.value else 0.0, 6),
        ]
        for one in found.layouts
        for name, lost in zip(one.names, one.lost, strict=True)
    ]
    return _csv(CHANNELS, rows, found)


def models_csv(found: Assessment) -> str:
    """One row for each model and layout."""
    rows = []
    for model in found.models:
        order = model.order
        turned = ["", "", ""] if order is None else [str(order.pairs), str(order.reversed), significant(order.tau, 6)]
        for name, value in model.values.items():
            share = significant(_share(value, model.designed, found.unit), 6)
            numbers = [significant(one, 9) for one in (value, model.designed, model.bound)]
            rows.append([one_line(model.name), one_line(name), *numbers, share, *turned])
    return _csv(MODELS, rows, found)


def _csv(columns: dict[str, tuple[str, str]], rows: list[list[str]], found: Assessment) -> str:
    return csv_text([name.format(unit=found.unit) for name in columns], rows)


def _share(value: float, best: float | None, unit: str) -> float | None:
    return None if best is None else share_of(value, best, unit)


def print_assessment(found: Assessment, console: Console) -> None:
    """Layouts side by side, ceilings, regions, channels and other models. Fits 80 columns."""
    from rich.text import Text

    from layout.outputs.terminal import new_table, say

    unit, top = found.unit, found.ceilings[-1].value
    say(console, found.title, style="bold")
    table = new_table("Given layouts, beside the best of as many sensors")
    table.add_column("layout", overflow="fold", max_width=20)
    for heading in ("sensors", unit, "best found", "bound", "% of best", "% of bound", "% of ceiling"):
        table.add_column(heading, justify="right", max_width=8)
    for one in found.layouts:
        shares = [fixed(_share(one.value, best, unit), 1, "-") for best in (one.best, one.bound, top)]
        bound = bound_text(one.bound, unit, "-")
        cells = [str(len(one.names)), fixed(one.value, 3), fixed(one.best, 3, "-"), bound, *shares]
        table.add_row(Text(shortened(one.name, 60)), *cells)
    console.print(table)
    last = found.ceilings[-1]
    # The first options of all sites are all there is where a site has one option.
    for one in (one for one in found.ceilings if one is last or one.channels != last.channels):
        say(console, f"Ceiling: {one.name}, {one.channels} channels: {fixed(one.value, 3)} {unit}")
    for one in found.layouts:
        for note in one.notes:
            say(console, f"- {shortened(one.name, 40)}: {note}")
    _print_regions(found, console)
    for one in found.layouts:
        worth = sorted(zip(one.lost, one.names, strict=True), reverse=True)
        listed = ", ".join(f"{one_line(name)} {fixed(lost, 3)}" for lost, name in worth)
        say(console, f"Lost without each sensor of {shortened(one.name, 40)} [{unit}]: {listed}")
    if found.models:
        _print_models(found, console)
    for note in found.notes:
        say(console, f"- {note}")
    say(console, CAUTIONS[-1])


def _print_regions(found: Assessment, console: Console) -> None:
    from rich.text import Text

    from layout.outputs.terminal import new_table

    errors = any(figure.error_rms is not None for one in found.layouts for figure in one.per_region.values())
    table = new_table("Each region alone")
    table.add_column("layout", overflow="fold", max_width=24)
    table.add_column("region", overflow="fold")
    for heading in ["bits", *(["mm rms", "mm worst"] if errors else [])]:
        table.add_column(heading, justify="right", no_wrap=True)
    for one in found.layouts:
        for name, figure in one.per_region.items():
            sizes = [figure.error_rms, figure.error_worst] if errors else []
            cells = [fixed(None if size is None else size / MM, 2, "-") for size in sizes]
            table.add_row(Text(shortened(one.name, 40)), Text(one_line(name)), fixed(figure.bits, 3), *cells)
    console.print(table)


def _print_models(found: Assessment, console: Console) -> None:
    from rich.text import Text

    from layout.outputs.terminal import new_table, say

    first = found.layouts[0].name
    table = new_table("Under other models than the brief's")
    table.add_column("model", overflow="fold", max_width=26)
    for heading in ("first layout", "designed for it", "bound", "gap %", "% of designed", "pairs turned"):
        table.add_column(heading, justify="right", max_width=9)
    for model in found.models:
        value = model.values[first]
        turned = "-" if model.order is None else f"{model.order.reversed}/{model.order.pairs}"
        table.add_row(
            Text(one_line(model.name)),
            fixed(value, 3),
            fixed(model.designed, 3),
            fixed(model.bound, 3),
            rounded_up(gap_of(model.designed, model.bound, found.unit), 1),
            fixed(share_of(value, model.designed, found.unit), 1),
            turned,
        )
    console.print(table)
    say(console, "pairs turned: how many pairs of the different layouts in models.csv change order, of those not tied.")
