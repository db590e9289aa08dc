"""From a brief's goal and its problems to the engine's goal, and the figures that every layout is told with."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from layout.brief.objects import GoalBrief
from layout.design.problem import Problem
from layout.design.study import Study
from layout.engine.combined import WeightedSum, Worst
from layout.engine.combined_limits import Limited
from layout.engine.combined_loss import AnyOneLost
from layout.engine.goal import Goal
from layout.engine.information_goal import InformationGoal
from layout.engine.localisation import LocalisationGoal
from layout.outputs.result import RegionFigure
from layout.units import MM


@dataclass(frozen=True)
class Objective:
    """goal: what the search makes large, over all scenarios; shown: the same without limits on errors; unit: "bits" or
    "mm" of what is printed.

    own: the same goal under the brief's own scenario alone; problems: the rows of every scenario, the brief's own
    first; errors: the linearised errors of all regions there, None where neither goal nor limits ask for them.
    """

    goal: Goal
    shown: Goal
    unit: str
    own: Goal
    problems: tuple[Problem, ...]
    errors: LocalisationGoal | None

    def breaks_limits(self, chosen: np.ndarray) -> bool:
        """Whether a layout's errors pass the brief's limits."""
        return isinstance(self.goal, Limited) and not self.goal.kept(chosen)

    def printed(self, score: float) -> float:
        """A score in the unit that is printed."""
        return score if self.unit == "bits" else -score / MM

    def alone(self, study: Study) -> np.ndarray:
        """Score of each candidate on its own (n_candidates,), as if the reference were known."""
        known = build_objective(study, tuple(one.with_known_reference() for one in self.problems))
        return known.shown.priced(np.zeros(0, dtype=int)).additions()

    def per_region(self, chosen: np.ndarray) -> dict[str, RegionFigure]:
        """Each region's information alone, and its linearised error where errors are computed."""
        names = list(self.problems[0].target_columns)
        bits = {name: InformationGoal(self.problems[0].one_region(name)).score(chosen) for name in names}
        if self.errors is None:
            return {name: RegionFigure(value) for name, value in bits.items()}
        error, share, region = self.errors.errors(chosen), self.errors.model.share, self.errors.model.region
        figures = {}
        for number, name in enumerate(names):
            mine = region == number
            rms = float(np.sqrt(share[mine] @ error[mine] ** 2 / share[mine].sum()))
            figures[name] = RegionFigure(bits[name], rms, float(error[mine].max()))
        return figures


def build_objective(study: Study, problems: tuple[Problem, ...]) -> Objective:
    """The brief's goal over its problems, one for each scenario, the brief's own first."""
    asked, judged = study.brief.goal, study.brief.scenarios
    over_scenarios = _judge(judged.judge)
    goals = [_one_goal(asked, problem) for problem in problems]
    goal = over_scenarios(goals)
    if judged.any_one_lost:
        goal = AnyOneLost(goal)
    shown = goal
    if asked.error_limits:
        goal = Limited(goal, _limits(asked, study, problems, over_scenarios))
    return Objective(
        goal,
        shown,
        "mm" if asked.kind == "localisation" else "bits",
        goals[0],
        problems,
        None if problems[0].localisation is None else LocalisationGoal(problems[0].localisation),
    )


def _judge(judge: str) -> Callable[[list[Goal]], Goal]:
    def over(goals: list[Goal]) -> Goal:
        if len(goals) == 1:
            return goals[0]
        return Worst(tuple(goals)) if judge == "worst" else WeightedSum(tuple(goals), (1 / len(goals),) * len(goals))

    return over


def _one_goal(asked: GoalBrief, problem: Problem) -> Goal:
    """The goal under one scenario."""
    if asked.kind == "localisation":
        return LocalisationGoal(problem.localisation, asked.error_over)
    if not asked.region_weights:
        return InformationGoal(problem.model)
    weights = {name: weight for name, weight in asked.region_weights.items() if weight > 0}
    goals = tuple(InformationGoal(problem.one_region(name)) for name in weights)
    return WeightedSum(goals, tuple(weights.values()))


def _limits(
    asked: GoalBrief,
    study: Study,
    problems: tuple[Problem, ...],
    over_scenarios: Callable[[list[Goal]], Goal],
) -> tuple[tuple[Goal, float], ...]:
    limits = []
    names = [region.name for region in study.regions]
    for name, most in asked.error_limits.items():
        number = names.index(name)
        goals = [LocalisationGoal(one.localisation.of_region(number), asked.error_over) for one in problems]
        limits.append((over_scenarios(goals), most))
    return tuple(limits)
