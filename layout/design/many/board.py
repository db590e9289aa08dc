"""Which cells are ready, at work and done: the one place that engines take orders from and bring results to."""

from __future__ import annotations

from collections.abc import Callable, Collection
from dataclasses import replace

from layout.design.many.cells import Order, for_brief, is_for_brief
from layout.design.study import Progress
from layout.outputs.many.result import CellResult

Known = Callable[[str], tuple[CellResult, float | None] | None]
Keep = Callable[[CellResult, str, float], None]


class Board:
    """The orders of one run. A cell that judges the layout designed for the brief waits until that is found.

    known(key): the result of an earlier run; keep(result, key, seconds): called with each new result that will stay.
    """

    def __init__(self, orders: tuple[Order, ...], known: Known, keep: Keep, progress: Progress) -> None:
        self._keep, self._progress = keep, progress
        self.results: dict[str, CellResult] = {}
        self.seconds: dict[str, float | None] = {}
        sources = _sources(orders)
        for order in (*orders, *sources.values()):
            if order.key not in self.results and (found := known(order.key)) is not None:
                self.results[order.key], self.seconds[order.key] = found
        self._ready: list[Order] = []
        self._waiting: dict[str, list[Order]] = {}
        self._doubtful: set[str] = set()  # cells whose layout for the brief may be there at another try
        for order in orders:
            if order.key not in self.results:
                self._line_up(order, sources.get(order.cell.amount))
        lined_up = {one.key for one in self._ready}
        self._ready += [one for one in sources.values() if one.key in self._waiting and one.key not in lined_up]
        self._run, self._all = 0, self._open()

    def _line_up(self, order: Order, source: Order | None) -> None:
        """Ready, or behind the order that finds the layout designed for the brief where that is not known yet."""
        if source is None or source.key == order.key:
            self._ready.append(order)
        elif source.key in self.results:
            self._ready.append(_with_brief_layout(order, self.results[source.key]))
        else:
            self._waiting.setdefault(source.key, []).append(order)

    def _open(self) -> int:
        return len(self._ready) + sum(len(behind) for behind in self._waiting.values())

    @property
    def is_empty(self) -> bool:
        """Whether no order is left to take; some may still be at work."""
        return not self._ready

    def take(self, last: Order | None, busy: Collection[Order] = ()) -> Order | None:
        """The next order for a worker whose last one was `last`: of the same model rather than of the same head, rather
        than of a head that nobody works on. None where none is ready.
        """
        if not self._ready:
            return None
        heads = [one.cell.head for one in busy]

        def cost(place: int) -> tuple[int, int, int, int]:
            order = self._ready[place]
            others_wait = order.key in self._waiting
            shared = 0 if last is None else _shared(order.model, last.model)
            return (-others_wait, -shared, heads.count(order.cell.head), place)

        return self._ready.pop(min(range(len(self._ready)), key=cost))

    def give_back(self, order: Order) -> None:
        """An order that was taken and not done."""
        self._ready.insert(0, order)

    def done(self, order: Order, result: CellResult, seconds: float) -> None:
        """Take a result in, keep it and free those that waited for it."""
        if order.key in self._doubtful:
            result = replace(result, again=True)
        self.results[order.key], self.seconds[order.key] = result, seconds
        self._run += 1
        if not result.again:
            self._keep(result, order.key, seconds)
        for behind in self._waiting.pop(order.key, []):
            self._ready.append(_with_brief_layout(behind, result))
            if result.again:
                self._doubtful.add(behind.key)

    def say(self, at_work: int) -> None:
        """How far the run is."""
        self._progress(f"{self._run} of {self._all} cells done, {at_work} at work")


def _sources(orders: tuple[Order, ...]) -> dict[float | None, Order]:
    """Amount -> the order that finds the layout designed for the brief: a cell of the plan where one does."""
    sources: dict[float | None, Order] = {}
    for order in orders:
        if any(one.designed_for == "brief" for one in order.wanted):
            nominal = for_brief(order)
            sources.setdefault(order.cell.amount, nominal)
            if is_for_brief(order, nominal):
                sources[order.cell.amount] = order
    return sources


def _with_brief_layout(order: Order, found: CellResult) -> Order:
    """The order with the layout that was designed for the brief, or with why there is none."""
    error = f"no layout was found for the brief ({found.error.rstrip('.')})" if found.error else ""
    wanted = tuple(
        replace(one, chosen=found.chosen, error=error) if one.designed_for == "brief" else one for one in order.wanted
    )
    return replace(order, wanted=wanted)


def _shared(one: tuple[object, ...], other: tuple[object, ...]) -> int:
    """How many of their first parts are the same."""
    for place, (mine, its) in enumerate(zip(one, other, strict=True)):
        if mine != its:
            return place
    return len(one)
