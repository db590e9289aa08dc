"""Given layouts under a brief: how good each is, how good any of its size could be, and what other models say."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from threadpoolctl import threadpool_limits

from layout.anatomy.positions import FAMILIES, family_names
from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.objects import Brief, ScenariosBrief
from layout.design.curve import CLOCK, everything
from layout.design.found import Found, find_layouts
from layout.design.given_layouts import WITHIN, GivenLayout, given_layout, rules_or_none, unpaired, with_own_axes
from layout.design.objective import Objective, build_objective
from layout.design.problem import build_problem, build_problems
from layout.design.scenarios import Scenario, scenarios
from layout.design.study import Progress, Study, as_part, lay_out_study, silent
from layout.design.turned import all_normal, has_free_axes
from layout.errors import BriefError
from layout.evidence.baselines import evenly, first_at_site, standard_subset
from layout.evidence.dropout import losses_of_each
from layout.evidence.wrong_models import order_change
from layout.outputs.assess_tables import AssessedLayout, Assessment, Ceiling, OtherModel
from layout.sensing.rules import candidate_prices
from layout.units import MM

SKULL_FACTORS = (0.5, 2.0)
NOISE_FACTORS = (0.5, 2.0)
HEADS = ("female 5th percentile", "male 95th percentile")
STARTS, PARTS = 5, 20  # of the searches under other models
PAIRS = "Left-right pairs are not asked of given layouts, so best and bound are over layouts without that rule."
MONEY = "The budget is left aside: best and bound are over layouts of as many sensors, whatever they cost."


def assess(
    brief: Brief,
    layouts: Sequence[str],
    *,
    within: float = WITHIN,
    other_models: bool = False,
    progress: Progress = silent,
) -> Assessment:
    """Values, bounds and ceilings of layouts given as tables or names (see `given_layout`).

    other_models: also judge them under other skull conductivities, noise levels and, on the template, head sizes: those
    of the brief's [scenarios], or a standard set where it names none. Raises BriefError and FileError as
    `given_layout`, BriefError where other models are asked for free axes or a lead field from a file.
    """
    paired = brief.places.left_right_pairs
    goal = replace(brief.goal, reach_bits=None, reach_error=None)
    search = replace(brief.search, polish=False, ranked=max(brief.search.ranked, 1) if other_models else 1)
    brief = replace(unpaired(brief), goal=goal, search=search)
    study = lay_out_study(brief, progress)
    given = [given_layout(study, text, within) for text in layouts]
    _check_names(given)
    if other_models:
        _check_models(study)
    objective = build_objective(study, build_problems(study, progress))
    known: dict[tuple[int, ...], Found | None] = {}
    with threadpool_limits(limits=1, user_api="blas"):  # small factorisations: threads cost more than they give
        assessed = tuple(
            _assessed(study, objective, one, known, as_part(progress, f"layout {number} of {len(given)}"))
            for number, one in enumerate(given, 1)
        )
        progress("dense caps")
        tops = _ceilings(study, objective)
        models = _models(study, objective, given, known, progress) if other_models else ()
    notes = (PAIRS,) if paired else ()
    notes += (MONEY,) if brief.budget is not None else ()
    if any(found is not None and found.stopped_by_clock for found in known.values()):
        notes += (CLOCK,)
    return Assessment(brief.title, objective.unit, assessed, tops, models, notes)


def _check_names(given: list[GivenLayout]) -> None:
    names = [one.name for one in given]
    if not names:
        raise BriefError("LAYOUT: must be given at least once, but was not")
    for name in names:
        if names.count(name) > 1:
            raise BriefError(f"LAYOUT: must be given once each, but {name!r} was given twice")


def _found(study: Study, objective: Objective, chosen: np.ndarray, known: dict, progress: Progress) -> Found | None:
    """What a search of as many sensors of each kind finds; None where no layout of so many keeps the rules."""
    counts = tuple(int(one) for one in np.bincount(study.feasible.group[chosen], minlength=len(study.feasible.counts)))
    if counts not in known:
        rules = rules_or_none(study.feasible, chosen)
        known[counts] = None if rules is None else find_layouts(replace(study, feasible=rules), objective, progress)
    return known[counts]


def _assessed(
    study: Study, objective: Objective, given: GivenLayout, known: dict, progress: Progress
) -> AssessedLayout:
    progress(f"judging {given.name}")
    at, own = with_own_axes(study, objective, given)
    found = _found(study, objective, given.chosen, known, progress)
    rules = rules_or_none(study.feasible, given.chosen)
    score = own.shown.score(given.chosen)
    scale = 1.0 if objective.unit == "bits" else 1.0 / MM
    best = None if found is None else found.layouts[0]
    keeps = rules is not None and rules.allows(given.chosen) and not own.breaks_limits(given.chosen)
    notes = given.notes if keeps else (*given.notes, "breaks a rule of the brief, judged all the same")
    return AssessedLayout(
        name=given.name,
        value=float(objective.printed(score)),
        # A given layout may be better than what the search met; it may only count where it keeps the rules.
        best=None if best is None else float(objective.printed(max(best.value, score) if keeps else best.value)),
        bound=None if best is None else float(objective.printed(best.bound)),
        cost=float(candidate_prices(study.brief, study.candidates)[given.chosen].sum()),
        names=tuple(at.candidates.names[one] for one in given.chosen),
        lost=tuple(float(scale * one) for one in losses_of_each(own.shown, given.chosen)),
        channels=int(np.isin(at.candidates.candidate_of_channel, given.chosen).sum()),
        per_region=own.per_region(given.chosen),
        keeps_rules=keeps,
        notes=notes,
    )


def _ceilings(study: Study, objective: Objective) -> tuple[Ceiling, ...]:
    """Every site with its first option, and all candidates at once."""
    plain, own = all_normal(study, objective) if has_free_axes(study.candidates) else (study, objective)
    candidates = plain.candidates
    first = [
        first_at_site(candidates.site, candidates.kind, entry)[1]
        for entry in range(len(study.brief.stock))
        if (candidates.kind == entry).any()
    ]
    chosen = np.sort(np.concatenate(first))
    channels = int(np.isin(candidates.candidate_of_channel, chosen).sum())
    dense = Ceiling(
        "every site, its first option", float(objective.printed(everything(own, len(candidates), chosen))), channels
    )
    whole = everything(objective, len(study.candidates))
    everywhere = len(study.candidates.candidate_of_channel)
    return dense, Ceiling("all candidates at once", float(objective.printed(whole)), everywhere)


def _check_models(study: Study) -> None:
    if has_free_axes(study.candidates):
        raise BriefError(
            '--other-models: must be left out where stock.axes is "free" or "free_two", but it was given; a list of '
            "axes goes with it"
        )
    if study.brief.head.lead_field_file is not None:
        raise BriefError(
            "--other-models: must be left out where head.lead_field_file gives the lead field, but it was given"
        )


def asked_models(brief: Brief) -> ScenariosBrief:
    """The other models of the brief's [scenarios]; a standard set where it names none."""
    named = replace(brief.scenarios, pose_error=0.0, pose_tilt=0.0, any_one_lost=False)
    if named != replace(ScenariosBrief(), judge=named.judge, pose_draws=named.pose_draws):
        return named
    conductivities = list(brief.head.conductivities)
    skull = len(conductivities) - 2  # from the brain outwards, the scalp last
    sets = tuple(
        tuple(value * factor if place == skull else value for place, value in enumerate(conductivities))
        for factor in SKULL_FACTORS
    )
    sized = brief.head.kind == "template" and brief.head.size is None
    return ScenariosBrief(
        conductivities=sets,
        noise_factors=NOISE_FACTORS,
        background_factors=NOISE_FACTORS,
        heads=tuple(name for name in HEADS if name in NAMED_SIZES) if sized else (),
    )


def _models(
    study: Study, objective: Objective, given: list[GivenLayout], known: dict, progress: Progress
) -> tuple[OtherModel, ...]:
    """The layouts, the search's and the baselines under each model, beside what a search under it finds."""
    found = _found(study, objective, given[0].chosen, known, progress)
    if found is None:
        raise BriefError(
            "--other-models: must be left out where no layout of as many sensors keeps the brief's rules, but it was "
            "given"
        )
    rules = rules_or_none(study.feasible, given[0].chosen)
    alone = replace(
        study.brief, scenarios=ScenariosBrief(), search=replace(study.brief.search, ranked=1, starts=STARTS)
    )
    within = replace(study, brief=alone, feasible=rules)
    listed = {one.name: one.chosen for one in given}
    listed |= {f"search, rank {rank}": one.chosen for rank, one in enumerate(found.layouts, 1)}
    listed |= _baselines(study, given[0].chosen)
    first = objective.problems[0]
    asked = scenarios(replace(study, brief=replace(study.brief, scenarios=asked_models(study.brief))))
    goals, designs = [], []
    for number, scenario in enumerate(asked, 1):
        progress_there = as_part(progress, f"model {number} of {len(asked)}")
        progress_there(f"under {scenario.name}")
        goals.append(_objective_under(within, scenario, first.calibration))
        designs.append(find_layouts(within, goals[-1], progress_there).layouts[0])
    listed |= {f"designed for {one.name}": best.chosen for one, best in zip(asked, designs, strict=True)}
    # The same layout under two names would count twice among the pairs.
    alike = {tuple(sorted(chosen)): number for number, chosen in reversed(list(enumerate(listed.values())))}
    once = sorted(alike.values())
    table = np.array([[goal.shown.score(chosen) for chosen in listed.values()] for goal in goals])
    return tuple(
        OtherModel(
            name=scenario.name,
            values={name: float(goal.printed(score)) for name, score in zip(listed, scores, strict=True)},
            designed=float(goal.printed(best.value)),
            bound=float(goal.printed(best.bound)),
            order=None if number == 0 else order_change(table[0, once], scores[once]),
        )
        for number, (scenario, goal, best, scores) in enumerate(zip(asked, goals, designs, table, strict=True))
    )


def _objective_under(study: Study, scenario: Scenario, calibration: object) -> Objective:
    return build_objective(study, (build_problem(study, scenario=scenario, calibration=calibration),))


def _baselines(study: Study, chosen: np.ndarray) -> dict[str, np.ndarray]:
    counts = np.bincount(study.candidates.kind[chosen], minlength=len(study.brief.stock))
    points, site = study.candidates.sites.positions, study.candidates.site
    families = tuple(
        (family, np.array([study.standard[n] for n in family_names(family) if n in study.standard]))
        for family in FAMILIES
    )
    standard, _ = standard_subset(points, site, study.feasible, counts, families)
    found = {"even spread": evenly(points, site, study.feasible, counts)}
    return found if standard is None else found | {"standard positions": standard}
