"""What comes out of many cells: one result a cell, as frozen objects that JSON can carry."""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass, fields

from layout.evidence.wrong_models import OrderChange, order_change
from layout.outputs.curve_tables import share_of

TIE = 1e-9  # relative: values nearer than this are the same


@dataclass(frozen=True)
class Cell:
    """One combination of a plan. conductivities [S/m], from the brain outwards: of the cell's head, factor included.
    amount: sensors or money, None where it is as the brief has it.
    """

    head: str
    conductivities: tuple[float, ...]
    skull_factor: float = 1.0
    amount: float | None = None
    noise_factor: float = 1.0
    sensor_factor: float = 1.0
    background_factor: float = 1.0


@dataclass(frozen=True)
class JudgedLayout:
    """One layout in one cell; numbers as printed (bits or mm), names: its candidates.

    within_rules: it keeps every rule of the cell, so that the cell's bound holds for it. error: why it has no value, ""
    where it has one; value, sensors, channels and cost are then None.
    """

    name: str
    value: float | None
    sensors: int | None
    channels: int | None
    cost: float | None
    names: tuple[str, ...]
    within_rules: bool
    error: str = ""


@dataclass(frozen=True)
class CellResult:
    """One cell. designed: value of the layout that a search in this cell finds; chosen, names: its candidates; bound:
    what no allowed layout of the cell can pass.

    error: why the cell has no result, "" where it has one. again: the error may be gone at another try (a lost
    worker), so that a restart runs the cell anew. stopped_by_clock: the search was.
    """

    cell: Cell
    unit: str
    designed: float | None
    bound: float | None
    chosen: tuple[int, ...]
    names: tuple[str, ...]
    layouts: tuple[JudgedLayout, ...]
    stopped_by_clock: bool = False
    error: str = ""
    again: bool = False


@dataclass(frozen=True)
class Standing:
    """How one layout fares over all cells. judged: cells where it has a value; best: of them, those where no other
    layout is better; shares: per cent of the layout designed for the cell, in the median and in the worst cell;
    worst_cell: its place, None where it is nowhere worse than that.
    """

    name: str
    judged: int
    best: int
    median_share: float | None
    worst_share: float | None
    worst_cell: int | None


@dataclass(frozen=True)
class Many:
    """All cells of a plan, in its order; layouts: their names, by: what the amounts are, None without them.

    seconds: what each cell took, None where it was not run now; warnings: what to know.
    """

    title: str
    version: str
    brief_sha256: str
    unit: str
    by: str | None
    layouts: tuple[str, ...]
    cells: tuple[CellResult, ...]
    seconds: tuple[float | None, ...]
    warnings: tuple[str, ...] = ()

    def share(self, cell: CellResult, layout: JudgedLayout) -> float | None:
        """Per cent that a layout's value is of the cell's own design; None without either."""
        if layout.value is None or cell.designed is None:
            return None
        return share_of(layout.value, cell.designed, self.unit)

    def best(self, cell: CellResult) -> tuple[str, ...]:
        """The best layouts of a cell: several where they tie."""
        scores = {one.name: self._score(one) for one in cell.layouts if one.value is not None}
        top = max(scores.values(), default=0.0)
        return tuple(name for name, score in scores.items() if top - score <= TIE * max(abs(top), abs(score)))

    def standings(self) -> tuple[Standing, ...]:
        """How each layout fares over the cells."""
        found = []
        for place, name in enumerate(self.layouts):
            shares = [
                (share, number)
                for number, cell in enumerate(self.cells)
                if not cell.error and (share := self.share(cell, cell.layouts[place])) is not None
            ]
            best = sum(name in self.best(self.cells[number]) for _, number in shares)
            ordered = sorted(share for share, _ in shares)
            middle = len(ordered) // 2
            median = None
            if ordered:
                median = ordered[middle] if len(ordered) % 2 else (ordered[middle - 1] + ordered[middle]) / 2
            worst, at = min(shares, default=(None, None))
            at = None if worst is None or worst > 100.0 * (1 - TIE) else at
            found.append(Standing(name, len(shares), best, median, worst, at))
        return tuple(found)

    def reference(self, cell: CellResult) -> CellResult | None:
        """The cell whose order of layouts another is compared with: the first one without an error of its amount."""
        alike = (one for one in self.cells if not one.error and one.cell.amount == cell.cell.amount)
        return next(alike, None)

    def order(self, cell: CellResult) -> OrderChange | None:
        """How the order of the layouts changes against the reference cell; None there and where there is none."""
        first = self.reference(cell)
        if cell.error or first is None or first is cell:
            return None
        both = [
            (self._score(one), self._score(other))
            for one, other in zip(first.layouts, cell.layouts, strict=True)
            if one.value is not None and other.value is not None
        ]
        return order_change(*zip(*both, strict=True)) if both else None

    def _score(self, layout: JudgedLayout) -> float:
        return layout.value if self.unit == "bits" else -layout.value


def result_json(result: CellResult, key: str, seconds: float | None) -> str:
    """A cell with its key and its time, every number to the last digit."""
    return json.dumps({"schema": 1, "key": key, "seconds": seconds, **asdict(result)}, indent=1) + "\n"


def result_from(content: object, key: str) -> tuple[CellResult, float | None] | None:
    """The cell of such a file and its time; None where it has another key or is damaged."""
    if not isinstance(content, dict) or content.get("key") != key or content.get("schema") != 1:
        return None
    try:
        said = {field.name: content[field.name] for field in fields(CellResult)}
        said["cell"] = Cell(**{**said["cell"], "conductivities": tuple(said["cell"]["conductivities"])})
        said["layouts"] = tuple(JudgedLayout(**{**one, "names": tuple(one["names"])}) for one in said["layouts"])
        said |= {name: tuple(said[name]) for name in ("chosen", "names")}
        return CellResult(**said), content["seconds"]
    except (KeyError, TypeError):
        return None
