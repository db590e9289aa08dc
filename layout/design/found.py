"""What the engine found for a study, in one form for fixed and for free axes."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.design.audit import audit_arrays, free_audit_arrays
from layout.design.objective import Objective
from layout.design.study import Progress, Study
from layout.design.turned import all_normal, fixed_at, has_free_axes, rank_turned
from layout.engine.free_axes import FreeRanking
from layout.engine.information_goal import InformationGoal
from layout.engine.ranking import Chosen, Ranking, rank_layouts

Fixed = tuple[Study, Objective]
QUICK_PARTS = 1000  # of branch and bound for the plain information: some milliseconds each
SLOW_PARTS = 20  # for any other goal, and for free axes: some tenths of a second each


def parts_of(study: Study, objective: Objective) -> int:
    """How many parts of the tree branch and bound may examine: the brief's number, or as the goal's speed suggests."""
    asked = study.brief.search.proof_parts
    if asked is not None:
        return asked
    quick = isinstance(objective.goal, InformationGoal) and not has_free_axes(study.candidates)
    return QUICK_PARTS if quick else SLOW_PARTS


@dataclass(frozen=True)
class Found:
    """layouts, best first; at: each layout's study and objective with its axes fixed; plain: those of the baselines.

    root_bound: limit of the plain relaxation [score]; weights (n_candidates,) of it; bound_from: what gave the first
    layout's bound, in words; effort: label -> count; audit: arrays of audit.npz.
    """

    layouts: tuple[Chosen, ...]
    at: tuple[Fixed, ...]
    plain: Fixed
    root_bound: float
    weights: np.ndarray
    bound_from: str
    differ_by: int
    effort: dict[str, int]
    stopped_by_clock: bool
    audit: dict[str, np.ndarray]


def find_layouts(study: Study, objective: Objective, progress: Progress) -> Found:
    """Search, bound and prove as the brief asks."""
    if has_free_axes(study.candidates):
        return _free(study, objective, rank_turned(study, objective, parts_of(study, objective), progress))
    search = study.brief.search
    ranking = rank_layouts(
        objective.goal,
        study.feasible,
        places=study.candidates.site,
        ranked=search.ranked,
        differ_by=search.differ_by or max(1, study.feasible.size // 8),
        starts=search.starts,
        seed=search.seed,
        parts=parts_of(study, objective),
        proven_ranks=search.proof_ranks,
        time_allowance=search.time_allowance,
        progress=progress,
    )
    proof = ranking.proof
    return Found(
        layouts=ranking.layouts,
        at=((study, objective),) * len(ranking.layouts),
        plain=(study, objective),
        root_bound=ranking.root.value,
        weights=ranking.root.weights,
        bound_from=_bound_from(ranking),
        differ_by=ranking.differ_by,
        effort={
            "starts": ranking.starts,
            "swaps": ranking.swaps,
            "bound rounds": ranking.root.rounds,
            "parts examined": proof.nodes if proof else 0,
            "parts left open": proof.open_parts if proof else 0,
            "differ by": ranking.differ_by,
        },
        stopped_by_clock=ranking.stopped_by_clock,
        audit=audit_arrays(objective, study.feasible, ranking),
    )


def _free(study: Study, objective: Objective, ranking: FreeRanking) -> Found:
    layouts: list[Chosen] = []
    site = study.candidates.site
    for one in ranking.layouts:
        gaps = [int((~np.isin(site[one.chosen], site[other.chosen])).sum()) for other in layouts]
        layouts.append(Chosen(one.chosen, one.value, one.bound, min(gaps) if gaps else None))
    weights = np.zeros(len(study.candidates))
    traces = np.trace(ranking.root.blocks, axis1=1, axis2=2)
    per_sensor = np.maximum(study.candidates.free_axes, 1)[ranking.root.candidates]
    weights[ranking.root.candidates] = traces / per_sensor
    proof = ranking.proof
    return Found(
        layouts=tuple(layouts),
        at=tuple(fixed_at(study, objective, one) for one in ranking.layouts),
        plain=all_normal(study, objective),
        root_bound=ranking.root.limit,
        weights=weights,
        bound_from=_free_bound_from(ranking),
        differ_by=ranking.differ_by,
        effort={
            "starts": ranking.starts,
            "parts examined": proof.nodes if proof else 0,
            "parts left open": proof.open_parts if proof else 0,
            "differ by": ranking.differ_by,
        },
        stopped_by_clock=ranking.stopped_by_clock,
        audit=free_audit_arrays(study, objective, ranking),
    )


def _bound_from(ranking: Ranking) -> str:
    """Which of the three ways gave the first layout's bound."""
    relaxed = min(one.value for one in (ranking.root, ranking.by_rank) if one is not None)
    if ranking.proof is not None and ranking.proof.bound < relaxed:
        return "branch and bound"
    if ranking.by_rank is not None and ranking.by_rank.value < ranking.root.value:
        return "the rank-aware relaxation"
    return "the relaxation, which lets fractions of sensors be placed"


def _free_bound_from(ranking: FreeRanking) -> str:
    relaxed = min(one.limit for one in (ranking.root, ranking.by_rank) if one is not None)
    if ranking.proof is not None and ranking.proof.bound < relaxed:
        return "branch and bound over sites, axes free"
    if ranking.by_rank is not None and ranking.by_rank.limit < ranking.root.limit:
        return "the rank-aware relaxation over continuous axes"
    return "the relaxation over continuous axes, which lets fractions of sensors be placed"
