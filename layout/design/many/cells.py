"""The cells of a plan as work orders: each holds all that a worker needs and a key of all it depends on."""

from __future__ import annotations

import dataclasses
import hashlib
import itertools
import json
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path

from layout import __version__
from layout.brief.objects import Brief, HeadBrief, ScenariosBrief
from layout.brief.objects_plan import AS_STATED, DesignedFor, Plan
from layout.noise.calibration import Calibration
from layout.outputs.many.result import Cell

FORMAT = 1  # of a cell's file; part of its key


@dataclass(frozen=True)
class Wanted:
    """A layout to judge: found in the cell ("cell"), or candidates by number; error: why there are none, or ""."""

    name: str
    designed_for: DesignedFor | None
    chosen: tuple[int, ...] = ()
    error: str = ""


@dataclass(frozen=True)
class Order:
    """One cell to work on.

    base: key of what all cells of the run share; head: the cell's, None for the brief's own; by: what the cell's amount
    is; scenarios: whether the search is for the brief as it is, its [scenarios] included, as no cell of the plan is.
    """

    key: str
    base: str
    version: str
    brief: Brief
    calibration: Calibration | None
    cell: Cell
    head: HeadBrief | None
    by: str | None
    wanted: tuple[Wanted, ...]
    scenarios: bool = False

    @property
    def model(self) -> tuple[object, ...]:
        """What makes rows of the engine's model, the costliest first: cells of one model share them."""
        cell = self.cell
        return (
            cell.head,
            cell.conductivities,
            self.scenarios,
            (cell.noise_factor, cell.sensor_factor, cell.background_factor),
        )


def searched_brief(plan: Plan) -> Brief:
    """The brief as cells search it: one rank, no polish, no target, the plan's effort."""
    brief = plan.brief
    search = replace(brief.search, ranked=1, proof_ranks=1, polish=False)
    if plan.starts is not None:
        search = replace(search, starts=plan.starts)
    if plan.proof_parts is not None:
        search = replace(search, proof_parts=plan.proof_parts)
    return replace(brief, search=search, goal=replace(brief.goal, reach_bits=None, reach_error=None))


def orders_of(plan: Plan, given: dict[str, tuple[int, ...]]) -> tuple[Order, ...]:
    """The plan's cells in its order, heads outermost, without calibration; given: layout name -> candidates.

    A layout designed for the brief has no candidates yet.
    """
    brief = searched_brief(plan)
    base = _digest([FORMAT, __version__, _plain(brief), _files(brief), plan.by])
    wanted = tuple(Wanted(one.name, one.designed_for, given.get(one.name, ())) for one in plan.layouts)
    conductivity_sets = plan.conductivities or (None,)
    orders = []
    for one, layers, skull, amount, noise, sensor, background in itertools.product(
        plan.heads,
        conductivity_sets,
        plan.skull_factors,
        plan.amounts or (None,),
        plan.noise_factors,
        plan.sensor_factors,
        plan.background_factors,
    ):
        head = None if one.name == AS_STATED else one.head
        own = layers or one.head.conductivities
        place = len(own) - 2  # from the brain outwards: the skull is the last but one
        own = tuple(value * skull if number == place else value for number, value in enumerate(own))
        cell = Cell(one.name, own, skull, amount, noise, sensor, background)
        order = Order("", base, __version__, brief, None, cell, head, plan.by, wanted)
        orders.append(keyed(order))
    return tuple(orders)


def keyed(order: Order) -> Order:
    """The order with the key of all it depends on."""
    head = None if order.head is None else [_plain(order.head), _files(order.head)]
    wanted = [dataclasses.asdict(replace(one, chosen=()) if one.designed_for else one) for one in order.wanted]
    said = [order.base, dataclasses.asdict(order.cell), head, wanted, order.scenarios]
    return replace(order, key=_digest(said))


def for_brief(order: Order) -> Order:
    """The order that finds the layout designed for the brief, of the same amount."""
    cell = Cell(AS_STATED, order.brief.head.conductivities, amount=order.cell.amount)
    scenarios = order.brief.scenarios != ScenariosBrief()
    return keyed(replace(order, cell=cell, head=None, wanted=(), scenarios=scenarios))


def is_for_brief(order: Order, nominal: Order) -> bool:
    """Whether the search in a cell is the search for the brief."""
    return not nominal.scenarios and order.head is None and order.cell == nominal.cell


def _files(value: object) -> list[str]:
    """SHA-256 of every file that an object of the brief names, but not of its folder."""
    return [hashlib.sha256(path.read_bytes()).hexdigest() for path in _paths(value) if path.is_file()]


def _paths(value: object) -> Iterator[Path]:
    if isinstance(value, Path):
        yield value
    elif dataclasses.is_dataclass(value):
        for field in dataclasses.fields(value):
            yield from _paths(getattr(value, field.name))
    elif isinstance(value, dict):
        for inner in value.values():
            yield from _paths(inner)
    elif isinstance(value, tuple):
        for inner in value:
            yield from _paths(inner)


def _plain(value: object) -> object:
    """An object of the brief as JSON, its files left out: where a study lies does not matter."""
    said = dataclasses.asdict(value)
    return json.loads(json.dumps(said, default=lambda one: "" if isinstance(one, Path) else str(one), sort_keys=True))


def _digest(said: object) -> str:
    return hashlib.sha256(json.dumps(said).encode()).hexdigest()
