"""How exactly a layout's sensors must be placed, what replaces each, and what failures and misplacement cost."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
from threadpoolctl import threadpool_limits

from layout.brief.objects import Brief
from layout.design.found import find_layouts
from layout.design.given_layouts import WITHIN, given_layout, rules_or_none, unpaired, with_own_axes
from layout.design.moved_sensors import MovedSensors, Rooms
from layout.design.objective import Objective, build_objective
from layout.design.problem import build_problems
from layout.design.study import Progress, Study, lay_out_study, silent
from layout.engine.feasible import Feasible
from layout.errors import BriefError
from layout.evidence.dropout import ExpectedLoss, losses_of_each, random_failures
from layout.evidence.substitutes import best_substitutes
from layout.outputs.placement_tables import LossRow, PlacedSensor, Placement
from layout.units import DEGREE, MM

MOST_FAILING = 3
DRAWS = 200  # of misplaced layouts
FAILURES, POSES = 21, 22  # keep these draws apart from one another and from those of the search
PAIRED = "Each sensor of a left-right pair is looked at by itself; substitutes need not mirror another."
NOTES = (
    "Room: one sensor is off, all others sit as planned, and the analysis knows where it is; a place that the analysis "
    "gets wrong costs more. A sensor on a grid may gain in some directions.",
    "Failures: the others are used as they are; of electrodes any one that is left serves as the reference.",
)


def placement(
    brief: Brief,
    rank: int = 1,
    layout: str | None = None,
    *,
    within: float = WITHIN,
    shift: float = 5 * MM,
    tilt: float = 5 * DEGREE,
    most_failing: int = MOST_FAILING,
    draws: int = DRAWS,
    progress: Progress = silent,
) -> Placement:
    """The evidence for the `rank`-th layout that a design of the brief finds, or for a given one (see `given_layout`).

    shift [m] and tilt [rad]: rms of random misplacement along, and about, each tangent of the scalp, over `draws` draws
    of the whole layout. most_failing: sensors that fail at once, at most. Raises BriefError where there is no such
    rank, or the lead field is given by a file.
    """
    if brief.head.lead_field_file is not None:
        raise BriefError(
            "head.lead_field_file: must be left out where sensors are moved, since its gain holds at one place only, "
            f"but {brief.head.lead_field_file.name!r} was given"
        )
    study, objective, chosen, name, notes = (
        _ranked(brief, rank, progress) if layout is None else _brought(brief, layout, within, progress)
    )
    with threadpool_limits(limits=1, user_api="blas"):  # small factorisations: threads cost more than they give
        moved = MovedSensors(study, objective, [chosen], progress)
        [rooms] = moved.rooms()
        found = placed(study, objective, chosen, rooms, name, notes, most_failing=most_failing, progress=progress)
        cases = [(shift, 0.0), (0.0, tilt), (shift, tilt)] if moved.any_housed else [(shift, 0.0)]
        losses = tuple(
            misplaced(
                moved,
                0,
                objective,
                slid,
                tilted,
                draws,
                (brief.search.seed, POSES, number),
                part=f"misplacement {number + 1} of {len(cases)}",
            )
            for number, (slid, tilted) in enumerate(cases)
            if slid or tilted
        )
    return replace(found, losses=found.losses + losses)


def placed(
    study: Study,
    objective: Objective,
    chosen: np.ndarray,
    rooms: Rooms,
    name: str,
    notes: tuple[str, ...] = (),
    *,
    most_failing: int = MOST_FAILING,
    progress: Progress = silent,
) -> Placement:
    """Room, worth and substitutes of each of the chosen (k,); expected losses of up to `most_failing` failures."""
    progress("substitutes")
    rules = rules_or_none(study.feasible, chosen)
    instead = _substitutes(study, objective, rules, chosen)
    lost = losses_of_each(objective.shown, chosen)
    losses = []
    rng = np.random.default_rng([study.brief.search.seed, FAILURES])
    for failing in range(1, min(most_failing, len(chosen) - 1) + 1):
        progress(f"{failing} sensors failing")
        loss = random_failures(objective.shown, chosen, failing, rng)
        losses.append(LossRow("failures", failing, 0.0, 0.0, _printed(loss, objective)))
    candidates, scale = study.candidates, _scale(objective)
    sensors = tuple(
        PlacedSensor(
            number=place + 1,
            name=candidates.names[one],
            kind=study.brief.stock[candidates.kind[one]].name,
            site=candidates.sites.names[candidates.site[one]],
            lost=float(scale * lost[place]),
            slide=rooms.slides[place],
            tilt=rooms.tilts[place],
            lift=rooms.lifts[place],
            substitutes=instead[place],
        )
        for place, one in enumerate(chosen)
    )
    if rules is None or not rules.allows(chosen):
        notes += ("The layout itself breaks a rule of the brief; substitutes are those that mend it, if any.",)
    value = float(objective.printed(objective.shown.score(chosen)))
    return Placement(study.brief.title, name, objective.unit, value, sensors, tuple(losses), (*notes, *NOTES))


def misplaced(
    moved: MovedSensors,
    layout: int,
    objective: Objective,
    shift: float,
    tilt: float,
    draws: int,
    draw: tuple[int, ...],
    part: str = "misplacement 1 of 1",
) -> LossRow:
    """Expected loss with every sensor of the numbered layout off at random; draw: what the draws are seeded with."""
    loss = moved.misplaced(layout, shift, tilt, draws, np.random.default_rng(draw), part)
    return LossRow("misplacement", 0, shift, tilt, _printed(loss, objective))


def _scale(objective: Objective) -> float:
    return 1.0 if objective.unit == "bits" else 1.0 / MM


def _printed(loss: ExpectedLoss, objective: Objective) -> ExpectedLoss:
    """The same in the printed unit."""
    sizes = {name: _scale(objective) * getattr(loss, name) for name in ("mean", "low", "high", "tail", "worst")}
    return replace(loss, **sizes)


def _ranked(brief: Brief, rank: int, progress: Progress) -> tuple[Study, Objective, np.ndarray, str, tuple[str, ...]]:
    """The study, objective, single sensors and name of a layout that the search finds."""
    goal = replace(brief.goal, reach_bits=None, reach_error=None)
    asked = replace(brief, goal=goal, search=replace(brief.search, ranked=max(rank, 1), polish=False))
    study = lay_out_study(asked, progress)
    objective = build_objective(study, build_problems(study, progress))
    found = find_layouts(study, objective, progress)
    if not 1 <= rank <= len(found.layouts):
        raise BriefError(
            f"--rank: must be from 1 to {len(found.layouts)}, the layouts that differ, but {rank} was given"
        )
    chosen, (at, own) = found.layouts[rank - 1].chosen, found.at[rank - 1]
    name = f"Layout of rank {rank}"
    if at.candidates.pairs is None:
        return at, own, chosen, name, ()
    singles = np.sort(at.candidates.single_sensors(chosen))
    alone = lay_out_study(unpaired(asked), progress)
    return alone, build_objective(alone, build_problems(alone, progress)), singles, name, (PAIRED,)


def _brought(
    brief: Brief, layout: str, within: float, progress: Progress
) -> tuple[Study, Objective, np.ndarray, str, tuple[str, ...]]:
    study = lay_out_study(unpaired(brief), progress)
    given = given_layout(study, layout, within)
    objective = build_objective(study, build_problems(study, progress))
    at, own = with_own_axes(study, objective, given)
    name = Path(layout).name if "," not in layout else "Layout of the given names"
    notes = (PAIRED,) if brief.places.left_right_pairs else ()
    return at, own, given.chosen, name, (*given.notes, *notes)


def _substitutes(
    study: Study, objective: Objective, rules: Feasible | None, chosen: np.ndarray
) -> list[tuple[tuple[str, float], ...]]:
    if rules is None:
        return [()] * len(chosen)
    found = best_substitutes(objective.shown, rules, chosen, study.candidates.site)
    return [
        tuple(
            (study.candidates.names[number], float(objective.printed(score)))
            for number, score in zip(one.candidates, one.scores, strict=True)
        )
        for one in found
    ]
