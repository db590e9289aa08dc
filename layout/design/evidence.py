"""The evidence on every ranked layout that a design hands over: placement, channel curve, sensitivity and noise."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from threadpoolctl import threadpool_limits

from layout.brief.objects import Brief
from layout.design.curve import Amounts, curve_of
from layout.design.found import Found, parts_of
from layout.design.given_layouts import unpaired
from layout.design.layout_noise import channel_noise, sensitivity
from layout.design.moved_sensors import MovedSensors
from layout.design.objective import Objective, build_objective
from layout.design.placement import PAIRED, POSES, misplaced, placed
from layout.design.problem import build_problems
from layout.design.study import Progress, Study, lay_out_study
from layout.engine.feasible import Feasible
from layout.errors import InfeasibleError
from layout.evidence.curve import of_budget, of_count
from layout.outputs.curve_tables import Curve
from layout.outputs.evidence_result import Evidence
from layout.outputs.placement_tables import Placement
from layout.outputs.result import RankedLayout
from layout.units import DEGREE, MM, NAM

PROBE = 10 * NAM  # about what a small patch of active cortex gives (common practice)
SHIFT, TILT = 5 * MM, 5 * DEGREE  # as `layout placement` takes them
DRAWS = 100  # of the first layout misplaced
COUNT_SHARES = (0.25, 0.5, 0.75, 1.0, 1.5, 2.0)  # of the sensors asked for
BUDGET_SHARES = (0.5, 0.75, 1.0, 1.25, 1.5)
FEWEST = 2
CURVE_PARTS = 100  # of branch and bound for a point of the curve: the first hundred close most of what a thousand do
CURVE_NOTE = (
    f"Bounds other than the design's own come from at most {CURVE_PARTS} parts of the tree: `layout curve` takes as "
    "many as the design and may tighten them."
)

Single = tuple[Study, Objective, np.ndarray]


def gather_evidence(
    study: Study, objective: Objective, found: Found, layouts: tuple[RankedLayout, ...], progress: Progress
) -> Evidence:
    """Evidence on the found layouts, as described. Only the first has its misplacement drawn at random."""
    singles, notes = _as_singles(study, found, layouts, progress)
    noise, seen = [], []
    for (at, own, chosen), layout in zip(singles, layouts, strict=True):
        progress(f"sensitivity and noise of rank {layout.rank}")
        noise.append(channel_noise(at, own, chosen, _numbers(layout, chosen)))
        seen.append(sensitivity(at, own, chosen, PROBE))
    placements: tuple[Placement, ...] = ()
    if study.brief.head.lead_field_file is None:
        placements = _placements(study.brief, singles, layouts, notes, progress)
    return Evidence(
        placements=placements,
        curve=_curve(study, objective, found, progress),
        sensitivity=tuple(seen),
        probe_moment=PROBE,
        noise=tuple(noise),
    )


def _curve(study: Study, objective: Objective, found: Found, progress: Progress) -> Curve | None:
    """The curve around what the brief asks for, None where its rules leave no second point."""
    amounts, parts = curve_amounts(study), parts_of(study, objective)
    if len(amounts.values) < 2:
        return None
    search = replace(study.brief.search, proof_parts=min(parts, CURVE_PARTS))
    quicker = replace(study, brief=replace(study.brief, search=search))
    curve = curve_of(quicker, objective, amounts, found, progress)
    return replace(curve, warnings=(*curve.warnings, CURVE_NOTE)) if parts > CURVE_PARTS else curve


def curve_amounts(study: Study) -> Amounts:
    """Shares of what the brief asks for, as far as its other rules allow them."""
    rules, budget = study.feasible, study.brief.budget
    if budget is None:
        asked = [max(FEWEST, round(share * rules.size)) for share in COUNT_SHARES]
        values = [float(one) for one in sorted(set(asked)) if _allowed(of_count, rules, one)]
        return Amounts("count", tuple(values))
    asked = [float(f"{share * budget.total:.3g}") if share != 1 else budget.total for share in BUDGET_SHARES]
    return Amounts("budget", tuple(one for one in asked if _allowed(of_budget, rules, one)))


def _allowed(limited: Callable[[Feasible, float], Feasible], rules: Feasible, amount: float) -> bool:
    try:
        limited(rules, amount)
    except InfeasibleError:
        return False
    return True


def _as_singles(
    study: Study, found: Found, layouts: tuple[RankedLayout, ...], progress: Progress
) -> tuple[list[Single], tuple[str, ...]]:
    """Each layout as single sensors in the order of its rows, with the study in which they can be moved, and notes."""
    wanted = [_of_rows(layout) for layout in layouts]
    if study.candidates.pairs is None:
        return [(at, own, chosen) for (at, own), chosen in zip(found.at, wanted, strict=True)], ()
    alone = lay_out_study(unpaired(study.brief), progress)
    objective = build_objective(alone, build_problems(alone, progress))
    return [(alone, objective, chosen) for chosen in wanted], (PAIRED,)


def _of_rows(layout: RankedLayout) -> np.ndarray:
    """The candidates of the layout's sensors in the order of their numbers, the ground left out."""
    return np.array([row.candidate for row in layout.sensors if row.candidate >= 0])


def _numbers(layout: RankedLayout, chosen: np.ndarray) -> np.ndarray:
    number_of = {row.candidate: row.number for row in layout.sensors}
    return np.array([number_of[one] for one in chosen.tolist()])


def _placements(
    brief: Brief,
    singles: list[Single],
    layouts: tuple[RankedLayout, ...],
    notes: tuple[str, ...],
    progress: Progress,
) -> tuple[Placement, ...]:
    """One for each layout; layouts of one study have their shared sensors moved together."""
    found: list[Placement] = []
    together = all(at is singles[0][0] for at, _, _ in singles)
    groups = [range(len(singles))] if together else [range(one, one + 1) for one in range(len(singles))]
    with threadpool_limits(limits=1, user_api="blas"):  # small factorisations: threads cost more than they give
        for group in groups:
            at, own, _ = singles[group[0]]
            moved = MovedSensors(at, own, [singles[one][2] for one in group], progress)
            for one, rooms in zip(group, moved.rooms(), strict=True):
                name = f"Layout of rank {layouts[one].rank}"
                placement = placed(at, own, singles[one][2], rooms, name, notes, progress=progress)
                if one == 0:
                    tilt = TILT if moved.any_housed else 0.0
                    loss = misplaced(moved, 0, own, SHIFT, tilt, DRAWS, (brief.search.seed, POSES, 0))
                    placement = replace(placement, losses=(*placement.losses, loss))
                found.append(placement)
    return tuple(found)
