"""Maximum-likelihood fits of one dipole to many measurements at once: a scan over a grid, then local refinement.

Measurements and lead fields are whitened: d = G(r) q + e, e ~ N(0, f² I), f known, the unknown reference projected out.
For a place r the best moment is linear least squares, so the fit minimises |d - G(r) q(r)|² over r alone (variable
projection: Golub & Pereyra 1973, SIAM J Numer Anal 10:413; Kaufman 1975, BIT 15:49; from memory). What is known
beforehand may enter as measurements of place and moment with errors of their own: the fit's linearised covariance is
then the inverse of the Fisher information plus that of the priors.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import chi2

from layout.evidence.dipole_steps import CONVERGED, held_steps
from layout.units import MM

SILENT = 1e-10  # squared singular values below this share of the largest: moments that no channel sees (radial, MEG)
SOURCES_AT_ONCE = 1024
NEGLIGIBLE = 1e-4  # of misfit, whose noise has unit variance: steps that gain less are under 0.01 standard errors
ROUNDS = 20
LEAST_DAMPING = 1e-8  # with fewer rows than unknowns some step is undetermined
UNUSUAL = 0.05  # chance of a misfit so large at the deepest minimum
MORE_STARTS = 3
APART = 15 * MM  # between starts
STUCK = 1e6  # damping at which no step helps any more


@dataclass(frozen=True)
class Forward:
    """The whitened lead field at any place. gain: positions (k, 3) [m] -> (n_rows, k, 3) [1/(A·m)]; slopes:
    positions, moments (k, 3) [A·m], the gain there -> d(G q)/dr (n_rows, k, 3) [1/m], good enough to descend by; hold:
    positions -> the same, those outside the brain moved into it.
    """

    gain: Callable[[np.ndarray], np.ndarray]
    slopes: Callable[[np.ndarray, np.ndarray, np.ndarray], np.ndarray]
    hold: Callable[[np.ndarray], np.ndarray]


@dataclass(frozen=True)
class Priors:
    """What is known of each fit's dipole beforehand, as measurements of it: places (n, 3) [m], each with an error of
    place_sd [m] per axis, moments (n, 3) [A·m] with moment_sd [A·m] per component.
    """

    places: np.ndarray
    place_sd: float
    moments: np.ndarray
    moment_sd: float

    def some(self, rows: np.ndarray) -> Priors:
        """Those of some fits."""
        return Priors(self.places[rows], self.place_sd, self.moments[rows], self.moment_sd)


@dataclass(frozen=True)
class DipoleFits:
    """n fits: places (n, 3) [m], moments (n, 3) [A·m], misfit (n,): |d - G q|² with the priors' terms, unitless; grid
    (n,): where on the grid the scan found the best; rounds: of the refinement.
    """

    places: np.ndarray
    moments: np.ndarray
    misfit: np.ndarray
    grid: np.ndarray
    rounds: int


def fit_dipoles(
    forward: Forward,
    grid: np.ndarray,
    grid_gain: np.ndarray,
    data: np.ndarray,
    noise: float = 1.0,
    priors: Priors | None = None,
) -> DipoleFits:
    """Fit each column of the whitened data (n_rows, n). grid (m, 3) [m] and its whitened gain (n_rows, m, 3).

    noise: rms of what is left in each whitened row, which weighs the data against the priors.
    """
    grid_gain, data = grid_gain / noise, data / noise
    best = scan(grid, grid_gain, data, priors)
    scaled = Forward(
        lambda places: forward.gain(places) / noise,
        lambda places, moments, gain: forward.slopes(places, moments, gain * noise) / noise,
        forward.hold,
    )
    places, moments, misfit, rounds = refine(scaled, grid[best], data, priors, grid_gain[:, best])
    usual = chi2.isf(UNUSUAL, max(1, len(data) - (0 if priors else 6)))
    starts = [grid[best]]
    for _ in range(MORE_STARTS):  # from elsewhere where the misfit says that this is a minimum beside the deepest
        again = np.flatnonzero(misfit > usual)
        if not len(again):
            break
        known = None if priors is None else priors.some(again)
        taken = [places[again], *(one[again] for one in starts)]
        first = scan(grid, grid_gain, data[:, again], known, taken)
        start = grid[first]
        other = refine(scaled, start, data[:, again], known, grid_gain[:, first])
        starts.append(np.full_like(places, np.inf))
        starts[-1][again] = start
        lower = other[2] < misfit[again]
        won = again[lower]
        places[won], moments[won], misfit[won] = other[0][lower], other[1][lower], other[2][lower]
        rounds = max(rounds, other[3])
    return DipoleFits(places, moments, misfit, best, rounds)


def scan(
    grid: np.ndarray,
    gain: np.ndarray,
    data: np.ndarray,
    priors: Priors | None = None,
    taken: Sequence[np.ndarray] = (),
) -> np.ndarray:
    """The grid point (n,) with the least misfit for each column of the whitened data (n_rows, n), the points near to
    those of the places `taken` (each (n, 3) [m]) left out.

    grid (m, 3) [m], gain (n_rows, m, 3) [1/(A·m)]. An orthonormal basis of what each point can explain turns all fits
    into one matrix product.
    """
    rows = _with_moment_rows(np.moveaxis(gain, 1, 0), priors)
    seen = np.vstack([data, *([] if priors is None else [priors.moments.T / priors.moment_sd])])
    least, best = np.full(seen.shape[1], np.inf), np.zeros(seen.shape[1], dtype=int)
    for first in range(0, len(rows), SOURCES_AT_ONCE):
        basis, _ = explained(rows[first : first + SOURCES_AT_ONCE])
        m, n_rows, _ = basis.shape
        heights = (np.swapaxes(basis, 1, 2).reshape(-1, n_rows) @ seen).reshape(m, 3, -1)
        misfit = -np.einsum("mkn,mkn->mn", heights, heights)
        if priors is not None:
            misfit += _squared_distances(grid[first : first + m], priors.places) / priors.place_sd**2
        for places in taken:
            misfit[_squared_distances(grid[first : first + m], places) < APART**2] = np.inf
        here = misfit.argmin(axis=0)
        lowest = misfit[here, np.arange(len(here))]
        better = lowest < least
        least[better], best[better] = lowest[better], first + here[better]
    return best


def refine(
    forward: Forward,
    places: np.ndarray,
    data: np.ndarray,
    priors: Priors | None = None,
    gain: np.ndarray | None = None,
) -> tuple[np.ndarray, np.ndarray, np.ndarray, int]:
    """(places, moments, misfit, rounds) from the given places (n, 3) [m] downhill, all fits side by side.

    Gauss-Newton with Levenberg's and Marquardt's damping for each fit, on the place alone: the moment follows. gain
    (n_rows, n, 3): at the given places, where it is known.
    """
    start, places = places, forward.hold(places)
    gain = forward.gain(places) if gain is None else _gain_where_moved(forward, start, places, gain)
    moments, misfit, left = _solved(gain, places, data, priors)
    damping, active, rounds = np.full(len(places), 1e-3), np.arange(len(places)), 0
    while len(active) and rounds < ROUNDS:
        rounds += 1
        known = None if priors is None else priors.some(active)
        here, at = gain[:, active], places[active]
        slopes = forward.slopes(at, moments[active], here)
        tried, gained = held_steps(
            forward.hold, at, *_normal_equations(here, slopes, left[:, active], at, known), damping[active]
        )
        there = forward.gain(tried)
        now = _solved(there, tried, data[:, active], known)
        better = now[1] < misfit[active]
        moved = np.linalg.norm(tried - at, axis=1)
        won = active[better]
        places[won], moments[won], misfit[won] = tried[better], now[0][better], now[1][better]
        left[:, won], gain[:, won] = now[2][:, better], there[:, better]
        damping[active] = np.maximum(damping[active] * np.where(better, 0.1, 10.0), LEAST_DAMPING)
        active = active[(moved > CONVERGED) & (np.abs(gained) > NEGLIGIBLE) & (damping[active] < STUCK)]
    return places, moments, misfit, rounds


def cramer_rao_errors(gain: np.ndarray, slopes: np.ndarray) -> np.ndarray:
    """Cramér-Rao bound (n,) [m] of the place error, root of the trace, moment unknown, nothing known before.

    gain (n_rows, n, 3), slopes d(G q)/dr (n_rows, n, 3), whitened with unit noise; inf where the place cannot be told
    (Mosher, Spencer, Leahy & Lewis 1993, Electroencephalogr Clin Neurophysiol 86:303, from memory).
    """
    _, matrix = _projected(np.moveaxis(gain, 1, 0), np.moveaxis(slopes, 1, 0))
    values = np.linalg.eigvalsh(matrix)
    told = values[:, 0] > SILENT * (slopes**2).sum(axis=(0, 2))
    inverse = np.divide(1.0, values, out=np.full_like(values, np.inf), where=told[:, None])
    return np.sqrt(inverse.sum(axis=1))


def explained(gain: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """(basis (n, n_rows, 3), inverse (n, 3, 3)) of gains (n, n_rows, 3): orthonormal columns, zeros for silent moments;
    inverse @ basisᵀ d is the least-squares moment, of least length where some are silent.
    """
    values, vectors = np.linalg.eigh(np.swapaxes(gain, 1, 2) @ gain)
    heard = values > SILENT * values[:, -1:]
    root = np.divide(1.0, np.sqrt(np.where(heard, values, 1.0)), out=np.zeros_like(values), where=heard)
    inverse = vectors * root[:, None, :]
    return gain @ inverse, inverse


def _solved(
    gain: np.ndarray, places: np.ndarray, data: np.ndarray, priors: Priors | None
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Best moments (n, 3), misfit (n,) and residuals, those of the moments' priors below (n_rows [+ 3], n)."""
    rows = _with_moment_rows(np.moveaxis(gain, 1, 0), priors)
    seen = np.vstack([data, *([] if priors is None else [priors.moments.T / priors.moment_sd])])
    basis, inverse = explained(rows)
    heights = np.einsum("nik,in->nk", basis, seen)
    left = seen - np.einsum("nik,nk->in", basis, heights)
    misfit = (left**2).sum(axis=0)
    if priors is not None:
        misfit += ((places - priors.places) ** 2).sum(axis=1) / priors.place_sd**2
    return np.einsum("nij,nj->ni", inverse, heights), misfit, left


def _gain_where_moved(forward: Forward, start: np.ndarray, places: np.ndarray, gain: np.ndarray) -> np.ndarray:
    """The gain at the places from that at the start, computed anew only where they are apart."""
    gain, moved = gain.copy(), np.flatnonzero((places != start).any(axis=1))
    if len(moved):
        gain[:, moved] = forward.gain(places[moved])
    return gain


def _normal_equations(
    gain: np.ndarray, slopes: np.ndarray, left: np.ndarray, places: np.ndarray, priors: Priors | None
) -> tuple[np.ndarray, np.ndarray]:
    """Products (n, 3, 3) of what the slopes do to the residuals, and the way downhill (n, 3): Gauss and Newton's."""
    rows = _with_moment_rows(np.moveaxis(gain, 1, 0), priors)
    slopes = np.moveaxis(slopes, 1, 0)
    if priors is not None:
        slopes = np.concatenate([slopes, np.zeros((len(slopes), 3, 3))], axis=1)
    across, matrix = _projected(rows, slopes)
    downhill = np.einsum("nik,in->nk", across, left)
    if priors is not None:
        matrix = matrix + np.eye(3) / priors.place_sd**2
        downhill = downhill - (places - priors.places) / priors.place_sd**2
    return matrix, downhill


def _projected(gain: np.ndarray, slopes: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Slopes (n, n_rows, 3) without what a change of moment could do as well, and their products (n, 3, 3)."""
    basis, _ = explained(gain)
    across = slopes - basis @ (np.swapaxes(basis, 1, 2) @ slopes)
    return across, np.swapaxes(across, 1, 2) @ across


def _with_moment_rows(gain: np.ndarray, priors: Priors | None) -> np.ndarray:
    """Gains (n, n_rows, 3) with three more rows that measure the moment itself where something is known of it."""
    if priors is None:
        return gain
    known = np.broadcast_to(np.eye(3) / priors.moment_sd, (len(gain), 3, 3))
    return np.concatenate([gain, known], axis=1)


def _squared_distances(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    second = np.where(np.isfinite(second), second, 1e3)  # nowhere: farther than anything
    squares = (first**2).sum(axis=1)[:, None] + (second**2).sum(axis=1) - 2 * first @ second.T
    return np.maximum(squares, 0.0)
