"""Many cells as tables, as columns' meaning and as JSON. Times have a table of their own."""

from __future__ import annotations

import json

from layout.outputs.cautions import CAUTIONS
from layout.outputs.curve_tables import columns_text, csv_text, gap_of
from layout.outputs.many.result import CellResult, JudgedLayout, Many
from layout.outputs.plain import for_json, one_line, significant

SCHEMA = 1
CELL = {
    "cell": ("Number of the cell from 1, in the plan's order", ""),
    "head": ("Head by the plan's name", ""),
    "conductivities_s_per_m": ("Conductivities of the cell's head, from the brain outwards, semicolons between", "S/m"),
    "skull_conductivity_factor": ("What the skull's conductivity was multiplied by; the column before holds it", ""),
    "count": ("Sensors that the cell's layouts must have; empty where the plan has no counts", ""),
    "budget": ("What the cell's layouts may cost; empty where the plan has no budgets", ""),
    "noise_factor": ("Factor on all noise amplitudes", ""),
    "sensor_noise_factor": ("Factor on the sensors' own noise", ""),
    "background_factor": ("Factor on the background brain activity", ""),
}
MANY = CELL | {
    "layout": ("Name of the layout by the plan", ""),
    "value_{unit}": ("{goal} of this layout in this cell; empty where there is an error", "{unit}"),
    "bound_{unit}": ("What no allowed layout of the cell can pass; empty where this layout is not allowed", "{unit}"),
    "gap_percent": ("Distance of value and bound, as a share of {whole}", "percent"),
    "percent_of_designed": ("{share} layout that a search in this cell finds", "percent"),
    "best": ("yes: no other layout of the plan is better in this cell; no: one is", ""),
    "sensors": ("Sensors of the layout", ""),
    "channels": ("Channels of the layout, the reference contact counted", ""),
    "cost": ("Price of the layout, in the brief's own unit", ""),
    "within_rules": ("yes: it keeps every rule of the cell; no: it does not, and the bound is not for it", ""),
    "names": ("Chosen candidates by name, parted by semicolons", ""),
    "error": ("Why there is no value", ""),
}
CELLS = CELL | {
    "designed_{unit}": ("{goal} of the layout that a search in this cell finds", "{unit}"),
    "bound_{unit}": ("What no allowed layout of the cell can pass", "{unit}"),
    "gap_percent": ("Distance of the two, as a share of {whole}", "percent"),
    "best": ("The best of the plan's layouts here; several, parted by semicolons, where they tie", ""),
    "pairs": ("Pairs of layouts told apart here and in the first cell of this amount; empty for that cell", ""),
    "pairs_reversed": ("How many of them change their order against that cell", ""),
    "kendall_tau": ("1 - 2 x reversed / pairs; empty without pairs", ""),
    "stopped_by_clock": ("yes: the brief's time allowance ended the search; no: it did not", ""),
    "names": ("Candidates of the designed layout by name, parted by semicolons", ""),
    "error": ("Why the cell has no result", ""),
}
LAYOUTS = {
    "layout": ("Name of the layout by the plan", ""),
    "cells": ("Cells in which it has a value", ""),
    "best_in": ("Of them, cells in which no other layout of the plan is better", ""),
    "median_percent": ("{share} layout that a search in the cell finds, median over the cells", "percent"),
    "worst_percent": ("The same in the worst cell", "percent"),
    "worst_cell": ("Number of that cell", ""),
}
TIMES = {"cell": CELL["cell"], "seconds": ("What the cell took on its worker, now or in an earlier run", "s")}


def many_files(found: Many) -> dict[str, str]:
    """File name -> content."""
    bits = found.unit == "bits"
    columns = columns_text(
        {"many.csv": MANY, "cells.csv": CELLS, "layouts.csv": LAYOUTS, "times.csv": TIMES},
        unit=found.unit,
        goal="Information about the regions" if bits else "Linearised localisation error, smaller is better,",
        whole="the bound" if bits else "the value",
        share="Value as a share of that of the" if bits else "Share of the value that is the error of the",
    )
    return {
        "many.csv": many_csv(found),
        "cells.csv": cells_csv(found),
        "layouts.csv": layouts_csv(found),
        "many.json": many_json(found),
        "columns.json": columns,
        "times.csv": times_csv(found),
    }


def _cell(found: Many, number: int) -> list[str]:
    cell = found.cells[number].cell
    amount = significant(cell.amount, 9)
    return [
        str(number + 1),
        one_line(cell.head),
        ";".join(significant(one, 9) for one in cell.conductivities),
        significant(cell.skull_factor, 9),
        amount if found.by == "count" else "",
        amount if found.by == "budget" else "",
        *(significant(one, 9) for one in (cell.noise_factor, cell.sensor_factor, cell.background_factor)),
    ]


def gap_in(found: Many, cell: CellResult, value: float | None) -> float | None:
    """Gap in per cent between a value and the cell's bound; None without either."""
    return None if value is None or cell.bound is None else gap_of(value, cell.bound, found.unit)


def many_csv(found: Many) -> str:
    """One row for each cell and layout."""
    rows = []
    for number, cell in enumerate(found.cells):
        best = found.best(cell)
        for one in cell.layouts:
            bound = cell.bound if one.within_rules else None
            rows.append(
                [
                    *_cell(found, number),
                    one_line(one.name),
                    significant(one.value, 9),
                    significant(bound, 9),
                    significant(gap_in(found, cell, one.value if one.within_rules else None), 6),
                    significant(found.share(cell, one), 6),
                    "" if one.value is None else _yes(one.name in best),
                    *("" if size is None else str(size) for size in (one.sensors, one.channels)),
                    significant(one.cost, 9),
                    "" if one.value is None else _yes(one.within_rules),
                    _names(one.names),
                    one_line(one.error),
                ]
            )
    return csv_text([name.format(unit=found.unit) for name in MANY], rows)


def cells_csv(found: Many) -> str:
    """One row for each cell."""
    rows = []
    for number, cell in enumerate(found.cells):
        order = found.order(cell)
        turned = ["", "", ""] if order is None else [str(order.pairs), str(order.reversed), significant(order.tau, 6)]
        rows.append(
            [
                *_cell(found, number),
                significant(cell.designed, 9),
                significant(cell.bound, 9),
                significant(gap_in(found, cell, cell.designed), 6),
                _names(found.best(cell)),
                *turned,
                "" if cell.error else _yes(cell.stopped_by_clock),
                _names(cell.names),
                one_line(cell.error),
            ]
        )
    return csv_text([name.format(unit=found.unit) for name in CELLS], rows)


def layouts_csv(found: Many) -> str:
    """One row for each layout over all cells."""
    rows = [
        [
            one_line(one.name),
            str(one.judged),
            str(one.best),
            significant(one.median_share, 6),
            significant(one.worst_share, 6),
            "" if one.worst_cell is None else str(one.worst_cell + 1),
        ]
        for one in found.standings()
    ]
    return csv_text(list(LAYOUTS), rows)


def times_csv(found: Many) -> str:
    """One row for each cell."""
    rows = [[str(number), significant(one, 4)] for number, one in enumerate(found.seconds, 1)]
    return csv_text(list(TIMES), rows)


def many_json(found: Many) -> str:
    """All of it for programs, times left out."""
    content = {
        "schema": SCHEMA,
        "version": found.version,
        "title": found.title,
        "brief_sha256": found.brief_sha256,
        "unit": found.unit,
        "amounts": found.by,
        "layouts": [
            {
                "name": one.name,
                "cells": one.judged,
                "best_in": one.best,
                "median_percent_of_designed": one.median_share,
                "worst_percent_of_designed": one.worst_share,
                "worst_cell": None if one.worst_cell is None else one.worst_cell + 1,
            }
            for one in found.standings()
        ],
        "cells": [_cell_json(found, number) for number in range(len(found.cells))],
        "warnings": found.warnings,
        "cautions": CAUTIONS,
    }
    return json.dumps(for_json(content), indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def _cell_json(found: Many, number: int) -> dict[str, object]:
    result = found.cells[number]
    cell, order = result.cell, found.order(result)
    return {
        "cell": number + 1,
        "head": cell.head,
        "conductivities_s_per_m": cell.conductivities,
        "skull_conductivity_factor": cell.skull_factor,
        "amount": cell.amount,
        "noise_factor": cell.noise_factor,
        "sensor_noise_factor": cell.sensor_factor,
        "background_factor": cell.background_factor,
        "designed": result.designed,
        "bound": result.bound,
        "gap_percent": gap_in(found, result, result.designed),
        "designed_names": result.names,
        "stopped_by_clock": result.stopped_by_clock,
        "best": found.best(result),
        "pairs": None if order is None else order.pairs,
        "pairs_reversed": None if order is None else order.reversed,
        "kendall_tau": None if order is None else order.tau,
        "error": result.error or None,
        "layouts": [_layout_json(found, result, one) for one in result.layouts],
    }


def _layout_json(found: Many, cell: CellResult, one: JudgedLayout) -> dict[str, object]:
    return {
        "name": one.name,
        "value": one.value,
        "percent_of_designed": found.share(cell, one),
        "gap_percent": gap_in(found, cell, one.value if one.within_rules else None),
        "sensors": one.sensors,
        "channels": one.channels,
        "cost": one.cost,
        "within_rules": one.within_rules,
        "names": one.names,
        "error": one.error or None,
    }


def _yes(said: bool) -> str:
    return "yes" if said else "no"


def _names(names: tuple[str, ...]) -> str:
    return ";".join(one_line(name) for name in names)
