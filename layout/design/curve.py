"""Value and bound against the number of sensors or the budget, one point after the other, each kept as it ends."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from threadpoolctl import threadpool_limits

from layout import __version__
from layout.anatomy.positions import FAMILIES, family_names
from layout.brief.objects import Brief
from layout.design.found import Found, find_layouts
from layout.design.objective import Objective, build_objective
from layout.design.problem import build_problems
from layout.design.study import Progress, Study, lay_out_study, silent
from layout.design.turned import has_free_axes
from layout.engine.combined_loss import AnyOneLost
from layout.engine.feasible import Feasible
from layout.errors import BriefError
from layout.evidence.baselines import equal_even_spread, evenly, standard_subset
from layout.evidence.curve import Grown, better, grown, next_sensor, of_budget, of_count, shrunk
from layout.outputs.curve_tables import Curve, CurvePoint
from layout.sensing.rules import candidate_prices

NESTED_STARTS = 2  # a nested curve searches its first point only; elsewhere the search serves the bound
MOST_POINTS = 1000
CLOCK = "The search was stopped by its time allowance: another run may end elsewhere; the bounds hold all the same."


@dataclass(frozen=True)
class Amounts:
    """What the points of a curve may spend: rising numbers of sensors (by "count") or budgets (by "budget")."""

    by: str
    values: tuple[float, ...]


def parse_amounts(by: str, text: str) -> Amounts:
    """Amounts from first:last:step (the last included where a step ends there) or from numbers with commas between.

    by: "count" or "budget". Raises BriefError naming the option, the rule and what was given.
    """
    key = "--counts" if by == "count" else "--budgets"
    rule = "must be first:last:step or numbers with commas between, such as 4:32:4 or 8,16,24, rising and above 0"
    parts = text.split(":")
    try:
        if len(parts) == 3:
            first, last, step = (float(part) for part in parts)
            if not (np.isfinite([first, last, step]).all() and step > 0 and (last - first) / step < MOST_POINTS):
                raise ValueError
            values = tuple(first + step * place for place in range(int(np.floor((last - first) / step + 1e-9)) + 1))
        else:
            values = tuple(float(part) for part in text.split(","))
        whole = by == "budget" or all(value == round(value) for value in values)
        rising = (np.diff(values) > 0).all()
        if not (values and np.isfinite(values).all() and values[0] > 0 and whole and rising):
            raise ValueError
    except ValueError:
        raise BriefError(f"{key}: {rule}, but {text!r} was given") from None
    return Amounts(by, values)


def run_key(brief: Brief, amounts: Amounts, nested: bool) -> str:
    """What a point of this very curve is known by: brief, version, amounts and way; a point of another is not used."""
    said = json.dumps([brief.sha256, __version__, amounts.by, list(amounts.values), nested])
    return hashlib.sha256(said.encode()).hexdigest()


def curve(
    brief: Brief,
    amounts: Amounts,
    nested: bool = False,
    known: Callable[[float], CurvePoint | None] = lambda spent: None,
    keep: Callable[[CurvePoint], None] = lambda point: None,
    progress: Progress = silent,
) -> Curve:
    """The best layout met, its bound and the baselines for every amount.

    nested: each layout contains the one before; else each is searched anew, and from its neighbours. known(spent): the
    point of an earlier run that was cut short, so that it goes on there; keep(point) is called with every new one.
    Raises BriefError for a budget without prices and for nested layouts of free axes, InfeasibleError where the rules
    allow no layout for an amount.
    """
    if amounts.by == "budget" and brief.budget is None:
        raise BriefError("--budgets: must be left out where the brief has no [budget], but it was given")
    asked = _of_one_rank(brief)
    study = lay_out_study(asked, progress)
    run = _Run(study, amounts, nested, progress)  # an impossible amount is told before the lead fields
    run.judged_by(build_objective(study, build_problems(study, progress)))
    return _traced(run, amounts, known, keep)


def curve_of(study: Study, objective: Objective, amounts: Amounts, found: Found, progress: Progress = silent) -> Curve:
    """The curve of a study for which `found` was found; that serves as its own point where it spends as much."""
    study = replace(study, brief=_of_one_rank(study.brief))
    run = _Run(study, amounts, False, progress)
    run.judged_by(objective)
    own = run.own_point(found)
    return _traced(run, amounts, lambda spent: own if own is not None and own.spent == spent else None, lambda _: None)


def _of_one_rank(brief: Brief) -> Brief:
    """The brief without what a curve does not ask for."""
    search = replace(brief.search, ranked=1, polish=False, proof_ranks=1)
    return replace(brief, search=search, goal=replace(brief.goal, reach_bits=None, reach_error=None))


def _traced(
    run: _Run, amounts: Amounts, known: Callable[[float], CurvePoint | None], keep: Callable[[CurvePoint], None]
) -> Curve:
    points: list[CurvePoint] = []
    with threadpool_limits(limits=1, user_api="blas"):  # small factorisations: threads cost more than they give
        for number, spent in enumerate(amounts.values, 1):
            point = known(spent)
            if point is None:
                run.saying(f"{amounts.by} {spent:g}, {number} of {len(amounts.values)}")
                point = run.point(spent, points[-1] if points else None)
                keep(point)
            points.append(point)
        if not run.nested and not run.turned:
            run.saying("looking back from the larger layouts")
            points = run.looked_back(points)
        return run.curve(points)


class _Run:
    """One curve under way, over the rules of a study."""

    def __init__(self, study: Study, amounts: Amounts, nested: bool, progress: Progress) -> None:
        self._brief, self._study, self._amounts, self.nested = study.brief, study, amounts, nested
        self._progress, self._doing = progress, ""
        self.turned = has_free_axes(study.candidates)
        if self.turned and nested:
            raise BriefError('--nested: must be left out where stock.axes is "free" or "free_two", but it was given')
        self._rules = {spent: self._allowed(spent) for spent in amounts.values}
        self._spreads: dict[int, float] = {}
        self._families = tuple(
            (family, np.array([study.standard[n] for n in family_names(family) if n in study.standard]))
            for family in FAMILIES
        )

    def judged_by(self, objective: Objective) -> None:
        """Take the objective of the study."""
        self._objective = objective

    def own_point(self, found: Found) -> CurvePoint | None:
        """The point of a layout found for the study as it is; None where it spends as much as no point of the curve."""
        best, (at, own) = found.layouts[0], found.at[0]
        if self._amounts.by == "budget":
            spent = self._brief.budget.total
        elif len(self._brief.stock) == 1:
            spent = float(self._study.candidates.sensors[best.chosen].sum())
        else:
            return None  # with several kinds in stock a curve leaves their mix free
        if spent not in self._rules:
            return None
        return self._described(spent, best.chosen, best.bound, at, own, found.plain, found.stopped_by_clock)

    def saying(self, doing: str) -> None:
        self._doing = doing
        self._progress(doing)

    def _allowed(self, spent: float) -> Feasible:
        if self._amounts.by == "budget":
            return of_budget(self._study.feasible, spent)
        return of_count(self._study.feasible, int(spent))

    def point(self, spent: float, before: CurvePoint | None) -> CurvePoint:
        rules, objective = self._rules[spent], self._objective
        study = replace(self._study, feasible=rules)
        if self.nested and before is not None:
            search = replace(self._brief.search, starts=min(NESTED_STARTS, self._brief.search.starts))
            study = replace(study, brief=replace(study.brief, search=search))
        found = find_layouts(study, objective, lambda doing: self._progress(f"{self._doing}: {doing}"))
        best, (at, own) = found.layouts[0], found.at[0]
        layout = Grown(best.chosen, best.value)
        if before is not None and not self.turned:
            warm = grown(objective.goal, rules, np.array(before.chosen), nested=self.nested)
            if self.nested and warm is None:
                raise BriefError(
                    f"--nested: must be left out where a smaller layout leaves no room, but no layout for {spent:g} "
                    f"contains the one for {before.spent:g}"
                )
            layout = warm if self.nested else better(layout, warm)
        return self._described(spent, layout.chosen, best.bound, at, own, found.plain, found.stopped_by_clock)

    def looked_back(self, points: list[CurvePoint]) -> list[CurvePoint]:
        """The points, each tried once more from its larger neighbour, the largest first."""
        goal, plain = self._objective.goal, (self._study, self._objective)
        settled = points[-1:]
        for point in points[-2::-1]:
            rules, chosen = self._rules[point.spent], np.array(point.chosen)
            own = Grown(chosen, goal.score(chosen))
            best = better(own, shrunk(goal, rules, np.array(settled[0].chosen)))
            if best is not own:
                bound = self._score_of(point.bound)
                point = self._described(point.spent, best.chosen, bound, *plain, plain, point.stopped_by_clock)
            settled.insert(0, point)
        return settled

    def _score_of(self, printed: float) -> float:
        return printed if self._objective.unit == "bits" else -printed * 1e-3

    def _described(
        self,
        spent: float,
        chosen: np.ndarray,
        bound: float,
        at: Study,
        own: Objective,
        plain: tuple[Study, Objective],
        stopped: bool,
    ) -> CurvePoint:
        candidates, rules = at.candidates, self._rules[spent]
        score = own.shown.score(chosen)
        more = next_sensor(own.shown, rules, chosen)
        study, objective = plain
        counts = np.bincount(study.candidates.kind[chosen], minlength=len(study.brief.stock))
        points, site = study.candidates.sites.positions, study.candidates.site
        equal, largest = None, 0
        if len(counts) == 1:
            equal, largest = equal_even_spread(
                objective.shown, study.feasible, points, site, score, len(chosen), self._spreads
            )
        spread = evenly(points, site, study.feasible, counts)
        standard, _ = standard_subset(points, site, study.feasible, counts, self._families)
        priced = (
            rules.cost(chosen) if rules.budget is not None else candidate_prices(at.brief, candidates)[chosen].sum()
        )
        return CurvePoint(
            spent=float(spent),
            sensors=int(candidates.sensors[chosen].sum()),
            channels=int(np.isin(candidates.candidate_of_channel, chosen).sum()),
            value=float(own.printed(score)),
            bound=float(own.printed(bound)),
            cost=float(priced),
            chosen=tuple(int(one) for one in chosen),
            names=tuple(candidates.names[one] for one in chosen),
            even_spread=float(own.printed(objective.shown.score(spread))),
            standard=None if standard is None else float(own.printed(objective.shown.score(standard))),
            equals_even_spread_of=equal,
            even_spread_limit=largest,
            next_value=None if more is None else float(own.printed(more[0])),
            next_name=None if more is None else candidates.names[more[1]],
            keeps_limits=not self._objective.breaks_limits(chosen),
            stopped_by_clock=stopped,
        )

    def curve(self, points: list[CurvePoint]) -> Curve:
        objective, candidates = self._objective, self._study.candidates
        self.saying("all candidates at once")
        warnings = (CLOCK,) if any(one.stopped_by_clock for one in points) else ()
        if not all(one.keeps_limits for one in points):
            warnings += ("Some of these layouts break the brief's limits on errors (keeps_limits in curve.csv).",)
        return Curve(
            title=self._brief.title,
            unit=objective.unit,
            by=self._amounts.by,
            nested=self.nested,
            points=tuple(points),
            ceiling=float(objective.printed(everything(objective, len(candidates)))),
            ceiling_channels=len(candidates.candidate_of_channel),
            warnings=warnings,
        )


def everything(objective: Objective, n_candidates: int, some: np.ndarray | None = None) -> float:
    """Score of all candidates at once, or of `some` (m,): no layout of theirs has more. Of so many, losing one is
    taken to be losing nothing.
    """
    goal = objective.shown.goal if isinstance(objective.shown, AnyOneLost) else objective.shown
    return goal.score(np.arange(n_candidates) if some is None else some)
