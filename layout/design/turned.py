"""Studies whose magnetometers may point anywhere: the axes that a layout gives them, as a study of fixed axes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from layout.design.objective import Objective, build_objective
from layout.design.study import Progress, Study
from layout.engine.free_axes import FreeAxes, FreeRanking, TurnedLayout, rank_free_axes, with_axes
from layout.errors import BriefError
from layout.sensing.candidates import Candidates

NORMAL = np.array([1.0, 0.0, 0.0])  # of the three components: normal, tangent 1, tangent 2


def has_free_axes(candidates: Candidates) -> bool:
    """Whether any sensor's axis is to be found by the search."""
    return candidates.free_axes is not None and bool((candidates.free_axes > 0).any())


def free_axes_of(candidates: Candidates) -> FreeAxes:
    """What the engine must know of the axes that are free."""
    n = len(candidates)
    return FreeAxes(
        free=candidates.free_axes > 0,
        count=np.maximum(candidates.free_axes, 1),
        tilt=candidates.tilt_limit,
        normal=np.tile(NORMAL, (n, 1)),
    )


def rank_turned(study: Study, objective: Objective, parts: int, progress: Progress) -> FreeRanking:
    """Layouts with their axes; parts: of the tree that branch and bound may examine.

    Raises BriefError for goals whose bound over continuous axes is not offered.
    """
    brief, search = study.brief, study.brief.search
    offered = {
        "goal.kind": brief.goal.kind == "information",
        "goal.region_weights": not brief.goal.region_weights,
        "goal.error_limits_mm": not brief.goal.error_limits,
        "goal.reach_bits": not brief.goal.has_target,
        "scenarios": len(objective.problems) == 1 and not brief.scenarios.any_one_lost,
        "places.left_right_pairs": study.candidates.pairs is None,
        "budget": study.feasible.budget is None and (study.feasible.least == study.feasible.counts).all(),
        "search.polish": not search.polish,
    }
    for key, fits in offered.items():
        if not fits:
            raise BriefError(
                f'{key}: must be left out (goal.kind: "information") where stock.axes is "free" or "free_two"; a list '
                "of axes goes with every goal"
            )
    return rank_free_axes(
        objective.problems[0].model,
        study.feasible,
        free_axes_of(study.candidates),
        places=study.candidates.site,
        ranked=search.ranked,
        differ_by=search.differ_by or max(1, study.feasible.size // 8),
        starts=search.starts,
        seed=search.seed,
        parts=parts,
        time_allowance=search.time_allowance,
        progress=progress,
    )


def fixed_at(study: Study, objective: Objective, layout: TurnedLayout) -> tuple[Study, Objective]:
    """Study and objective with every axis fixed: the layout's own, and the normal where it has no sensor."""
    candidates, problem = study.candidates, objective.problems[0]
    axes = free_axes_of(candidates)
    free = axes.free
    model = with_axes(problem.model, axes, layout.chosen, layout.frames)
    rows, names = [], list(candidates.axis_name)
    for one in range(len(candidates)):
        own = np.flatnonzero(candidates.candidate_of_channel == one)
        if not free[one]:
            rows.append(candidates.axes[own])
            continue
        place = np.flatnonzero(layout.chosen == one)
        count = int(candidates.free_axes[one])
        frame = np.eye(3)[:, :count] if not len(place) else layout.frames[place[0]][:3, :count]
        rows.append(frame.T @ candidates.axes[own])
        if len(place):
            lean = np.degrees(np.arccos(np.clip(np.abs(frame[0]), 0.0, 1.0)))
            names[one] = " and ".join(f"{angle:.0f}° from the normal" for angle in lean)
    owner = np.repeat(np.arange(len(candidates)), [len(one) for one in rows])
    first = np.searchsorted(candidates.candidate_of_channel, owner)
    turned = replace(
        candidates,
        axis_name=tuple(names),
        candidate_of_channel=owner,
        positions=candidates.positions[first],
        axes=np.vstack(rows),
        is_electrode=candidates.is_electrode[first],
        baselines=None if candidates.baselines is None else candidates.baselines[first],
        pickup=None,
        free_axes=None,
        tilt_limit=None,
    )
    at = replace(study, candidates=turned)
    return at, build_objective(at, (replace(problem, model=model, sensor_sd=problem.sensor_sd[first]),))


def all_normal(study: Study, objective: Objective) -> tuple[Study, Objective]:
    """The same with every free axis along the normal: what the baselines use."""
    nothing = np.zeros(0, dtype=int)
    width = int(objective.problems[0].model.channels.shape[1])
    empty = TurnedLayout(nothing, np.zeros((0, 3)), np.zeros((0, 3)), np.zeros((0, width, width)), 0.0, 0.0)
    at, _ = fixed_at(study, objective, empty)
    candidates, model = study.candidates, objective.problems[0].model
    keep = np.ones(model.n_channels, dtype=bool)
    for one in np.flatnonzero(candidates.free_axes > 0):
        own = np.flatnonzero(candidates.candidate_of_channel == one)
        keep[own[int(candidates.free_axes[one]) :]] = False
    normal = replace(
        model,
        target=model.target[keep],
        nuisance=model.nuisance[keep],
        offset=model.offset[keep],
        candidate_of_channel=model.candidate_of_channel[keep],
    )
    problem = objective.problems[0]
    return at, build_objective(at, (replace(problem, model=normal, sensor_sd=problem.sensor_sd[keep]),))
