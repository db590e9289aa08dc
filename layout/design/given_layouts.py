"""Layouts that somebody brings: tables or names of standard positions, found again among a brief's candidates."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from scipy.spatial import cKDTree

from layout.anatomy.positions import canonical_name
from layout.brief.objects import Brief
from layout.design.objective import Objective
from layout.design.study import Study
from layout.design.turned import NORMAL, fixed_at, has_free_axes
from layout.engine.feasible import Feasible
from layout.engine.free_axes import TurnedLayout
from layout.errors import BriefError, FileError, InfeasibleError
from layout.sensing.candidates import Candidates
from layout.sensing.layout_table import ListedSensor, read_layout_table
from layout.sensing.names import near_names
from layout.units import MM

WITHIN = 10 * MM  # a listed position farther from every candidate site is refused
ON_SITE = 0.05 * MM  # nearer than this a position is the site: tables are rounded to 0.01 mm
SAME_AXIS = np.cos(np.radians(5.0))


@dataclass(frozen=True)
class GivenLayout:
    """A layout among the candidates. name: as given; chosen (k,): candidates; notes: what was taken for what.

    axes: for sensors whose axis is free, the unit axes in the head frame by place in `chosen`; empty elsewhere.
    """

    name: str
    chosen: np.ndarray
    notes: tuple[str, ...]
    axes: dict[int, np.ndarray]


def unpaired(brief: Brief) -> Brief:
    """The brief without left-right pairs and without an existing layout's use: a given layout may be any."""
    return replace(brief, places=replace(brief.places, left_right_pairs=False))


def given_layout(study: Study, text: str, within: float = WITHIN) -> GivenLayout:
    """The layout that a path (electrodes.tsv, magnetometers.tsv, sensors.csv) or names with commas between stand for.

    Positions that are no candidate's take the nearest site within `within` [m]; what was moved or chosen for want of a
    statement is noted. Raises BriefError for unknown names, FileError for damaged tables and sensors too far from
    every site or of a kind or axis that is not there, both for two sensors that come to share a site.
    """
    path = Path(text)
    if path.suffix.lower() in (".tsv", ".csv") or path.is_file():
        return _matched(study, str(text), read_layout_table(path), within, FileError)
    names = [name.strip() for name in text.split(",") if name.strip()]
    if not names:
        raise BriefError(f"LAYOUT: must be a table or names of positions with commas between, but {text!r} was given")
    return _matched(study, text, [_named(study, name) for name in names], within, BriefError)


def _named(study: Study, name: str) -> ListedSensor:
    candidates = study.candidates
    for one in (name, canonical_name(name)):
        if one in candidates.names:
            number = candidates.names.index(one)
            entry = study.brief.stock[candidates.kind[number]].name
            position = candidates.sites.positions[candidates.site[number]]
            return ListedSensor(name, position, entry, candidates.axis_name[number], np.zeros((0, 3)))
        used = {candidates.sites.names[site]: site for site in np.unique(candidates.site)}
        if one in used:
            return ListedSensor(name, candidates.sites.positions[used[one]], None, None, np.zeros((0, 3)))
        if one in study.standard:
            return ListedSensor(name, study.standard[one], None, None, np.zeros((0, 3)))
    known = [*study.standard, *candidates.sites.names]
    raise BriefError(
        f"LAYOUT: must name sites of the stock or standard positions, but {name!r} was given{near_names(name, known)}"
    )


def _matched(
    study: Study, said: str, sensors: list[ListedSensor], within: float, error: type[BriefError] | type[FileError]
) -> GivenLayout:
    candidates = study.candidates
    used = np.unique(candidates.site)
    positions = candidates.sites.positions
    chosen, notes, moved, axes = [], [], [], {}
    unsaid = set()
    taken: dict[int, str] = {}
    entries = [entry.name for entry in study.brief.stock]
    for sensor in sensors:
        here = used
        if sensor.kind in entries:
            here = np.unique(candidates.site[candidates.kind == entries.index(sensor.kind)])
        if not len(here):
            raise error(f"{said}: sensors must be of a kind that has sites, but {sensor.name!r} is not")
        away, nearest = cKDTree(positions[here]).query(sensor.position)
        if away > within:
            raise error(
                f"{said}: sensors must be within {within / MM:g} mm of a candidate site (--within-mm), but "
                f"{sensor.name!r} is {away / MM:.1f} mm off"
            )
        site = int(here[nearest])
        number, guessed = _candidate_at(candidates, entries, site, sensor)
        if number is None:
            raise error(
                f"{said}: sensors must be of a kind and axis that the stock has there, but {sensor.name!r} is not"
            )
        if site in taken:
            raise error(
                f"{said}: sensors must be at sites of their own, but {taken[site]!r} and {sensor.name!r} share "
                f"{candidates.sites.names[site]}"
            )
        taken[site] = sensor.name
        if away > ON_SITE:
            moved.append((float(away), f"{sensor.name} to {candidates.sites.names[site]} ({away / MM:.1f} mm)"))
        if guessed:
            unsaid.add(candidates.axis_name[number] or entries[candidates.kind[number]])
        if candidates.free_axes is not None and candidates.free_axes[number] and len(sensor.axes):
            axes[len(chosen)] = sensor.axes
        chosen.append(number)
    if moved:
        notes.append(f"moved to the nearest candidate site: {', '.join(one for _, one in moved)}")
    if unsaid:
        notes.append(f"where kind or axis was not said, a site's first option: {', '.join(sorted(unsaid))}")
    return GivenLayout(said, np.array(chosen), tuple(notes), axes)


def _candidate_at(
    candidates: Candidates, entries: list[str], site: int, sensor: ListedSensor
) -> tuple[int | None, bool]:
    """(candidate at the site that the sensor is, whether something was guessed); None where there is none."""
    here = np.flatnonzero(candidates.site == site)
    if sensor.kind is not None:
        here = here[[entries[candidates.kind[one]] == sensor.kind for one in here]]
    if sensor.is_electrode and sensor.kind is None:
        electrodes = [one for one in here if candidates.axis_name[one] == "" and _all_electrodes(candidates, one)]
        here = np.array(electrodes or here)
    if not len(here):
        return None, False
    free = candidates.free_axes is not None and candidates.free_axes[here].any()
    if sensor.axis_name is not None and not free:
        fitting = [one for one in here if candidates.axis_name[one] == sensor.axis_name]
        return (int(fitting[0]), False) if fitting else (None, False)
    return int(here[0]), len(here) > 1 and not free


def _all_electrodes(candidates: Candidates, number: int) -> bool:
    return bool(candidates.is_electrode[candidates.candidate_of_channel == number].all())


def with_own_axes(study: Study, objective: Objective, layout: GivenLayout) -> tuple[Study, Objective]:
    """The study and objective in which the layout's axes are fixed: its own where free, the normal where not said."""
    candidates = study.candidates
    if not has_free_axes(candidates):
        return study, objective
    width = int(objective.problems[0].model.channels.shape[1])
    frames = np.zeros((len(layout.chosen), width, width))
    for place, number in enumerate(layout.chosen):
        count = int(candidates.free_axes[number])
        if not count:
            own = int((candidates.candidate_of_channel == number).sum())
            frames[place, np.arange(own), np.arange(own)] = 1.0
            continue
        components = candidates.axes[candidates.candidate_of_channel == number]
        wanted = layout.axes.get(place, np.zeros((0, 3)))
        columns = np.array([components @ axis for axis in wanted[:count]]) if len(wanted) else NORMAL[None]
        frames[place, :3, :count] = _frame(columns, count)
    nothing = np.zeros((len(layout.chosen), 3))
    return fixed_at(study, objective, TurnedLayout(layout.chosen, nothing, nothing, frames, 0.0, 0.0))


def _frame(columns: np.ndarray, count: int) -> np.ndarray:
    """Orthonormal axes (3, count) whose first are the given ones (m, 3), filled up where fewer are given."""
    filled, triangle = np.linalg.qr(np.vstack([columns, np.eye(3)]).T)
    return (filled * np.where(np.diag(triangle) < 0, -1.0, 1.0))[:, :count]


def rules_for(feasible: Feasible, chosen: np.ndarray) -> Feasible:
    """The brief's rules for layouts of exactly as many sensors of each entry as the chosen have, whatever they cost.

    Raises InfeasibleError where no such layout keeps them.
    """
    counts = np.zeros(len(feasible.counts), dtype=int)
    np.add.at(counts, feasible.group[chosen], feasible.sensors[chosen])
    rules = replace(feasible, counts=counts, least=counts, budget=None, checked=False)
    rules.any_set(np.zeros(rules.n_candidates))
    return replace(rules, checked=True)


def rules_or_none(feasible: Feasible, chosen: np.ndarray) -> Feasible | None:
    """The same; None where no layout of so many sensors keeps the brief's rules."""
    try:
        return rules_for(feasible, chosen)
    except InfeasibleError:
        return None
