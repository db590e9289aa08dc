"""How exactly a layout's sensors must be placed, what replaces each, and what failures and misplacement cost."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
from threadpoolctl import threadpool_limits

from layout.brief.objects import Brief
from layout.design.displaced import Displacements, Displacer, joined, none
from layout.design.found import find_layouts
from layout.design.given_layouts import WITHIN, given_layout, rules_or_none, unpaired, with_own_axes
from layout.design.objective import Objective, build_objective
from layout.design.pipeline import build_problems
from layout.design.study import Progress, Study, lay_out_study, silent
from layout.engine.feasible import Feasible
from layout.errors import BriefError
from layout.evidence.dropout import ExpectedLoss, losses_of_each, random_failures, random_misplacement
from layout.evidence.substitutes import best_substitutes
from layout.evidence.tolerance import drops, tolerance
from layout.outputs.placement_tables import LossRow, PlacedSensor, Placement, Room, compass
from layout.units import DEGREE, MM

DIRECTIONS = 8
SLIDES = np.array([0.5, 1, 2, 3, 5, 8, 12, 17, 23, 30]) * MM  # on the tangent; the arc is what is reported
TILTS = np.array([1, 2, 4, 7, 11, 16, 23, 32, 45, 60]) * DEGREE
LIFTS = np.array([0.5, 1, 2, 3, 5, 8, 12, 20, 30]) * MM
AT_ONCE = 3000  # displaced sensors whose lead fields are computed together: keeps memory small
DRAWS = 200  # of misplaced layouts
FAILURES, POSES = 21, 22  # keep these draws apart from one another and from those of the search
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
    most_failing: int = 3,
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
    goal = objective.shown
    run = _Run(study, objective, chosen, progress)
    with threadpool_limits(limits=1, user_api="blas"):  # small factorisations: threads cost more than they give
        slides, tilts, lifts = run.room()
        progress("substitutes")
        rules = rules_or_none(study.feasible, chosen)
        instead = _substitutes(study, objective, rules, chosen)
        lost = losses_of_each(goal, chosen)
        losses = []
        rng = np.random.default_rng([brief.search.seed, FAILURES])
        for failing in range(1, min(most_failing, len(chosen) - 1) + 1):
            progress(f"{failing} sensors failing")
            losses.append(
                LossRow("failures", failing, 0.0, 0.0, run.printed(random_failures(goal, chosen, failing, rng)))
            )
        cases = [(shift, 0.0), (0.0, tilt), (shift, tilt)] if run.housed.any() else [(shift, 0.0)]
        for number, (slid, tilted) in enumerate(cases):
            if slid or tilted:
                rng = np.random.default_rng([brief.search.seed, POSES, number])
                losses.append(
                    LossRow("misplacement", 0, slid, tilted, run.printed(run.misplaced(slid, tilted, draws, rng)))
                )
    candidates, scale = study.candidates, 1.0 if objective.unit == "bits" else 1.0 / MM
    sensors = tuple(
        PlacedSensor(
            number=place + 1,
            name=candidates.names[one],
            kind=brief.stock[candidates.kind[one]].name,
            site=candidates.sites.names[candidates.site[one]],
            lost=float(scale * lost[place]),
            slide=slides[place],
            tilt=tilts[place],
            lift=lifts[place],
            substitutes=instead[place],
        )
        for place, one in enumerate(chosen)
    )
    if rules is None or not rules.allows(chosen):
        notes += ("The layout itself breaks a rule of the brief; substitutes are those that mend it, if any.",)
    value = float(objective.printed(goal.score(chosen)))
    return Placement(brief.title, name, objective.unit, value, sensors, tuple(losses), (*notes, *NOTES))


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
    note = "Each sensor of a left-right pair is looked at by itself; substitutes need not mirror another."
    return alone, build_objective(alone, build_problems(alone, progress)), singles, name, (note,)


def _brought(
    brief: Brief, layout: str, within: float, progress: Progress
) -> tuple[Study, Objective, np.ndarray, str, tuple[str, ...]]:
    study = lay_out_study(unpaired(brief), progress)
    given = given_layout(study, layout, within)
    objective = build_objective(study, build_problems(study, progress))
    at, own = with_own_axes(study, objective, given)
    name = Path(layout).name if "," not in layout else "Layout of the given names"
    return at, own, given.chosen, name, given.notes


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


class _Run:
    """One layout whose sensors are moved about."""

    def __init__(self, study: Study, objective: Objective, chosen: np.ndarray, progress: Progress) -> None:
        self._study, self._objective, self._chosen = study, objective, chosen
        self._displacer = Displacer(study, objective, chosen)
        self._progress = progress
        self.housed = np.array([study.brief.stock[study.candidates.kind[one]].kind != "electrode" for one in chosen])

    def room(self) -> tuple[list[Room], list[Room | None], list[Room | None]]:
        """How far each sensor may slide, tilt and be lifted."""
        k, angles = len(self._chosen), 2 * np.pi * np.arange(DIRECTIONS) / DIRECTIONS
        compass_points = np.stack([np.cos(angles), np.sin(angles)], axis=1)
        leaning = np.stack(
            [-np.sin(angles), np.cos(angles)], axis=1
        )  # about this the top leans along the compass point
        grids = [joined([_away(one, compass_points, SLIDES, "along") for one in range(k)])]
        housed = np.flatnonzero(self.housed)
        if len(housed):
            grids.append(joined([_away(one, leaning, TILTS, "tilt") for one in housed]))
            grids.append(joined([_lifted(one) for one in housed]))
        whole, scores = self._scores(joined(grids))
        edges = np.cumsum([len(grid) for grid in grids])
        parts = np.split(drops(whole, scores), edges[:-1])
        arcs = self._displacer.distances(grids[0]).reshape(k, DIRECTIONS, -1)
        slides = [_room(arcs[one], drop) for one, drop in enumerate(parts[0].reshape(k, DIRECTIONS, len(SLIDES)))]
        tilts: list[Room | None] = [None] * k
        lifts: list[Room | None] = [None] * k
        for place, one in enumerate(housed):
            tilts[one] = _room(TILTS, parts[1].reshape(-1, DIRECTIONS, len(TILTS))[place])
            lifts[one] = _room(LIFTS, parts[2].reshape(-1, 1, len(LIFTS))[place])
        return slides, tilts, lifts

    def _scores(self, moved: Displacements) -> tuple[float, np.ndarray]:
        """Score of the layout as it is, and with each displaced sensor (n,) in its owner's place."""
        k, scores, whole = len(self._chosen), [], 0.0
        for first in range(0, len(moved), AT_ONCE):
            self._progress(f"lead fields of displaced sensors, {first} of {len(moved)}")
            some = slice(first, first + AT_ONCE)
            part = Displacements(moved.owner[some], moved.along[some], moved.tilt[some], moved.lift[some])
            state = self._displacer.objective(joined([none(np.arange(k)), part])).shown.priced(np.arange(k))
            table, whole = state.swaps(), state.value
            scores.append(table[part.owner, k + np.arange(len(part))])
        return whole, np.concatenate(scores)

    def misplaced(self, shift: float, tilt: float, draws: int, rng: np.random.Generator) -> ExpectedLoss:
        """The loss with every sensor off at random by `shift` [m] and `tilt` [rad] rms along and about each tangent."""
        k = len(self._chosen)

        def scores(count: int) -> np.ndarray:
            self._progress(f"lead fields of {count} misplaced layouts")
            owner = np.tile(np.arange(k), count)
            along = shift * rng.normal(size=(len(owner), 2))
            turn = tilt * rng.normal(size=(len(owner), 2)) * self.housed[owner, None]
            goal = self._displacer.objective(Displacements(owner, along, turn, np.zeros(len(owner)))).shown
            return np.array([goal.score(np.arange(first, first + k)) for first in range(0, len(owner), k)])

        whole = self._objective.shown.score(self._chosen)
        return random_misplacement(scores, whole, draws, max(1, AT_ONCE // k))

    def printed(self, loss: ExpectedLoss) -> ExpectedLoss:
        """The same in the printed unit."""
        scale = 1.0 if self._objective.unit == "bits" else 1.0 / MM
        sizes = {name: scale * getattr(loss, name) for name in ("mean", "low", "high", "tail", "worst")}
        return replace(loss, **sizes)


def _away(owner: int, compass_points: np.ndarray, sizes: np.ndarray, field: str) -> Displacements:
    steps = (compass_points[:, None] * sizes[None, :, None]).reshape(-1, 2)
    return replace(none(np.full(len(steps), owner)), **{field: steps})


def _lifted(owner: int) -> Displacements:
    return replace(none(np.full(len(LIFTS), owner)), lift=LIFTS.copy())


def _room(distances: np.ndarray, drop: np.ndarray) -> Room:
    found = tolerance(distances, drop)
    toward = tuple("" if one < 0 else compass(one, len(drop)) for one in found.worst_direction)
    return Room(found.worst, found.mean, toward, float(np.broadcast_to(distances, drop.shape)[:, -1].min()))
