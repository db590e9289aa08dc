"""The curve of value and bound against what is spent, as a table, as columns' meaning and on a terminal."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import asdict, dataclass, field
from typing import TYPE_CHECKING

from layout.evidence.curve import first_to_reach, knee
from layout.outputs.cautions import CAUTIONS
from layout.outputs.plain import bound_text, fixed, one_line, rounded_up, significant

if TYPE_CHECKING:
    from rich.console import Console

SHARES = (80.0, 90.0, 95.0)  # per cent of the ceiling


@dataclass(frozen=True)
class CurvePoint:
    """The best layout met for so much; numbers as printed (bits or mm).

    spent: sensors, or money. bound: what no allowed layout for as much can pass. chosen, names: its candidates.
    even_spread, standard: values of the baselines of as many sensors of each entry, None where there is none.
    equals_even_spread_of: None where even the largest even spread tried (even_spread_limit; 0: none was) does not do as
    well. next_value, next_name: of the best single sensor more, counts and money aside; None where the rules leave no
    place. keeps_limits: whether its errors keep the brief's limits.
    """

    spent: float
    sensors: int
    channels: int
    value: float
    bound: float
    cost: float
    chosen: tuple[int, ...]
    names: tuple[str, ...]
    even_spread: float | None
    standard: float | None
    equals_even_spread_of: int | None
    even_spread_limit: int
    next_value: float | None
    next_name: str | None
    keeps_limits: bool = True
    stopped_by_clock: bool = False


@dataclass(frozen=True)
class Curve:
    """points in rising order; ceiling: the value of every candidate at once, `ceiling_channels` channels; by: "count"
    or "budget"; warnings: what to know.
    """

    title: str
    unit: str
    by: str
    nested: bool
    points: tuple[CurvePoint, ...]
    ceiling: float
    ceiling_channels: int
    warnings: tuple[str, ...] = field(default=())

    def share(self, value: float) -> float:
        """Per cent of the ceiling: of its bits, or how near the error is to its error (100: as small)."""
        return share_of(value, self.ceiling, self.unit)

    @property
    def knee(self) -> int | None:
        """Place of the knee among the points: of the bits, or of minus the error."""
        scores = [one.value if self.unit == "bits" else -one.value for one in self.points]
        return knee([one.spent for one in self.points], scores)


def share_of(value: float, best: float, unit: str) -> float:
    """Per cent that a value is of the best: value / best for bits, best / value for an error."""
    above, below = (value, best) if unit == "bits" else (best, value)
    return 100.0 * above / below if below else 0.0


def gap_of(value: float, bound: float, unit: str) -> float:
    """Distance of value and bound in per cent: of the bound for bits, of the value for an error; never below 0."""
    gap, whole = (bound - value, bound) if unit == "bits" else (value - bound, value)
    return max(0.0, 100.0 * gap / whole) if whole > 0 else 0.0


def point_json(point: CurvePoint, key: str) -> str:
    """A point with the key of its run, every number to the last digit."""
    return json.dumps({"key": key, **asdict(point)}, indent=1) + "\n"


def point_from(content: object, key: str) -> CurvePoint | None:
    """The point of such a file; None where it is of another run or damaged."""
    if not isinstance(content, dict) or content.get("key") != key:
        return None
    said = {name: value for name, value in content.items() if name != "key"}
    try:
        return CurvePoint(**{**said, "chosen": tuple(said["chosen"]), "names": tuple(said["names"])})
    except (KeyError, TypeError):
        return None


COLUMNS = {
    "{by}": ("{spent}", ""),
    "sensors": ("Sensors of the layout", ""),
    "channels": ("Channels of the layout, the reference contact counted", ""),
    "value_{unit}": ("{goal} of the best layout met", "{unit}"),
    "bound_{unit}": ("What no allowed layout {for_as_much} can pass", "{unit}"),
    "gap_percent": ("Distance of value and bound, as a share of {whole}", "percent"),
    "percent_of_ceiling": ("{share}", "percent"),
    "even_spread_{unit}": ("Value of an even spread of as many sensors; empty where there is none", "{unit}"),
    "standard_{unit}": ("Value of standard positions, the coarser families first; empty where too few", "{unit}"),
    "equals_even_spread_of": (
        "Sensors that an even spread needs to reach the value; empty where none reaches it or none was tried",
        "",
    ),
    "even_spread_limit": ("Sensors of the largest even spread tried, 0: none was tried", ""),
    "next_sensor_{unit}": (
        "What the best single sensor more improves the value by; empty where none fits",
        "{unit}",
    ),
    "next_sensor": ("Name of that candidate", ""),
    "cost": ("Price of the layout, in the brief's own unit", ""),
    "keeps_limits": ("yes: the errors keep the limits that the brief sets, or it sets none; no: they do not", ""),
    "knee": ("yes at the knee: the point farthest above the line from the first to the last point, axes scaled", ""),
    "names": ("Chosen candidates by name, parted by semicolons", ""),
}


def curve_csv(curve: Curve) -> str:
    """One row for each point; columns.json defines the columns."""
    at = curve.knee
    rows = []
    for place, one in enumerate(curve.points):
        gain = None if one.next_value is None else abs(one.next_value - one.value)
        rows.append(
            [
                significant(one.spent, 9),
                str(one.sensors),
                str(one.channels),
                significant(one.value, 9),
                significant(one.bound, 9),
                significant(gap_of(one.value, one.bound, curve.unit), 6),
                significant(curve.share(one.value), 6),
                significant(one.even_spread, 9),
                significant(one.standard, 9),
                "" if one.equals_even_spread_of is None else str(one.equals_even_spread_of),
                str(one.even_spread_limit),
                significant(gain, 6),
                one_line(one.next_name or ""),
                significant(one.cost, 9),
                "yes" if one.keeps_limits else "no",
                "yes" if place == at else "no",
                ";".join(one_line(name) for name in one.names),
            ]
        )
    return csv_text([name.format(by=curve.by, unit=curve.unit) for name in COLUMNS], rows)


def csv_text(columns: list[str], rows: list[list[str]]) -> str:
    """A comma-separated table with a header."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(rows)
    return text.getvalue()


def columns_text(tables: dict[str, dict[str, tuple[str, str]]], **words: str) -> str:
    """columns.json of tables: file -> column -> (description, units), words put in."""
    return (
        json.dumps(
            {
                file: {
                    name.format(**words): {"Description": text.format(**words)}
                    | ({"Units": units.format(**words)} if units else {})
                    for name, (text, units) in columns.items()
                }
                for file, columns in tables.items()
            },
            indent=2,
            ensure_ascii=False,
        )
        + "\n"
    )


def curve_columns(curve: Curve) -> str:
    """columns.json of a curve."""
    bits = curve.unit == "bits"
    return columns_text(
        {"curve.csv": COLUMNS},
        by=curve.by,
        unit=curve.unit,
        spent="Sensors in all" if curve.by == "count" else "What the layout may cost",
        goal="Information about the regions" if bits else "Linearised localisation error, smaller is better,",
        whole="the bound" if bits else "the value",
        for_as_much="of as many sensors" if curve.by == "count" else "for as much money",
        share="Value as a share of that of every candidate at once"
        if bits
        else "Error of every candidate at once as a share of the value",
    )


def print_curve(curve: Curve, console: Console) -> None:
    """The curve, its knee and where it saturates. Fits 80 columns."""
    from layout.outputs.terminal import new_table, say

    say(console, curve.title, style="bold")
    kind = "each layout contains the smaller ones" if curve.nested else "each searched anew"
    table = new_table(f"Value against {'sensors' if curve.by == 'count' else 'budget'}, {kind}")
    headings = [] if curve.by == "count" else ["budget"]
    headings += ["sensors", curve.unit, "bound", "gap %", "% of ceiling", "even spread", "standard", "equals even"]
    headings += ["next buys"]
    widths = {"% of ceiling": 7, "even spread": 7, "standard": 8, "equals even": 8, "next buys": 7}
    for heading in headings:
        table.add_column(heading, justify="right", max_width=widths.get(heading))
    at = curve.knee
    for place, one in enumerate(curve.points):
        gain = None if one.next_value is None else abs(one.next_value - one.value)
        equal = str(one.equals_even_spread_of) if one.equals_even_spread_of is not None else "-"
        if one.equals_even_spread_of is None and one.even_spread_limit:
            equal = f">{one.even_spread_limit}"
        table.add_row(
            *([] if curve.by == "count" else [significant(one.spent, 6)]),
            f"{one.sensors}{'*' if place == at else ''}",
            fixed(one.value, 3),
            bound_text(one.bound, curve.unit),
            rounded_up(gap_of(one.value, one.bound, curve.unit), 1),
            fixed(curve.share(one.value), 1),
            fixed(one.even_spread, 3, "-"),
            fixed(one.standard, 3, "-"),
            equal,
            fixed(gain, 3, "-"),
        )
    console.print(table)
    say(
        console,
        "equals even: how many sensors an even spread needs to do as well; next buys: what the best single sensor more "
        "improves the value by, counts and money aside.",
    )
    for sentence in curve_sentences(curve):
        say(console, sentence)
    for warning in curve.warnings:
        say(console, warning, style="yellow")
    for caution in CAUTIONS[:1]:
        say(console, caution)


def curve_sentences(curve: Curve) -> tuple[str, ...]:
    """Knee, ceiling and where the curve comes near it, in words."""
    thing = "numbers of sensors" if curve.by == "count" else "budgets"
    said = []
    if curve.knee is None:
        said.append("No knee: no point stands out from the line between the first and the last.")
    else:
        said.append(
            f"Knee (*): {_spent(curve, curve.points[curve.knee])}, the point farthest above the line from the first to "
            f"the last point, both axes scaled to 1; it depends on where the curve ends."
        )
    shares = [curve.share(one.value) for one in curve.points]
    reached = []
    for wanted in SHARES:
        place = first_to_reach(shares, wanted)
        where = "by none" if place is None else f"from {_spent(curve, curve.points[place])}"
        reached.append(f"{wanted:g} % {where}")
    said.append(
        f"Ceiling: all candidates at once ({curve.ceiling_channels} channels) give {fixed(curve.ceiling, 3)} "
        f"{curve.unit}; share reached by the {thing} tried: {', '.join(reached)}."
    )
    return tuple(said)


def _spent(curve: Curve, point: CurvePoint) -> str:
    return f"{point.sensors} sensors" if curve.by == "count" else f"a budget of {significant(point.spent, 6)}"
