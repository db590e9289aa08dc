"""Every cell of a plan, on this process, on local workers or on a cluster, each kept as it ends."""

from __future__ import annotations

import os
from dataclasses import replace

from layout import __version__
from layout.brief.objects_plan import Plan
from layout.design.curve import CLOCK
from layout.design.given_layouts import given_layout
from layout.design.many.board import Board, Keep, Known
from layout.design.many.cells import Order, orders_of, searched_brief
from layout.design.many.on_dask import local_workers, run_on, workers_of
from layout.design.many.work import failed, forget, work
from layout.design.problem import calibrated, patches
from layout.design.study import Progress, Study, lay_out_study, silent
from layout.errors import LayoutError
from layout.outputs.many.result import Many


def default_workers() -> int:
    """As many as this process may use cores."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


class ManyCells:
    """The cells of a plan, laid out: the brief's head is built, and given layouts are found among its candidates.

    Raises LayoutError where the brief itself cannot be met or a given layout is none.
    """

    def __init__(self, plan: Plan, progress: Progress = silent) -> None:
        self._plan, self._progress = plan, progress
        brief = searched_brief(plan)
        study = lay_out_study(brief, progress)
        given, notes = _given(plan, study)
        self._notes = notes
        self._orders = orders_of(plan, given)
        self._study = study

    @property
    def keys(self) -> tuple[str, ...]:
        """What each cell is known by, in the plan's order: brief, version, files, the cell and its layouts."""
        return tuple(order.key for order in self._orders)

    def run(
        self,
        known: Known = lambda key: None,
        keep: Keep = lambda result, key, seconds: None,
        workers: int | None = None,
        scheduler: str | None = None,
    ) -> Many:
        """All cells: those that are known as they are, the others run now.

        workers: local processes, 0: this one; None: `default_workers`, but no more than there are cells. scheduler: the
        address of a running dask scheduler in their place. Raises ClusterError where it cannot be used; an error in one
        cell is that cell's result.
        """
        missing = [order for order in self._orders if known(order.key) is None]
        orders = self._orders
        if missing:
            self._progress("strengths of the noise")
            fixed = calibrated(self._study, patches(self._study))
            orders = tuple(replace(order, calibration=fixed) for order in orders)
        board = Board(orders, known, keep, self._progress)
        if not board.is_empty:
            self._run(board, len(missing), workers, scheduler)
        return self._gathered(board)

    def _run(self, board: Board, missing: int, workers: int | None, scheduler: str | None) -> None:
        count = min(default_workers() if workers is None else workers, missing)
        if scheduler is not None:
            self._progress("reaching the scheduler")
            with workers_of(scheduler) as client:
                run_on(client, board)
        elif count == 0:
            _run_here(board)
        else:
            self._progress(f"starting {count} workers" if count > 1 else "starting a worker")
            with local_workers(count) as client:
                run_on(client, board)

    def _gathered(self, board: Board) -> Many:
        cells = tuple(board.results[order.key] for order in self._orders)
        brief = self._plan.brief
        warnings = self._notes
        if any(one.stopped_by_clock for one in cells):
            warnings += (CLOCK,)
        return Many(
            title=self._plan.title,
            version=__version__,
            brief_sha256=brief.sha256,
            unit="mm" if brief.goal.kind == "localisation" else "bits",
            by=self._plan.by,
            layouts=tuple(one.name for one in self._plan.layouts),
            cells=cells,
            seconds=tuple(board.seconds[order.key] for order in self._orders),
            warnings=warnings,
        )


def _run_here(board: Board) -> None:
    last: Order | None = None
    try:
        while (order := board.take(last)) is not None:
            board.say(1)
            try:
                result, seconds = work(order)
            except Exception as problem:  # as on workers: whatever went wrong in one cell, the others go on
                text = f"{type(problem).__name__}: {' '.join(str(problem).split())[:200]}"
                result, seconds = failed(order, f"stopped by an error of the program ({text})", again=True), 0.0
            board.done(order, result, seconds)
            last = order
    finally:
        forget()


def _given(plan: Plan, study: Study) -> tuple[dict[str, tuple[int, ...]], tuple[str, ...]]:
    """Layout name -> candidates of the layouts that the plan gives, and what was moved or guessed to find them."""
    found, notes = {}, []
    for one in plan.layouts:
        if one.designed_for is not None:
            continue
        text = str(one.table) if one.table is not None else ",".join(one.sites)
        try:
            layout = given_layout(study, text)
        except LayoutError as problem:
            # Its sentence speaks of an option of `layout assess`.
            said = str(problem).replace(" (--within-mm)", "").replace("LAYOUT:", "").strip().replace(text, "", 1)
            raise type(problem)(f'layouts "{one.name}": {said.removeprefix(":").strip()}') from None
        found[one.name] = tuple(int(number) for number in layout.chosen)
        notes += [f"{one.name}: {note}" for note in layout.notes]
    return found, tuple(notes)
