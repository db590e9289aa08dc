"""Likelihood of a few variances given a sample covariance, its maximum and profile intervals.

The covariance S of N independent Gaussian samples is Wishart: up to a constant, -2 log L = N [log det Σ + tr(Σ^-1 S)],
Σ = Σ_k exp(θ_k) V_k. Gradient and Fisher information of θ as in Anderson 1973, Ann Stat 1:135 (from memory; checked by
finite differences and simulation). Profile intervals: the values whose best -2 log L is within the 95 % quantile of
chi-square(1) of the least.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.linalg import LinAlgError, cho_factor, cho_solve
from scipy.optimize import brentq, minimize, nnls
from scipy.stats import chi2

WITHIN = float(chi2.ppf(0.95, 1))  # rise of -2 log L at the ends of a 95 % interval
LONGEST_STEP = 3.0  # of a log variance at once
FARTHEST = 100.0  # from the best log variance that the end of an interval is looked for
MOST_POLISHES, LARGEST_POLISH = 40, 0.01  # the latter of a log variance
SINGULAR = 1e-9  # of the largest information, below which a direction is left alone
FLOOR = 1e-6  # of the data's variance: where a search starts for a source that least squares finds gone


@dataclass(frozen=True)
class Likelihood:
    """-2 log L of variances by name. measured (n, n): S; samples: N; parts: name -> V (n, n)."""

    measured: np.ndarray
    samples: float
    parts: dict[str, np.ndarray]

    def model(self, variances: dict[str, float]) -> np.ndarray:
        """Σ (n, n); parts that are not named are gone."""
        return sum((size * self.parts[name] for name, size in variances.items()), np.zeros_like(self.measured))

    def value(self, variances: dict[str, float]) -> float:
        """-2 log L up to a constant, inf where the model is singular."""
        return self._solved(variances)[0]

    def derivatives(self, variances: dict[str, float], names: list[str]) -> tuple[float, np.ndarray, np.ndarray]:
        """-2 log L, its gradient (k,) by the named log variances, and twice their Fisher information (k, k)."""
        value, factor = self._solved(variances)
        if factor is None:
            return value, np.zeros(len(names)), np.eye(len(names))
        solved = [variances[name] * cho_solve(factor, self.parts[name]) for name in names]
        whitened = cho_solve(factor, self.measured)
        gradient = [np.trace(one) - np.sum(one * whitened.T) for one in solved]
        information = [[np.sum(one * other.T) for other in solved] for one in solved]
        return value, self.samples * np.array(gradient), self.samples * np.array(information)

    def spread(self, variances: dict[str, float], names: list[str], blocks: np.ndarray) -> np.ndarray:
        """Standard errors (k,) of the named log variances at their best, as stretches of the data tell them.

        blocks (n_blocks, n, n): covariances of equally long stretches. The "sandwich": inverse information on both
        sides of the summed squares of the blocks' scores (White 1982, Econometrica 50:1, from memory). So it holds for
        samples that depend on each other in ways that differ between sources, and does not use their number.
        """
        _, factor = self._solved(variances)
        solved = [variances[name] * cho_solve(factor, self.parts[name]) for name in names]
        weights = np.array([cho_solve(factor, one.T) for one in solved])  # of one sample's products in each score
        scores = (np.einsum("kij,bij->bk", weights, blocks) - [np.trace(one) for one in solved]) / 2
        scores -= scores.mean(axis=0)
        inverse = np.linalg.inv([[np.sum(one * other.T) for other in solved] for one in solved]) * 2
        n_blocks = len(blocks)
        return np.sqrt(np.diag(inverse @ (scores.T @ scores) @ inverse) / (n_blocks * (n_blocks - 1)))

    def _solved(self, variances: dict[str, float]) -> tuple[float, tuple | None]:
        try:
            factor = cho_factor(self.model(variances), lower=True)
        except LinAlgError:
            return np.inf, None
        logdet = 2 * np.log(np.diag(factor[0])).sum()
        return self.samples * (logdet + np.trace(cho_solve(factor, self.measured))), factor


def best(
    likelihood: Likelihood, free: list[str], fixed: dict[str, float], start: dict[str, float] | None = None
) -> tuple[dict[str, float], float]:
    """The variances of greatest likelihood, those of `fixed` held, and -2 log L there (inf: none is regular).

    start: variances to search from, for the sake of -2 log L alone; by default both the least squares fit of the
    covariance and equal shares, and all digits of the variances.
    """
    if not free:
        return dict(fixed), likelihood.value(fixed)
    if start:
        return _descend(likelihood, free, fixed, start, polish=False)
    starts = [_least_squares(likelihood, free, fixed), dict.fromkeys(free, 1.0 / len(free))]
    found = [_descend(likelihood, free, fixed, one, polish=True) for one in starts]
    return min(found, key=lambda one: one[1])


def _least_squares(likelihood: Likelihood, free: list[str], fixed: dict[str, float]) -> dict[str, float]:
    rest = likelihood.measured - likelihood.model(fixed)
    sizes = nnls(np.stack([likelihood.parts[name].ravel() for name in free], axis=1), rest.ravel())[0]
    return {name: max(size, FLOOR) for name, size in zip(free, sizes, strict=True)}


def _descend(
    likelihood: Likelihood, free: list[str], fixed: dict[str, float], start: dict[str, float], polish: bool
) -> tuple[dict[str, float], float]:
    def at(logs: np.ndarray) -> dict[str, float]:
        return fixed | dict(zip(free, np.exp(logs), strict=True))

    @lru_cache(maxsize=2)  # the search asks for value and curvature at the same point one after the other
    def derivatives(logs: tuple[float, ...]) -> tuple[float, np.ndarray, np.ndarray]:
        value, gradient, information = likelihood.derivatives(at(np.array(logs)), free)
        return value / likelihood.samples, gradient / likelihood.samples, information / likelihood.samples

    first = np.log([start[name] for name in free])
    if not np.isfinite(derivatives(tuple(first))[0]):
        return at(first), np.inf
    found = minimize(
        lambda logs: derivatives(tuple(logs))[:2],
        first,
        jac=True,
        hess=lambda logs: derivatives(tuple(logs))[2],
        method="trust-exact",
        options={"initial_trust_radius": 1.0, "max_trust_radius": LONGEST_STEP, "gtol": 1e-6, "maxiter": 200},
    )
    logs = _polished(found.x, lambda logs: derivatives(tuple(logs))) if polish else found.x
    return at(logs), float(derivatives(tuple(logs))[0] * likelihood.samples)


def _polished(logs: np.ndarray, derivatives: Callable) -> np.ndarray:
    """Scoring steps while they shrink: the value is too flat at its minimum to find that beyond half the digits."""
    last = np.inf
    for _ in range(MOST_POLISHES):
        _, gradient, information = derivatives(logs)
        step = np.linalg.lstsq(information, gradient, rcond=SINGULAR)[0]
        size = np.abs(step).max()
        if size > min(last / 2, LARGEST_POLISH):
            break
        logs, last = logs - step, size
    return logs


def interval(
    likelihood: Likelihood,
    name: str,
    free: list[str],
    fixed: dict[str, float],
    variances: dict[str, float],
    least: float,
    bounded_below: bool = True,
) -> tuple[float, float]:
    """Ends of the 95 % interval of a variance, the other free ones at their best; its low end is 0 unless bounded.

    variances, least: what `best` gave for these free and fixed ones.
    """
    others = [one for one in free if one != name]
    centre = np.log(variances[name])
    information = likelihood.derivatives(variances, free)[2] / 2
    spread = np.linalg.pinv(information)[free.index(name), free.index(name)]
    first_step = float(np.clip(np.sqrt(WITHIN * max(spread, 0.0)), 1e-3, 1.0))

    def end(direction: int) -> float:
        near = {one: variances[one] for one in others}

        def above(step: float) -> float:
            nonlocal near
            held = fixed | {name: float(np.exp(centre + direction * step))}
            found, value = best(likelihood, others, held, near or None)
            if np.isfinite(value):
                near = {one: found[one] for one in others}
            return min(value - least, 1e12) - WITHIN

        inside, outside = 0.0, first_step
        while above(outside) < 0:
            inside, outside = outside, 2 * outside
            if outside > FARTHEST:
                return direction * np.inf
        return direction * brentq(above, inside, outside, xtol=1e-11, rtol=1e-11)

    low = np.exp(centre + end(-1)) if bounded_below else 0.0
    return float(low), float(np.exp(centre + end(+1)))
