"""A minimum-norm map of the cortex, noise-normalised, and how far it spreads a point.

With whitened readings d = G s + e, e ~ N(0, I) and sources of variance R, the estimate is K d with
K = R Gᵀ (G R Gᵀ + I)⁻¹ (Hämäläinen & Ilmoniemi 1994, Med Biol Eng Comput 32:35); each source's rows are divided by the
rms that noise alone gives them (Dale et al. 2000, Neuron 26:55). Its resolution matrix is K G: column j is the map of
a single source at j, its point spread. Peak displacement and spatial dispersion as in Molins, Stufflebeam, Brown &
Hämäläinen 2008, NeuroImage 42:1069. All from memory.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np


class PointSpread(NamedTuple):
    """Per source asked for: displacement (n,) [m] of the map's peak from the source; dispersion (n,) [m]: rms distance
    of the map from the source, weighed by its squared amplitude per area.
    """

    displacement: np.ndarray
    dispersion: np.ndarray


def minimum_norm_kernel(gain: np.ndarray, variance: np.ndarray, snr: float) -> np.ndarray:
    """K (n_sources * c, n_rows) for gains (n_rows, n_sources, c), c = 1 along normals or 3 free.

    variance (n_sources,): of each source's components up to a common factor, which is set so that the signal's mean
    power per whitened row is snr².
    """
    n_rows, _, parts = gain.shape
    flat = gain.reshape(n_rows, -1)
    weighted = flat * np.repeat(variance, parts)
    covariance = weighted @ flat.T
    factor = snr**2 * n_rows / np.trace(covariance)
    return np.linalg.solve(factor * covariance + np.eye(n_rows), factor * weighted).T


def noise_normalised(kernel: np.ndarray, parts: int) -> np.ndarray:
    """The kernel (n_sources, c, n_rows) with each source's amplitude in units of what whitened noise gives it.

    Sources that nothing is seen of stay zero.
    """
    kernel = kernel.reshape(-1, parts, kernel.shape[1])
    rms = np.sqrt(np.einsum("mci,mci->m", kernel, kernel) / parts)[:, None, None]
    return np.divide(kernel, rms, out=np.zeros_like(kernel), where=rms > 0)


def peaks(kernel: np.ndarray, data: np.ndarray) -> np.ndarray:
    """The source (n,) at which the map of each column of the whitened data (n_rows, n) peaks; kernel: normalised."""
    return _powers(kernel, data).argmax(axis=0)


def point_spread(
    kernel: np.ndarray, signals: np.ndarray, places: np.ndarray, positions: np.ndarray, areas: np.ndarray
) -> PointSpread:
    """Displacement and dispersion of the maps of noiseless signals (n_rows, n) from dipoles at places (n, 3) [m].

    kernel (n_sources, c, n_rows): normalised; positions (n_sources, 3) [m], areas (n_sources,) [m²] of the cortex.
    """
    power = _powers(kernel, signals)
    distance = np.linalg.norm(positions[:, None] - places[None], axis=2)
    spread = areas[:, None] * power
    total = spread.sum(axis=0)
    dispersion = np.sqrt((spread * distance**2).sum(axis=0) / np.where(total > 0, total, 1.0))
    return PointSpread(distance[power.argmax(axis=0), np.arange(len(places))], dispersion)


def _powers(kernel: np.ndarray, data: np.ndarray) -> np.ndarray:
    """Squared amplitude (n_sources, n) of the maps."""
    m, parts, n_rows = kernel.shape
    maps = (kernel.reshape(-1, n_rows) @ data).reshape(m, parts, -1)
    return np.einsum("mcn,mcn->mn", maps, maps)
