"""The sensors of a layout at places and in poses near their own, each with lead fields of its own."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.spatial.transform import Rotation

from layout.anatomy.scalp_points import normals_at, project
from layout.brief.objects_stock import HOUSED
from layout.design.objective import Objective, build_objective
from layout.design.problem import Problem, build_problem
from layout.design.scenarios import Scenario, scenarios
from layout.design.study import Study
from layout.engine.model import LinearModel
from layout.errors import BriefError
from layout.noise.recording import as_recorded
from layout.noise.sensor import sensor_noise
from layout.physics.channels import Channels
from layout.sensing.selection import channel_rows


@dataclass(frozen=True)
class Displacements:
    """n displaced sensors. owner (n,): place in the layout of the sensor that each is a copy of; along (n, 2) [m]: on
    the tangents of the scalp at its site, carried onto the scalp from there; tilt (n, 2) [rad]: rotation about the same
    tangents where the sensor meets the scalp; lift (n,) [m]: off the scalp.
    """

    owner: np.ndarray
    along: np.ndarray
    tilt: np.ndarray
    lift: np.ndarray

    def __len__(self) -> int:
        return len(self.owner)


def none(owner: np.ndarray) -> Displacements:
    """Copies that stay where they are."""
    return Displacements(owner, np.zeros((len(owner), 2)), np.zeros((len(owner), 2)), np.zeros(len(owner)))


def joined(parts: list[Displacements]) -> Displacements:
    """All of them, one after the other."""
    fields = ("owner", "along", "tilt", "lift")
    return Displacements(*(np.concatenate([getattr(part, field) for part in parts]) for field in fields))


class Displacer:
    """Objectives whose candidates are displaced copies of a layout's sensors.

    A displaced sensor keeps its standoff from the scalp, its turn against the scalp's normal and its own noise. Raises
    BriefError where the lead field is given by a file: it holds at one place only.
    """

    def __init__(self, study: Study, objective: Objective, chosen: np.ndarray) -> None:
        if study.brief.head.lead_field_file is not None:
            raise BriefError(
                "head.lead_field_file: must be left out where sensors are moved, since its gain holds at one place "
                f"only, but {study.brief.head.lead_field_file.name!r} was given"
            )
        self._study, self._chosen = study, np.asarray(chosen, dtype=int)
        self._scenarios = scenarios(study)
        self._calibration = objective.problems[0].calibration
        self._factors = [_noise_factors(study, problem) for problem in objective.problems]
        plain = tuple(replace(entry, gain_error=0.0, crosstalk=0.0) for entry in study.brief.stock)
        self._plain = replace(study.brief, stock=plain)

    def objective(self, moved: Displacements) -> Objective:
        """The brief's goal over the displaced sensors, numbered in their order."""
        owner = self._study.candidates.candidate_of_channel
        numbers = self._chosen[moved.owner]
        starts = np.searchsorted(owner, np.arange(len(self._study.candidates) + 1))
        widths = starts[numbers + 1] - starts[numbers]
        copy = np.repeat(np.arange(len(moved)), widths)
        rows = starts[numbers][copy] + np.arange(len(copy)) - np.repeat(np.cumsum(widths) - widths, widths)
        beside, problems = self._beside(self._study, numbers, rows, copy), []
        for scenario, factors in zip(self._scenarios, self._factors, strict=True):
            channels = self._channels(scenario, moved, rows, copy)
            there = replace(scenario, study=self._beside(scenario.study, numbers, rows, copy), channels=channels)
            problem = build_problem(beside, scenario=there, calibration=self._calibration)
            problems.append(_scaled(problem, factors[rows]))
        return build_objective(beside, tuple(problems))

    def _beside(self, study: Study, numbers: np.ndarray, rows: np.ndarray, copy: np.ndarray) -> Study:
        """The study with copies of candidates `numbers` (n,), whose channels are `rows`, each of the copy `copy`."""
        candidates = study.candidates
        copies = replace(
            candidates,
            kind=candidates.kind[numbers],
            site=candidates.site[numbers],
            axis_name=tuple(candidates.axis_name[one] for one in numbers),
            names=tuple(f"{candidates.names[one]} copy {place}" for place, one in enumerate(numbers)),
            candidate_of_channel=copy,
            housing_pose=candidates.housing_pose[numbers],
            cliques=(),
            clique_names=(),
            free_axes=None,
            tilt_limit=None,
            **channel_rows(candidates, rows),
        )
        return replace(study, brief=self._plain, candidates=copies)

    def distances(self, moved: Displacements) -> np.ndarray:
        """How far each is from its site along the scalp (n,) [m]: the arc that chord and turn of the normal span."""
        sites, at = self._study.candidates.sites, self._study.candidates.site[self._chosen[moved.owner]]
        positions, normals = self._on_scalp(self._study, moved)
        chord = np.linalg.norm(positions - sites.positions[at], axis=1)
        half = np.arcsin(np.clip(np.linalg.norm(normals - sites.normals[at], axis=1) / 2, 0.0, 1.0))
        return chord / np.sinc(half / np.pi)

    def _on_scalp(self, study: Study, moved: Displacements) -> tuple[np.ndarray, np.ndarray]:
        """Points of the scalp (n, 3) [m] under the displaced sensors, and its normals there."""
        sites, at = study.candidates.sites, study.candidates.site[self._chosen[moved.owner]]
        away = np.einsum("nk,nkd->nd", moved.along, sites.tangents[at])
        positions, normals = sites.positions[at].copy(), sites.normals[at].copy()
        goes = moved.along.any(axis=1)
        if goes.any():
            where = project(study.head.scalp, (positions + away)[goes])
            positions[goes], normals[goes] = where.positions, normals_at(study.head.scalp, where)
        return positions, normals

    def _channels(self, scenario: Scenario, moved: Displacements, rows: np.ndarray, copy: np.ndarray) -> Channels:
        base, study, scalp = scenario.channels, scenario.study, scenario.study.head.scalp
        own = replace(
            study.candidates,
            positions=base.positions,
            axes=base.axes,
            is_electrode=base.is_electrode,
            pickup=base.pickup,
            baselines=None,
        )
        taken = channel_rows(own, rows)
        taken.pop("baselines")
        channels = Channels(**taken, normals=base.normals[rows])
        sites, at = study.candidates.sites, study.candidates.site[self._chosen[moved.owner]]
        points, normals = self._on_scalp(study, moved)
        slide = _turn_between(sites.normals[at], normals)
        tangents = np.stack([slide.apply(sites.tangents[at][:, one]) for one in range(2)], axis=1)
        turn = Rotation.from_rotvec(np.einsum("nk,nkd->nd", moved.tilt, tangents)) * slide
        positions = points[copy] + turn[copy].apply(channels.positions - sites.positions[at][copy])
        positions += moved.lift[copy, None] * normals[copy]
        up = slide[copy].apply(channels.normals)
        on_scalp = np.flatnonzero(channels.is_electrode & (moved.along.any(axis=1) | moved.tilt.any(axis=1))[copy])
        if len(on_scalp):
            where = project(scalp, positions[on_scalp])
            positions[on_scalp], up[on_scalp] = where.positions, normals_at(scalp, where)
        return channels.moved(positions, turn[copy].as_rotvec(), up)


def _turn_between(first: np.ndarray, second: np.ndarray) -> Rotation:
    """The smallest rotations that carry unit vectors (n, 3) into others that are not opposite."""
    axis = np.cross(first, second)
    sine, cosine = np.linalg.norm(axis, axis=1), np.einsum("nd,nd->n", first, second)
    angle = np.arctan2(sine, cosine)
    return Rotation.from_rotvec(axis * (angle / np.where(sine > 0, sine, 1.0))[:, None])


def _noise_factors(study: Study, problem: Problem) -> np.ndarray:
    """How much larger each channel's own noise is (n_channels,) than what its sensor alone brings: gain and crosstalk.

    Kept when a sensor moves a little. Where axes were turned, a sensor's components share one noise.
    """
    entries = [study.brief.stock[kind] for kind in study.candidates.kind[study.candidates.candidate_of_channel]]
    affected = np.array([entry.gain_error > 0 or entry.crosstalk > 0 for entry in entries])
    if not affected.any():
        return np.ones(len(entries))
    brief = as_recorded(study.brief, problem.calibration)
    plain = sensor_noise(study.head, brief, study.candidates, study.standard)
    scenario = problem.scenario
    plain *= scenario.noise_factor * scenario.sensor_factor / np.sqrt(study.brief.noise.averages)
    housed = [entry for entry in study.brief.stock if entry.kind in HOUSED]
    if any(entry.free_axes and (entry.gain_error > 0 or entry.crosstalk > 0) for entry in housed):
        raise BriefError(
            'stock.gain_error and stock.crosstalk: must be left out where stock.axes is "free" or "free_two" and '
            "placement is asked for, but one was given"
        )
    return np.where(affected, problem.sensor_sd / plain, 1.0)


def _scaled(problem: Problem, factors: np.ndarray) -> Problem:
    """The problem with each channel's own noise so many times as large."""
    if (factors == 1.0).all():
        return problem
    model, errors = problem.model, problem.localisation
    down = 1.0 / factors[:, None]
    rows = {"nuisance": model.nuisance * down, "offset": model.offset / factors}
    if errors is not None:
        errors = replace(errors, derivatives=errors.derivatives * down[:, :, None], **rows)
    return replace(
        problem,
        model=LinearModel(model.target * down, rows["nuisance"], rows["offset"], model.candidate_of_channel),
        localisation=errors,
        sensor_sd=problem.sensor_sd * factors,
    )
