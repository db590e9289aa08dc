"""Chosen layouts as the rows that tables, pictures and pages show."""

from __future__ import annotations

import numpy as np

from layout.brief.objects_stock import HOUSED
from layout.design.objective import Objective
from layout.design.study import Study
from layout.engine.ranking import Chosen
from layout.outputs.result import RankedLayout, SensorRow
from layout.sensing.candidates import Sites
from layout.sensing.kept import named_reference
from layout.sensing.overlap import boxes_overlap
from layout.sensing.rules import candidate_prices


def described(
    study: Study, objective: Objective, layout: Chosen, rank: int, equal: int | None, largest: int
) -> RankedLayout:
    """One ranked layout with its sensors, regions and cost. equal, largest: see RankedLayout."""
    goal, candidates = objective.goal, study.candidates
    lost = layout.value - goal.priced(layout.chosen).removals()
    worth = lost if objective.unit == "bits" else -np.array([objective.printed(one) for one in lost])
    singles = candidates.single_sensors(layout.chosen)
    worth = np.concatenate([[one] * count for one, count in zip(worth, candidates.sensors[layout.chosen], strict=True)])
    reference = _reference(study, singles, worth)
    order = sorted(range(len(singles)), key=lambda i: (candidates.singles.kind[singles[i]], i))
    sensors = tuple(
        _sensor_row(study, int(singles[i]), number, float(worth[i]), singles[i] == reference)
        for number, i in enumerate(order, 1)
    )
    if candidates.ground is not None:
        sensors += (_ground_row(candidates.ground, len(sensors) + 1),)
    return RankedLayout(
        rank=rank,
        value=objective.printed(layout.value),
        bound=objective.printed(layout.bound),
        gap_percent=layout.gap_percent,
        proven=layout.proven,
        cost=_cost(study, layout.chosen),
        sensors=sensors,
        moved=layout.moved,
        chosen=numbers(singles),
        per_region=objective.per_region(layout.chosen),
        equals_even_spread_of=equal,
        even_spread_limit=largest,
        housings_meet=_housings_meet(study, singles),
    )


def numbers(chosen: np.ndarray) -> tuple[int, ...]:
    """Candidates as plain numbers."""
    return tuple(int(candidate) for candidate in chosen)


def _cost(study: Study, chosen: np.ndarray) -> float:
    """What the layout costs: sensors, channels and, under a budget that prices them, started amplifier blocks."""
    if study.feasible.budget is not None:
        return study.feasible.cost(chosen)
    return float(candidate_prices(study.brief, study.candidates)[chosen].sum())


def _housings_meet(study: Study, chosen: np.ndarray) -> int | None:
    """How many pairs of chosen sensors have housings that share space; None without sensors in housings."""
    stock, candidates = study.brief.stock, study.candidates.singles
    housed = [one for one in chosen if stock[candidates.kind[one]].kind in HOUSED]
    if not housed:
        return None
    poses = candidates.housing_pose[housed]
    sizes = np.array([stock[kind].housing for kind in candidates.kind[housed]])
    first, second = np.triu_indices(len(housed), 1)
    return int(boxes_overlap(poses[first], sizes[first], poses[second], sizes[second]).sum())


def _reference(study: Study, chosen: np.ndarray, worth: np.ndarray) -> int | None:
    """The contact to call the reference: the brief's, else the one that matters least; any other would do.

    chosen (k,): single sensors; worth (k,): what is lost without each.
    """
    kinds = study.candidates.singles.kind
    contacts = [i for i, one in enumerate(chosen) if study.brief.stock[kinds[one]].kind == "electrode"]
    if not contacts:
        return None
    named = named_reference(study.brief, study.candidates.singles)
    if named is not None:
        return named
    return int(chosen[min(contacts, key=lambda i: worth[i])])


def _sensor_row(study: Study, candidate: int, number: int, worth: float, is_reference: bool) -> SensorRow:
    candidates, sites = study.candidates.singles, study.candidates.sites
    entry = study.brief.stock[candidates.kind[candidate]]
    site = candidates.site[candidate]
    rows = candidates.candidate_of_channel == candidate
    return SensorRow(
        number=number,
        candidate=candidate,
        name=candidates.names[candidate],
        kind=entry.name,
        kind_number=int(candidates.kind[candidate]),
        kind_type=entry.kind,
        site=sites.names[site],
        position=candidates.positions[rows][0],
        scalp_position=sites.positions[site],
        normal=sites.normals[site],
        axis_name=candidates.axis_name[candidate],
        axes=candidates.axes[rows],
        nearest_name=sites.nearest_name[site],
        nearest_offset=float(sites.nearest_offset[site]),
        landmark_distance=sites.landmark_distance[site],
        arc_fractions=sites.arc_fractions[site],
        worth=worth,
        role="reference" if is_reference else "",
    )


def _ground_row(site: Sites, number: int) -> SensorRow:
    """The ground: an electrode that is placed and not measured."""
    return SensorRow(
        number=number,
        candidate=-1,
        name=site.names[0],
        kind="ground",
        kind_number=-1,
        kind_type="electrode",
        site=site.names[0],
        position=site.positions[0],
        scalp_position=site.positions[0],
        normal=site.normals[0],
        axis_name="",
        axes=np.zeros((1, 3)),
        nearest_name=site.nearest_name[0],
        nearest_offset=float(site.nearest_offset[0]),
        landmark_distance=site.landmark_distance[0],
        arc_fractions=site.arc_fractions[0],
        worth=0.0,
        role="ground",
    )
