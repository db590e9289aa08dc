"""Layouts whose sensors are moved about: how much room each has, and what random misplacement costs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from layout.design.displaced import Displacements, Displacer, joined, none
from layout.design.objective import Objective
from layout.design.study import Progress, Study
from layout.evidence.dropout import ExpectedLoss, random_misplacement
from layout.evidence.tolerance import drops, tolerance
from layout.outputs.placement_tables import Room, compass
from layout.units import DEGREE, MM

DIRECTIONS = 8
SLIDES = np.array([0.5, 1, 2, 3, 5, 8, 12, 17, 23, 30]) * MM  # on the tangent; the arc is what is reported
TILTS = np.array([1, 2, 4, 7, 11, 16, 23, 32, 45, 60]) * DEGREE
LIFTS = np.array([0.5, 1, 2, 3, 5, 8, 12, 20, 30]) * MM
AT_ONCE = 3000  # displaced sensors whose lead fields are computed together: keeps memory small


@dataclass(frozen=True)
class Rooms:
    """Of each sensor of a layout (k,): how far it may slide, tilt and be lifted; None for electrodes."""

    slides: list[Room]
    tilts: list[Room | None]
    lifts: list[Room | None]


class MovedSensors:
    """Some layouts (k,) of one study. A sensor that several of them share is moved once for all."""

    def __init__(self, study: Study, objective: Objective, layouts: Sequence[np.ndarray], progress: Progress) -> None:
        self._study, self._objective, self._layouts, self._progress = study, objective, layouts, progress
        self._all = np.unique(np.concatenate(layouts))
        self._displacer = Displacer(study, objective, self._all)
        kinds = study.candidates.kind[self._all]
        self._housed = np.array([study.brief.stock[kind].kind != "electrode" for kind in kinds])

    @property
    def any_housed(self) -> bool:
        """Whether any of the sensors can be tilted and lifted."""
        return bool(self._housed.any())

    def rooms(self) -> list[Rooms]:
        """How far each sensor of each layout may slide, tilt and be lifted, one sensor at a time."""
        n, angles = len(self._all), 2 * np.pi * np.arange(DIRECTIONS) / DIRECTIONS
        compass_points = np.stack([np.cos(angles), np.sin(angles)], axis=1)
        leaning = np.stack(
            [-np.sin(angles), np.cos(angles)], axis=1
        )  # about this the top leans along the compass point
        grids = [joined([_away(one, compass_points, SLIDES, "along") for one in range(n)])]
        housed = np.flatnonzero(self._housed)
        if len(housed):
            grids.append(joined([_away(one, leaning, TILTS, "tilt") for one in housed]))
            grids.append(joined([_lifted(one) for one in housed]))
        arcs = self._displacer.distances(grids[0]).reshape(n, DIRECTIONS, -1)
        edges = np.cumsum([len(grid) for grid in grids])[:-1]
        found = []
        for chosen, (whole, scores) in zip(self._layouts, self._scores(joined(grids)), strict=True):
            parts = np.split(drops(whole, scores), edges)
            slid = parts[0].reshape(n, DIRECTIONS, len(SLIDES))
            tilted = np.full((n, DIRECTIONS, len(TILTS)), np.nan)
            lifted = np.full((n, 1, len(LIFTS)), np.nan)
            if len(housed):
                tilted[housed] = parts[1].reshape(-1, DIRECTIONS, len(TILTS))
                lifted[housed] = parts[2].reshape(-1, 1, len(LIFTS))
            mine = np.searchsorted(self._all, chosen)
            found.append(
                Rooms(
                    [_room(arcs[one], slid[one]) for one in mine],
                    [_room(TILTS, tilted[one]) if self._housed[one] else None for one in mine],
                    [_room(LIFTS, lifted[one]) if self._housed[one] else None for one in mine],
                )
            )
        return found

    def _scores(self, moved: Displacements) -> list[tuple[float, np.ndarray]]:
        """Of each layout: its score as it is, and with each displaced sensor (n,) in its owner's place; nan where the
        owner is not in it.
        """
        n = len(self._all)
        places = [np.searchsorted(self._all, chosen) for chosen in self._layouts]
        whole = [0.0] * len(places)
        scores = [np.full(len(moved), np.nan) for _ in places]
        for first in range(0, len(moved), AT_ONCE):
            self._progress(f"lead fields of displaced sensors, {first} of {len(moved)}")
            some = slice(first, first + AT_ONCE)
            part = Displacements(moved.owner[some], moved.along[some], moved.tilt[some], moved.lift[some])
            goal = self._displacer.objective(joined([none(np.arange(n)), part])).shown
            for layout, mine in enumerate(places):
                state = goal.priced(mine)
                row = np.full(n, -1)
                row[mine] = np.arange(len(mine))
                held = np.flatnonzero(row[part.owner] >= 0)
                whole[layout] = state.value
                scores[layout][first + held] = state.swaps()[row[part.owner[held]], n + held]
        return list(zip(whole, scores, strict=True))

    def misplaced(
        self, layout: int, shift: float, tilt: float, draws: int, rng: np.random.Generator, part: str = "misplacement"
    ) -> ExpectedLoss:
        """The loss of the numbered layout's score with every sensor off at random by `shift` [m] and `tilt` [rad] rms
        along and about each tangent; part: what its progress is a part of.
        """
        chosen = self._layouts[layout]
        places, k = np.searchsorted(self._all, chosen), len(chosen)
        drawn = 0

        def scores(count: int) -> np.ndarray:
            nonlocal drawn
            self._progress(f"{part}: lead fields of layouts, {drawn} of {draws}")
            drawn += count
            owner = np.tile(places, count)
            along = shift * rng.normal(size=(len(owner), 2))
            turn = tilt * rng.normal(size=(len(owner), 2)) * self._housed[owner, None]
            goal = self._displacer.objective(Displacements(owner, along, turn, np.zeros(len(owner)))).shown
            return np.array([goal.score(np.arange(first, first + k)) for first in range(0, len(owner), k)])

        whole = self._objective.shown.score(chosen)
        return random_misplacement(scores, whole, draws, max(1, AT_ONCE // k))


def _away(owner: int, compass_points: np.ndarray, sizes: np.ndarray, field: str) -> Displacements:
    steps = (compass_points[:, None] * sizes[None, :, None]).reshape(-1, 2)
    return replace(none(np.full(len(steps), owner)), **{field: steps})


def _lifted(owner: int) -> Displacements:
    return replace(none(np.full(len(LIFTS), owner)), lift=LIFTS.copy())


def _room(distances: np.ndarray, drop: np.ndarray) -> Room:
    found = tolerance(distances, drop)
    toward = tuple("" if one < 0 else compass(one, len(drop)) for one in found.worst_direction)
    return Room(found.worst, found.mean, toward, float(np.broadcast_to(distances, drop.shape)[:, -1].min()))
