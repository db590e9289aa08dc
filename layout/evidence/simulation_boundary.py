"""The whitened lead field in boundary elements as fits need it: thousands of times, at places known to be in the brain.

The same numbers as `Channels.lead_field_at`, without its checks and corrections of where sources are, and with the
channels' combination and whitening folded into the transfer to the inner skull's nodes beforehand.

What volume currents add is, as a function of the place, the gradient of a potential: each node's dipole term is that of
∫ ψ dS/(4π|r - r'|). Its derivatives commute, so d(G q)/dr = (q·∇) G: steps along the moment give all three derivatives
where differences along the axes would take three times as many. The field of the dipole itself has a closed form.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.physics.boundary_cortex import BoundaryCortex
from layout.physics.boundary_elements import primary_field
from layout.physics.boundary_integrals import Elements, dipole_terms
from layout.physics.channels import Channels
from layout.physics.differences import LeadFieldDerivatives
from layout.physics.sarvas import MU0_OVER_4PI
from layout.units import MM

STEP = 0.25 * MM  # of differences
SOURCES_AT_ONCE = 256  # of which the dipole terms of three directions are held at once


@dataclass(frozen=True)
class BoundaryForward:
    """inner: the inner skull. transfer (n_rows, n_nodes): from its dipole terms. coils (n_rows, n_points): from the
    primary field at points (n_points, 3) [m] along axes (n_points, 3), none for electrodes alone.
    """

    inner: Elements
    transfer: np.ndarray
    coils: np.ndarray
    points: np.ndarray
    axes: np.ndarray

    def gain(self, places: np.ndarray) -> np.ndarray:
        """Gain (n_rows, m, 3) [1/(A·m)] of free moments at places (m, 3) [m] in the brain, LEAST_DEPTH deep."""
        gain = self._volume(places)
        if len(self.points):
            gain += np.tensordot(self.coils, primary_field(self.points, self.axes, np.ascontiguousarray(places)), 1)
        return gain

    def slopes(self, places: np.ndarray, moments: np.ndarray, gain_there: np.ndarray) -> np.ndarray:
        """d(G q)/dr (n_rows, m, 3) [1/m] for moments (m, 3) [A·m], good enough to descend by.

        gain_there: what `gain` gives at the places.
        """
        primary, slopes = self._primary(places, moments)
        size, along = _sizes(moments)
        ahead = self._volume(places + STEP * along)
        return (ahead - (gain_there - primary)) * (size / STEP)[:, None] + slopes

    def derivatives(self, places: np.ndarray, moments: np.ndarray) -> LeadFieldDerivatives:
        """Gain and d(G q)/dr (n_rows, m, 3) by fourth-order differences, two steps to either side of the places."""
        primary, slopes = self._primary(places, moments)
        size, along = _sizes(moments)
        for reach, weight in ((1, 8), (-1, -8), (2, -1), (-2, 1)):
            slopes = slopes + self._volume(places + reach * STEP * along) * (weight * size / (12 * STEP))[:, None]
        return LeadFieldDerivatives(self._volume(places) + primary, slopes)

    def _primary(self, places: np.ndarray, moments: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """What the dipoles' own field adds to gain and slopes; zeros for electrodes alone."""
        if not len(self.points):
            nothing = np.zeros((len(self.transfer), len(places), 3))
            return nothing, nothing
        primary = primary_field(self.points, self.axes, np.ascontiguousarray(places))
        slopes = primary_slopes(self.points, self.axes, places, moments)
        return np.tensordot(self.coils, primary, 1), np.tensordot(self.coils, slopes, 1)

    def _volume(self, places: np.ndarray) -> np.ndarray:
        out = np.empty((len(self.transfer), len(places), 3))
        for first in range(0, len(places), SOURCES_AT_ONCE):
            part = slice(first, first + SOURCES_AT_ONCE)
            out[:, part] = np.moveaxis(self.transfer @ dipole_terms(places[part], self.inner), 1, 0)
        return out


def boundary_forward(channels: Channels, cortex: BoundaryCortex, whitener: np.ndarray) -> BoundaryForward:
    """The channels (n), their rows whitened by `whitener` (n_rows, n)."""
    points = channels.points
    transfers = cortex.boundary.transfers(points.positions, points.axes, points.is_electrode)
    electrode = transfers.is_electrode
    weights = whitener @ channels.combine(np.eye(len(electrode)))
    inside = np.empty((len(electrode), transfers.electrodes.inside.shape[1]))
    inside[electrode], inside[~electrode] = transfers.electrodes.inside, transfers.magnetometers.inside
    coils = transfers.magnetometers
    return BoundaryForward(
        cortex.boundary.model.elements[0], weights @ inside, weights[:, ~electrode], coils.points, coils.axes
    )


def primary_slopes(points: np.ndarray, axes: np.ndarray, places: np.ndarray, moments: np.ndarray) -> np.ndarray:
    """Derivative (n, m, 3) [T/m] by the place of the primary field of moments (m, 3) [A·m] at places (m, 3) [m].

    Magnetometers at points (n, 3) [m] along axes (n, 3). Of µ0/4π R·(n × q)/|R|³, R = r - r0 (Biot & Savart), by r0.
    """
    away = points[:, None] - places
    square = (away**2).sum(axis=2, keepdims=True)
    across = np.cross(axes[:, None], moments)
    reached = (away * across).sum(axis=2, keepdims=True)
    return MU0_OVER_4PI * (3 * reached * away / square - across) / square**1.5


def _sizes(moments: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Length (m,) of the moments (m, 3), and unit vectors along them, zeros for those of no length."""
    size = np.linalg.norm(moments, axis=1)
    return size, np.divide(moments, size[:, None], out=np.zeros_like(moments), where=size[:, None] > 0)
