"""After the grid: sensors slide along the scalp, each step's lead fields computed anew, while the rules hold."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from threadpoolctl import threadpool_limits

from layout.brief.objects import Brief
from layout.design.objective import Objective, build_objective
from layout.design.problem import build_problem
from layout.design.scenarios import scenarios
from layout.design.study import Progress, Study
from layout.engine.feasible import Feasible
from layout.engine.rules import Rule
from layout.engine.search import exchange, improves
from layout.outputs.result import Polished, PolishedSensor
from layout.sensing.kept import kept_candidates, named_reference
from layout.sensing.rules import placement_rules
from layout.sensing.slide import Slid, Slider

STEPS = (6e-3, 3e-3, 1.5e-3, 0.75e-3)  # [m] a pattern search: each length until it gains nothing
ROUNDS = 6  # at one length
COMPASS = np.stack([np.cos(np.arange(8) * np.pi / 4), np.sin(np.arange(8) * np.pi / 4)], axis=1)


def polish(study: Study, objective: Objective, chosen: np.ndarray, score: float, progress: Progress) -> Polished:
    """The layout (k,) of that score with its sensors slid to where nothing within reach scores more.

    Kept sites, a named reference and helmet slots do not move. The bound of the ranking covers candidates on the grid
    only, so a polished layout has none.
    """
    slider = Slider(study.head, study.brief, study.standard)
    fixed = _fixed(study, chosen)
    start = study.candidates.sites.positions[study.candidates.site[chosen]]
    positions, reached, before = start.copy(), score, None
    for length in STEPS:
        steps = np.vstack([np.zeros(2), length * COMPASS])
        for number in range(ROUNDS):
            progress(f"sliding sensors by {1e3 * length:g} mm, round {number + 1}")
            slid = slider.around(study.candidates, chosen, positions, steps, fixed)
            goal, feasible, here = _beside(study, objective, slid, len(chosen))
            with threadpool_limits(limits=1, user_api="blas"):
                if before is None:
                    before = goal.score(here)  # the same as `score` but for rounding
                found, after, _ = exchange(goal, feasible, here)
            if not improves(after, reached):
                break
            found = found[np.argsort(slid.origin[found])]
            positions, reached = slid.candidates.sites.positions[slid.candidates.site[found]], after
    last = slider.around(study.candidates, chosen, positions, np.zeros((1, 2)), np.ones(len(chosen), dtype=bool))
    order = np.argsort(last.origin)
    moved = last.candidates.sites.positions[last.candidates.site[order]]
    sensors = tuple(
        PolishedSensor(
            name=study.candidates.names[one],
            position=last.candidates.positions[last.candidates.candidate_of_channel == order[number]][0],
            scalp_position=moved[number],
            axes=last.candidates.axes[last.candidates.candidate_of_channel == order[number]],
            slid=float(np.linalg.norm(moved[number] - start[number])),
        )
        for number, one in enumerate(chosen)
    )
    whole = abs(score) or 1.0
    return Polished(objective.printed(reached), 100.0 * (reached - score) / whole, sensors)


def _fixed(study: Study, chosen: np.ndarray) -> np.ndarray:
    """Which of the chosen do not move (k,) bool."""
    candidates, stock = study.candidates, study.brief.stock
    named = {named_reference(study.brief, candidates), *kept_candidates(study.brief, candidates)}
    slotted = [stock[candidates.kind[one]].sites.slots_csv is not None for one in chosen]
    return np.array(slotted) | np.isin(chosen, [one for one in named if one is not None])


def _beside(study: Study, objective: Objective, slid: Slid, k: int):
    """(goal, rules, layout): over the candidates beside the sensors, one for each of the k sensors."""
    candidates = slid.candidates
    brief = study.brief
    free = replace(brief, places=replace(brief.places, keep=()), existing=None, stock=_any_reference(brief))
    rules = placement_rules(study.head, free, candidates, study.standard)
    beside = replace(study, candidates=candidates, site_origin=slid.site_origin)
    calibration = objective.problems[0].calibration
    problems = tuple(build_problem(beside, scenario=one, calibration=calibration) for one in scenarios(beside))
    feasible = Feasible(
        group=slid.origin,
        counts=np.ones(k, dtype=int),
        cliques=rules.cliques,
        rules=tuple(Rule(one.name, one.members, one.weights, one.low, one.high) for one in rules.rules),
    )
    here = np.flatnonzero(slid.step == 0)
    return build_objective(beside, problems).goal, feasible, here[np.argsort(slid.origin[here])]


def _any_reference(brief: Brief) -> tuple:
    return tuple(replace(one, reference="any") if one.kind == "electrode" else one for one in brief.stock)
