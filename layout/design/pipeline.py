"""The main job: from a brief to ranked, certified layouts."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from layout import __version__
from layout.anatomy.positions import FAMILIES, family_names
from layout.brief.objects import Brief
from layout.design.describe import described, numbers
from layout.design.evidence import gather_evidence
from layout.design.found import Found, find_layouts, parts_of
from layout.design.notes import notes_of
from layout.design.objective import Objective, build_objective
from layout.design.polish import polish
from layout.design.problem import build_problems
from layout.design.study import Progress, Study, lay_out_study, silent
from layout.engine.bound import tighten
from layout.engine.ranking import PROVEN_PERCENT
from layout.engine.search import improves
from layout.engine.smallest import smallest_count
from layout.errors import InfeasibleError
from layout.evidence.baselines import equal_even_spread, yardsticks
from layout.outputs.result import Baseline, DesignResult, RankedLayout, Reach
from layout.units import MM


def design(brief: Brief, progress: Progress = silent, evidence: bool = False) -> DesignResult:
    """Ranked layouts with their bounds, baselines and everything the outputs show.

    evidence: whether to examine each layout's placement, sensitivity and noise as well, and to trace the channel curve.
    """
    study = lay_out_study(brief, progress)
    problems = build_problems(study, progress)
    objective = build_objective(study, problems)
    reach = None
    if brief.goal.has_target:
        reach = _reach(study, objective, progress)
        study = _of_count(study, reach.found or max(reach.values))
    found = find_layouts(study, objective, progress)
    best = found.layouts[0]
    if brief.budget is not None and not improves(best.value, objective.goal.score(np.zeros(0, dtype=int))):
        raise InfeasibleError(
            "budget.total: must pay for sensors that tell something (electrodes: two, a contact and the reference), "
            f"but {brief.budget.total:g} was given"
        )
    if objective.breaks_limits(best.chosen):
        raise _limits_unmet(brief, study, objective, best.chosen)
    layouts = _layouts(found, progress)
    return DesignResult(
        brief=brief,
        version=__version__,
        goal=brief.goal.kind,
        unit=objective.unit,
        layouts=layouts,
        baselines=_baselines(found, progress),
        bound=objective.printed(best.bound),
        root_bound=objective.printed(found.root_bound),
        weights=found.weights,
        candidates=study.candidates.singles,
        head=study.head,
        regions=study.regions,
        bound_from=found.bound_from,
        notes=notes_of(study, problems, found),
        figures_of_noise=problems[0].calibration.figures(brief.noise.bandwidth, study.has_magnetometers),
        stopped_by_clock=found.stopped_by_clock,
        search_effort=found.effort,
        audit=found.audit,
        proven_within=PROVEN_PERCENT,
        reach=reach,
        polished=polish(study, objective, best.chosen, best.value, progress) if brief.search.polish else None,
        evidence=gather_evidence(study, objective, found, layouts, progress) if evidence else None,
    )


def _limits_unmet(brief: Brief, study: Study, objective: Objective, chosen: np.ndarray) -> InfeasibleError:
    """What to say where no layout was found that keeps the limits on errors."""
    slack = tighten(objective.goal.slack, study.feasible, chosen)
    certain = "no allowed layout can" if slack.value < 0 else "none was found that does"
    errors = zip(brief.goal.error_limits.items(), objective.goal.errors(chosen), strict=True)
    nearest = ", ".join(f"{name} {error / MM:.2f} mm of {limit / MM:g}" for (name, limit), error in errors)
    return InfeasibleError(
        f"goal.error_limits_mm: must be errors that a layout can keep to, but {certain} (the nearest found: {nearest})"
    )


def _reach(study: Study, objective: Objective, progress: Progress) -> Reach:
    """The fewest sensors that reach the brief's target."""
    asked, search = study.brief.goal, study.brief.search
    target = asked.reach_bits if asked.reach_error is None else -asked.reach_error
    found = smallest_count(
        objective.goal,
        study.feasible,
        target,
        int(study.feasible.least[0]),
        starts=search.starts,
        seed=search.seed,
        parts=parts_of(study, objective),
        progress=progress,
    )
    values, bounds = (
        {count: objective.printed(score) for count, score in scores.items()} for scores in (found.values, found.limits)
    )
    return Reach(objective.printed(target), found.found, found.too_few, values, bounds)


def _of_count(study: Study, count: int) -> Study:
    """The study with exactly so many sensors of its one stock entry."""
    rules = replace(study.feasible, counts=np.array([count]), least=np.array([count]))
    return replace(study, feasible=rules)


def _layouts(found: Found, progress: Progress) -> tuple[RankedLayout, ...]:
    study, objective = found.plain
    points, site = study.candidates.sites.positions, study.candidates.site
    known_spreads: dict[int, float] = {}
    layouts = []
    for rank, (layout, (at, own)) in enumerate(zip(found.layouts, found.at, strict=True), 1):
        progress(f"describing rank {rank}")
        equal, largest = None, 0
        if len(study.brief.stock) == 1:
            equal, largest = equal_even_spread(
                objective.shown, study.feasible, points, site, layout.value, len(layout.chosen), known_spreads
            )
        layouts.append(described(at, own, layout, rank, equal, largest))
    return tuple(layouts)


def _baselines(found: Found, progress: Progress) -> tuple[Baseline, ...]:
    (study, objective), best = found.plain, found.layouts[0]
    families = tuple(
        (family, np.array([study.standard[n] for n in family_names(family) if n in study.standard]))
        for family in FAMILIES
    )
    without_search = yardsticks(
        objective.shown,
        study.feasible,
        np.bincount(study.candidates.kind[best.chosen], minlength=len(study.brief.stock)),
        objective.alone(study),
        study.candidates.sites.positions,
        study.candidates.site,
        families,
        study.brief.search.seed,
        progress,
        study.candidates.axis_name,
        objective.breaks_limits,
    )
    whole = objective.printed(best.value)
    return tuple(
        Baseline(
            one.name,
            objective.printed(one.value),
            100.0 * objective.printed(one.value) / whole,
            one.note,
            None if one.chosen is None else numbers(study.candidates.single_sensors(one.chosen)),
        )
        for one in without_search
    )
