"""What a worker does with one cell: search and bound there, then judge every layout. Cells of one model share rows."""

from __future__ import annotations

import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from typing import Any

import numba
import numpy as np
from threadpoolctl import threadpool_limits

from layout import __version__
from layout.brief.objects import ScenariosBrief
from layout.design.found import find_layouts
from layout.design.many.cells import Order, Wanted
from layout.design.objective import Objective, build_objective
from layout.design.problem import build_problem, build_problems
from layout.design.scenarios import Scenario, on_head, own_scenario
from layout.design.study import Study, lay_out_study, silent
from layout.engine.feasible import Feasible
from layout.engine.search import improves
from layout.errors import InfeasibleError, LayoutError
from layout.evidence.curve import of_budget, of_count
from layout.outputs.many.result import CellResult, JudgedLayout
from layout.physics.channels import Channels, CortexModel
from layout.physics.lead_field import LeadField
from layout.sensing.rules import candidate_prices

MOST_KEPT = 256 * 1024**2  # bytes of lead fields that a worker keeps for the next cell of the same head

# A worker with several threads works on one cell at a time: compiled kernels must not run side by side in one process.
_ALONE = threading.Lock()
_kept: dict[str, tuple[object, Any]] = {}


def work(order: Order) -> tuple[CellResult, float]:
    """The result of a cell and the seconds it took. A LayoutError becomes the cell's own."""
    with _ALONE, one_thread():
        start = time.perf_counter()
        if order.version != __version__:
            text = f"the worker must run scalpsite {order.version}, but it runs {__version__}"
            result = failed(order, text, again=True)
        else:
            try:
                result = _judged(order)
            except LayoutError as problem:
                result = failed(order, str(problem))
        return result, time.perf_counter() - start


def failed(order: Order, why: str, again: bool = False) -> CellResult:
    """The result of a cell that has none."""
    layouts = tuple(_none(one.name, one.error or why) for one in order.wanted)
    unit = "mm" if order.brief.goal.kind == "localisation" else "bits"
    return CellResult(order.cell, unit, None, None, (), (), layouts, error=why, again=again)


def forget() -> None:
    """Drop what is kept from cell to cell."""
    _kept.clear()


@contextmanager
def one_thread() -> Iterator[None]:
    """One thread for factorisations and compiled kernels: the workers share the machine's cores."""
    before = numba.get_num_threads()
    numba.set_num_threads(1)
    try:
        with threadpool_limits(limits=1):
            yield
    finally:
        numba.set_num_threads(before)


def _remembered(what: str, key: object, make: Callable[[], Any]) -> Any:
    """make(), or what it gave for the same key the last time."""
    if what not in _kept or _kept[what][0] != key:
        _kept.pop(what, None)  # before the next is made: two would take twice the memory
        _kept[what] = (key, make())
    return _kept[what][1]


def _judged(order: Order) -> CellResult:
    study = _remembered("study", order.base, lambda: lay_out_study(order.brief))
    objective = _remembered("rows", (order.base, order.model), lambda: _objective(order, study))
    rules = _rules(order, study)
    scenarios = order.brief.scenarios if order.scenarios else ScenariosBrief()
    within = replace(study, feasible=rules, brief=replace(study.brief, scenarios=scenarios))
    found = find_layouts(within, objective, silent)
    best, chosen = found.layouts[0], found.layouts[0].chosen
    score = best.value
    for one in order.wanted:  # the search may have missed what it met under the brief's own model
        known = np.array(one.chosen, dtype=int)
        if one.designed_for == "brief" and one.chosen and rules.allows(known):
            at_least = objective.goal.score(known)
            chosen, score = (known, at_least) if improves(at_least, score) else (chosen, score)
    if objective.breaks_limits(chosen):
        raise InfeasibleError("goal.error_limits_mm: must be errors that a layout can keep to, but none was found here")
    return CellResult(
        cell=order.cell,
        unit=objective.unit,
        designed=float(objective.printed(score)),
        bound=float(objective.printed(best.bound)),
        chosen=tuple(int(one) for one in chosen),
        names=tuple(study.candidates.names[one] for one in chosen),
        layouts=tuple(_layout(one, study, objective, rules, chosen) for one in order.wanted),
        stopped_by_clock=found.stopped_by_clock,
    )


def _objective(order: Order, study: Study) -> Objective:
    if order.scenarios:
        return build_objective(study, build_problems(study, silent))
    alone = replace(study, brief=replace(study.brief, scenarios=ScenariosBrief()))
    scenario = _remembered(
        "head", (order.base, order.cell.head, order.cell.conductivities), lambda: _head(order, study)
    )
    cell = order.cell
    changed = replace(
        scenario,
        noise_factor=cell.noise_factor,
        sensor_factor=cell.sensor_factor,
        background_factor=cell.background_factor,
    )
    return build_objective(alone, (build_problem(alone, silent, changed, order.calibration),))


def _head(order: Order, study: Study) -> Scenario:
    """The cell's head with the brief's candidates on it, in its conductivities."""
    own = own_scenario(study) if order.head is None else on_head(study, order.head, order.cell.head)
    if tuple(own.cortex.conductivities) != order.cell.conductivities:
        own = replace(own, cortex=own.cortex.with_conductivities(np.array(order.cell.conductivities)))
    if type(own.channels) is Channels:  # a lead field from a file needs no keeping
        own = replace(own, channels=KeptChannels(**vars(own.channels)))
    return own


@dataclass(frozen=True)
class KeptChannels(Channels):
    """Channels that keep their lead fields, for the next noise level on the same head."""

    fields: dict[tuple[bytes, bool], LeadField] = field(default_factory=dict, compare=False)

    def lead_field(self, cortex: CortexModel, sources: np.ndarray, free: bool) -> LeadField:
        """As of Channels; always asked for the same cortex."""
        key = (np.ascontiguousarray(sources).tobytes(), free)
        if key not in self.fields:
            made = super().lead_field(cortex, sources, free)
            if made.gain.nbytes + sum(one.gain.nbytes for one in self.fields.values()) > MOST_KEPT:
                return made
            self.fields[key] = made
        return self.fields[key]


def _rules(order: Order, study: Study) -> Feasible:
    """The brief's rules for the cell's amount; InfeasibleError in the plan's own words."""
    amount = order.cell.amount
    if amount is None:
        return study.feasible
    try:
        return of_count(study.feasible, int(amount)) if order.by == "count" else of_budget(study.feasible, amount)
    except InfeasibleError:
        key, rule = ("counts", "be numbers of sensors") if order.by == "count" else ("budgets", "pay for a layout")
        raise InfeasibleError(
            f"cross.{key}: must {rule} that the brief's other rules allow, but {amount:g} was given"
        ) from None


def _layout(one: Wanted, study: Study, objective: Objective, rules: Feasible, own: np.ndarray) -> JudgedLayout:
    if one.error:
        return _none(one.name, one.error)
    candidates = study.candidates
    chosen = own if one.designed_for == "cell" or not one.chosen else np.array(one.chosen)
    if rules.budget is not None:
        cost = rules.cost(chosen)
    else:
        cost = candidate_prices(study.brief, candidates)[chosen].sum()
    return JudgedLayout(
        name=one.name,
        value=float(objective.printed(objective.shown.score(chosen))),
        sensors=int(candidates.sensors[chosen].sum()),
        channels=int(np.isin(candidates.candidate_of_channel, chosen).sum()),
        cost=float(cost),
        names=tuple(candidates.names[number] for number in chosen),
        within_rules=bool(rules.allows(chosen) and not objective.breaks_limits(chosen)),
    )


def _none(name: str, why: str) -> JudgedLayout:
    return JudgedLayout(name, None, None, None, None, (), False, why)
