"""Strengths of a few noise sources, fitted to a measured covariance by maximum likelihood.

All of it is taken of contrasts that the common offsets of references do not reach, so whatever was the reference of the
recording changes nothing (restricted likelihood: Harville 1977, J Am Stat Assoc 72:320, from memory).

Goodness of fit is the likelihood ratio against any covariance at all, with Bartlett's factor for the test of a given
covariance of p channels, 1 - (2 p + 1 - 2/(p + 1)) / (6 N) (Anderson, Introduction to Multivariate Statistical
Analysis; from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.linalg import null_space
from scipy.stats import chi2, t

from layout.noise.variance_likelihood import WITHIN, Likelihood, best, interval

ABSENT = 1e-9  # share of a source's variance that the contrasts must see at least
SAMPLES_PER_CONTRAST = 2.0  # with fewer, the likelihood ratio is far from chi-square
SINGULAR = 1e-10  # smallest over largest eigenvalue of a covariance of fewer dimensions than contrasts

Status = Literal["fitted", "assumed", "limited", "absent"]


@dataclass(frozen=True)
class Strength:
    """Amplitude of a source as a multiple of that of the covariance given for it, and its 95 % interval.

    fitted: the data bound it on both sides. assumed: they do not, and it stays where it was. limited: it was assumed
    stronger than the data allow, and is taken at their upper limit. absent: the data do not see it at all, the
    interval is (0, inf). low and high of one that is not fitted are those found before it was fixed.
    """

    amplitude: float
    low: float
    high: float
    status: Status


@dataclass(frozen=True)
class StrengthFit:
    """Strengths by name, and how well the model fits.

    samples: the effective number; contrasts: how many the likelihood is of. deviance and freedom of the likelihood
    ratio against any covariance, deviance None where the covariance is singular or samples are too few; probability:
    of a deviance as large if the model is right. variance_residual: rms over channels of the relative difference of
    measured and fitted variance, both against the mean of their reference group.
    """

    strengths: dict[str, Strength]
    samples: float
    contrasts: int
    deviance: float | None
    freedom: int
    probability: float | None
    variance_residual: float


def fit_strengths(
    covariance: np.ndarray,
    samples: float,
    parts: dict[str, np.ndarray],
    offsets: np.ndarray,
    assumed: dict[str, float],
    blocks: np.ndarray | None = None,
) -> StrengthFit:
    """Fit the strengths of the parts to a covariance.

    covariance (n, n): measured, of `samples` independent samples. parts: name -> covariance (n, n) at amplitude 1.
    offsets (n, n_groups): 1 for the channels of each reference group, which share one unknown offset; no column for
    channels without one. assumed: name -> amplitude where the data do not tell. blocks (n_blocks, n, n): covariances of
    equally long stretches of the same data, for intervals that do not lean on the number of samples. Units may differ
    from channel to channel, but not within a group. Raises ValueError where no contrast has any variance.
    """
    basis = null_space(offsets.T) if offsets.shape[1] else np.eye(len(covariance))
    if basis.shape[1] == 0 or not (basis.T @ covariance @ basis).any():
        raise ValueError("no contrast between channels of one reference has any variance")
    scale = _scales(covariance, basis, offsets)
    to_contrasts = basis / scale[:, None]  # one scale for all of a group, so contrasts stay contrasts
    measured = to_contrasts.T @ covariance @ to_contrasts
    seen, size = {}, {}
    for name, part in parts.items():
        reduced = to_contrasts.T @ part @ to_contrasts
        if np.trace(reduced) > ABSENT * (np.diag(part) / scale**2).sum():
            size[name] = np.trace(measured) / np.trace(reduced)
            seen[name] = size[name] * reduced
    likelihood = Likelihood(measured, samples, seen)
    if blocks is not None:
        blocks = np.einsum("ic,bij,jd->bcd", to_contrasts, blocks, to_contrasts, optimize=True)
    variances, ends, status = _search(likelihood, {name: assumed[name] ** 2 / size[name] for name in seen})
    if blocks is not None:
        ends |= _ends_by_blocks(likelihood, variances, [name for name in seen if status[name] == "fitted"], blocks)
    strengths = {name: Strength(assumed[name], 0.0, np.inf, "absent") for name in parts}
    for name in seen:
        amplitudes = np.sqrt(np.array([variances[name], *ends[name]]) * size[name])
        strengths[name] = Strength(*(float(one) for one in amplitudes), status[name])
    model = likelihood.model(variances)
    n, fitted = len(measured), sum(one == "fitted" for one in status.values())
    freedom = n * (n + 1) // 2 - fitted
    deviance = _deviance(measured, model, samples) if freedom > 0 else None
    return StrengthFit(
        strengths,
        samples,
        n,
        deviance,
        freedom,
        None if deviance is None else float(chi2.sf(deviance, freedom)),
        _variance_residual(basis, measured, model),
    )


def _scales(covariance: np.ndarray, basis: np.ndarray, offsets: np.ndarray) -> np.ndarray:
    """Size of each channel (n,), the same in all of a reference group."""
    against_mean = basis @ basis.T
    variance = np.diag(against_mean @ covariance @ against_mean).copy()
    variance[~(variance > 0)] = 0.0
    for group in offsets.T:
        variance[group != 0] = variance[group != 0].mean()
    return np.sqrt(np.where(variance > 0, variance, 1.0))


def _search(
    likelihood: Likelihood, assumed: dict[str, float]
) -> tuple[dict[str, float], dict[str, tuple[float, float]], dict[str, Status]]:
    """Variances, the ends of their intervals, and what became of each.

    Of the sources that may as well be gone, the one missed least is fixed first and the others are fitted anew:
    of two that the data confuse, fixing one makes the other known.
    """
    free, fixed, ends, status = list(assumed), {}, {}, {}
    while True:
        variances, least = best(likelihood, free, fixed)
        missed = {name: best(likelihood, [one for one in free if one != name], fixed)[1] - least for name in free}
        weakest = min(missed, key=missed.get, default=None)
        if weakest is None or missed[weakest] > WITHIN:
            break
        ends[weakest] = interval(likelihood, weakest, free, fixed, variances, least, bounded_below=False)
        upper = ends[weakest][1]
        status[weakest] = "assumed" if assumed[weakest] <= upper else "limited"
        fixed[weakest] = min(assumed[weakest], upper)
        free.remove(weakest)
    for name in free:
        ends[name] = interval(likelihood, name, free, fixed, variances, least)
        status[name] = "fitted"
    return variances, ends, status


def _ends_by_blocks(
    likelihood: Likelihood, variances: dict[str, float], names: list[str], blocks: np.ndarray
) -> dict[str, tuple[float, float]]:
    """Ends of 95 % intervals of variances from how they differ between stretches of the data."""
    if not names:
        return {}
    reach = t.ppf(0.975, len(blocks) - 1) * likelihood.spread(variances, names, blocks)
    return {
        name: (variances[name] * np.exp(-one), variances[name] * np.exp(one))
        for name, one in zip(names, reach, strict=True)
    }


def _deviance(measured: np.ndarray, model: np.ndarray, samples: float) -> float | None:
    """Likelihood ratio against any covariance at all, None where it cannot be judged."""
    n = len(measured)
    own = np.linalg.eigvalsh(measured)
    if samples < SAMPLES_PER_CONTRAST * n or own[0] < SINGULAR * own[-1]:
        return None
    ratio = np.linalg.slogdet(model)[1] - np.log(own).sum() + np.trace(np.linalg.solve(model, measured)) - n
    return max(0.0, float(samples * ratio * (1.0 - (2 * n + 1 - 2 / (n + 1)) / (6 * samples))))


def _variance_residual(basis: np.ndarray, measured: np.ndarray, model: np.ndarray) -> float:
    seen, fitted = (np.einsum("ic,cd,id->i", basis, one, basis, optimize=True) for one in (measured, model))
    told = (basis**2).sum(axis=1) > ABSENT  # not so the only channel of a reference
    return float(np.sqrt(np.mean((seen[told] / fitted[told] - 1.0) ** 2)))
