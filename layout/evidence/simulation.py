"""Dipoles planted in the regions, their noisy readings, and the errors with which fits find them again."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Literal

import numpy as np

from layout.anatomy.head import Head, Region
from layout.evidence.dipole_fit import DipoleFits, Forward, Priors, fit_dipoles
from layout.units import MM

WITHIN = 0.1  # of the bound: an error nearer than this follows it
SURE = 1.96  # standard errors on either side: 95 %
FAR = 3.0  # bounds: normal errors along one direction pass it in 0.27 % of the fits, along several more seldom
FEW_FAR = 0.005  # a surely larger share than this beyond FAR: fits that ended somewhere else
BANDS = (20 * MM, 30 * MM, 40 * MM, 50 * MM)  # edges of the bands of depth under the scalp
REFERENCE = 10.0  # rms of the unknown reference potential, in units of the electrodes' own noise: it cancels


Standing = Literal["follows", "above", "below", "crosses", "no bound"]


@dataclass(frozen=True)
class Plants:
    """n planted dipoles: places (n, 3) [m], moments (n, 3) [A·m], region (n,) number of its region."""

    places: np.ndarray
    moments: np.ndarray
    region: np.ndarray

    def __len__(self) -> int:
        return len(self.region)


def plant(head: Head, regions: Sequence[Region], count: int, shift: float, rng: np.random.Generator) -> Plants:
    """`count` dipoles, the regions taking turns, at sources drawn by area, moved off them by at most `shift` [m] in any
    direction. The moment is the region's, either way along the source's normal, or along one of the head's three axes
    where it is free: the hypotheses of the localisation goal.
    """
    places, moments = np.empty((count, 3)), np.empty((count, 3))
    turn = np.arange(count) % len(regions)
    away = shift * np.cbrt(rng.random((count, 1))) * _directions(rng, count)
    axis, sign = np.eye(3)[rng.integers(3, size=count)], rng.choice([-1.0, 1.0], size=(count, 1))
    for number, region in enumerate(regions):
        mine = turn == number
        sources = rng.choice(region.members, size=np.count_nonzero(mine), p=region.areas / region.areas.sum())
        places[mine] = head.cortex.positions[sources]
        along = axis[mine] if region.free_orientation else head.cortex.normals[sources]
        moments[mine] = region.moment * sign[mine] * along
    return Plants(places + away, moments, turn)


@dataclass(frozen=True)
class ChannelNoise:
    """Noise of the n channels of a layout: sensor_sd (n,) [V or T]; nuisance (n, n_nuisance) and offset (n,), in units
    of sensor_sd, as the engine has them.
    """

    sensor_sd: np.ndarray
    nuisance: np.ndarray
    offset: np.ndarray

    def whitener(self) -> np.ndarray:
        """W (n or n - 1, n) [1/V or 1/T]: W @ readings has unit noise, and nothing left of the unknown reference."""
        covariance = np.eye(len(self.offset)) + self.nuisance @ self.nuisance.T
        basis = np.eye(len(self.offset))
        if (self.offset != 0).any():
            basis = np.linalg.qr(self.offset[:, None], mode="complete")[0][:, 1:]
        lower = np.linalg.cholesky(basis.T @ covariance @ basis)
        return np.linalg.solve(lower, basis.T) / self.sensor_sd

    def draw(self, count: int, rng: np.random.Generator) -> np.ndarray:
        """Readings (n, count) [V or T] of all noise: the sensors' own, every nuisance source, and the reference."""
        n, wide = self.nuisance.shape
        own, unwanted, common = rng.normal(size=(n, count)), rng.normal(size=(wide, count)), rng.normal(size=count)
        return self.sensor_sd[:, None] * (own + self.nuisance @ unwanted + REFERENCE * np.outer(self.offset, common))


def fits_of_plants(
    forward: Forward,
    grid: np.ndarray,
    grid_gain: np.ndarray,
    data: np.ndarray,
    plants: Plants,
    noise: float,
    priors: Sequence[Priors] | None = None,
) -> DipoleFits:
    """Fits of the whitened data (n_rows, n) of the plants, region by region where priors (one each) are given."""
    if priors is None:
        return fit_dipoles(forward, grid, grid_gain, data, noise)
    parts, order = [], []
    for number, prior in enumerate(priors):
        mine = np.flatnonzero(plants.region == number)
        if len(mine):
            parts.append(fit_dipoles(forward, grid, grid_gain, data[:, mine], noise, prior))
            order.append(mine)
    back = np.argsort(np.concatenate(order))
    joined = (np.concatenate([getattr(one, name) for one in parts])[back] for name in ("places", "moments", "misfit"))
    grid_points = np.concatenate([one.grid for one in parts])[back]
    return DipoleFits(*joined, grid_points, max(one.rounds for one in parts))


def drawn_priors(
    plants: Plants, regions: Sequence[Region], place_sd: float, moment_spread: float, rng: np.random.Generator
) -> tuple[Priors, ...]:
    """What is known beforehand of each region's plants: their places and moments, measured with the priors' errors."""
    place_errors, moment_errors = rng.normal(size=(2, len(plants), 3))
    found = []
    for number, region in enumerate(regions):
        mine = plants.region == number
        moment_sd = moment_spread * region.moment
        found.append(
            Priors(
                plants.places[mine] + place_sd * place_errors[mine],
                place_sd,
                plants.moments[mine] + moment_sd * moment_errors[mine],
                moment_sd,
            )
        )
    return tuple(found)


@dataclass(frozen=True)
class Comparison:
    """Errors of some fits beside what they should be [m].

    rms, median, largest (95 % are smaller): of the fits; grid_rms: of the scan alone; bound_rms: of the bounds, inf
    where one does not exist; linearised_rms: of the linearised errors. ratio: rms of each error over its own bound
    (1 where errors follow it; few plants with large bounds do not rule it), low and high the ends of its 95 % interval,
    nan without bounds; far: share of fits more than three bounds off. standing: "follows" the bound within 10 % as far
    as so many fits can tell, "above" it (by the ratio or by fits far off), "below" it, "no bound"; "crosses":
    seems to follow it, but fits at less noise do not (see `marked_crossings`).
    """

    fits: int
    rms: float
    median: float
    largest: float
    grid_rms: float
    bound_rms: float
    linearised_rms: float
    ratio: float
    low: float
    high: float
    far: float
    standing: Standing


def compare(errors: np.ndarray, grid_errors: np.ndarray, bounds: np.ndarray, linearised: np.ndarray) -> Comparison:
    """Compare the errors (n,) [m] of fits, n >= 1, with their bounds (n,) and linearised errors (n,) [m]."""
    n = len(errors)
    ratio = low = high = far = float("nan")
    standing: Standing = "no bound"
    if np.isfinite(bounds).all():
        squares = (errors / bounds) ** 2
        ratio, far = float(np.sqrt(squares.mean())), float((squares > FAR**2).mean())
        half = SURE * float(squares.std()) / np.sqrt(n) / (2 * ratio) if ratio > 0 else 0.0
        low, high = max(ratio - half, 0.0), ratio + half
        if low > 1 + WITHIN or _least_share(far, n) > FEW_FAR:
            standing = "above"
        else:
            standing = "below" if high < 1 - WITHIN else "follows"
    return Comparison(
        n,
        root_mean_square(errors),
        float(np.median(errors)),
        float(np.quantile(errors, 0.95)),
        root_mean_square(grid_errors),
        root_mean_square(bounds),
        root_mean_square(linearised),
        ratio,
        low,
        high,
        far,
        standing,
    )


def marked_crossings(rising: Sequence[Comparison]) -> list[Comparison]:
    """Comparisons of one group in the order of rising noise, marked where errors only pass by their bound: above a
    threshold errors are first larger than the bound, then, held by the head, smaller.
    """
    found, left = [], False
    for one in rising:
        found.append(replace(one, standing="crosses") if left and one.standing == "follows" else one)
        left = left or one.standing != "follows"
    return found


def _least_share(share: float, n: int) -> float:
    """Lower end of the 95 % interval of a share seen in n draws (Wilson 1927, J Am Stat Assoc 22:209, from memory)."""
    square = SURE**2 / n
    return (share + square / 2 - np.sqrt(square * share * (1 - share) + square**2 / 4)) / (1 + square)


def depth_bands(depth: np.ndarray) -> dict[str, np.ndarray]:
    """Label -> which of the depths (n,) [m] lie in that band, empty bands left out."""
    band = np.searchsorted(BANDS, depth, side="right")
    edges = [f"{edge / MM:g}" for edge in BANDS]
    labels = [f"under {edges[0]} mm", *(f"{a}-{b} mm" for a, b in pairwise(edges))]
    labels.append(f"over {edges[-1]} mm")
    return {label: band == number for number, label in enumerate(labels) if (band == number).any()}


def root_mean_square(values: np.ndarray) -> float:
    """Root of the mean square."""
    return float(np.sqrt(np.mean(np.square(values))))


def _directions(rng: np.random.Generator, count: int) -> np.ndarray:
    vectors = rng.normal(size=(count, 3))
    return vectors / np.linalg.norm(vectors, axis=1, keepdims=True)
