"""Where a sensor measures: the points whose weighted readings make up a channel."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.sparse import csr_array

from layout.anatomy.head import Surface
from layout.anatomy.scalp_points import project, tangents_at
from layout.brief.objects_stock import ElectrodeBrief, GradiometerBrief, HousedBrief, StockBrief


@dataclass(frozen=True)
class Pickup:
    """Integration points of n channels, P rows in the order of the channels, each channel with one point at least.

    positions (P, 3) [m]; axes (P, 3) unit (zeros: points of the scalp, where a potential is read); weights (P,);
    channel (P,). A channel reads the sum over its points of weight x (field along the axis, or potential): averages
    have weights that sum to 1, gradiometers the difference of two averages, so they read tesla like magnetometers.
    """

    positions: np.ndarray
    axes: np.ndarray
    weights: np.ndarray
    channel: np.ndarray

    @cached_property
    def starts(self) -> np.ndarray:
        """First point of each channel and, last, the number of points (n + 1,)."""
        return np.append(np.flatnonzero(np.diff(self.channel, prepend=-1)), len(self.channel))

    @cached_property
    def matrix(self) -> csr_array:
        """Channels from points, sparse (n, P)."""
        return csr_array((self.weights, np.arange(len(self.weights)), self.starts))

    def combine(self, rows: np.ndarray, first: int = 0, last: int | None = None) -> np.ndarray:
        """Readings (n, ...) of the channels from those of their points (P, ...); of channels first to last only."""
        weights = self.matrix[first:last, self.starts[first] : self.starts[-1 if last is None else last]]
        return (weights @ rows.reshape(len(rows), -1)).reshape(weights.shape[0], *rows.shape[1:])

    def blocks(self, points_at_once: int) -> list[int]:
        """First channels of blocks of about so many points, and, last, the number of channels."""
        block = (self.starts[:-1] // points_at_once).astype(int)
        return [*np.flatnonzero(np.diff(block, prepend=-1)).tolist(), len(block)]


def point_pickup(positions: np.ndarray, axes: np.ndarray) -> Pickup:
    """One point for each channel: positions (n, 3) [m], axes (n, 3)."""
    return Pickup(positions, axes, np.ones(len(positions)), np.arange(len(positions)))


def box_points(edges: tuple[float, float, float]) -> tuple[np.ndarray, np.ndarray]:
    """Points (q, 3) [m] and weights (q,) for the average over a box of these edges [m] about its centre.

    Two Gauss-Legendre points along each edge that is not 0: exact for polynomials of degree 3 in each coordinate.
    """
    along = [np.array([-edge, edge]) / (2 * np.sqrt(3.0)) if edge else np.zeros(1) for edge in edges]
    points = np.stack(np.meshgrid(*along, indexing="ij"), axis=-1).reshape(-1, 3)
    return points, np.full(len(points), 1.0 / len(points))


def disc_points(diameter: float) -> tuple[np.ndarray, np.ndarray]:
    """Points (7, 2) [m] and weights (7,) for the average over a disc about its centre.

    Exact for polynomials of degree 5 (Abramowitz & Stegun 1964, 25.4.61, from memory; the tests check the moments).
    """
    angles = np.arange(6) * np.pi / 3
    ring = diameter / 2 * np.sqrt(2 / 3) * np.stack([np.cos(angles), np.sin(angles)], axis=1)
    return np.vstack([np.zeros((1, 2)), ring]), np.array([1 / 4, *[1 / 8] * 6])


def sensor_pickup(
    stock: Sequence[StockBrief],
    kind: np.ndarray,
    positions: np.ndarray,
    axes: np.ndarray,
    frames: np.ndarray,
    baselines: np.ndarray,
    normals: np.ndarray,
    scalp: Surface,
) -> Pickup | None:
    """The integration points of n channels of the stock; None where every channel is a single point.

    Per channel: kind (n,) index into the stock; positions (n, 3) [m] of the sensitive centre; axes (n, 3); frames
    (n, 3, 3) columns width, depth, length of the housing; baselines (n, 3) [m] from the coil that counts negative to
    the one that counts positive, zeros for all but gradiometers; normals (n, 3) of the scalp, for electrodes.
    """
    if not any(_is_extended(entry) for entry in stock):
        return None
    parts = []
    for index, entry in enumerate(stock):
        rows = np.flatnonzero(kind == index)
        if entry.kind == "electrode":
            offsets, weights = _electrode_points(entry, normals[rows])
            points = positions[rows, None] + offsets
            if entry.disc_diameter:
                points = project(scalp, points.reshape(-1, 3)).positions.reshape(points.shape)
        else:
            offsets, weights = _cell_points(entry, axes[rows], frames[rows])
            if entry.kind == "gradiometer":
                plus, minus = _coil_centres(entry, baselines[rows])
                offsets = np.concatenate([plus[:, None] + offsets, minus[:, None] + offsets], axis=1)
                weights = np.concatenate([weights, -weights])
            points = positions[rows, None] + offsets
        n_points = len(weights)
        parts.append(
            (
                points.reshape(-1, 3),
                np.repeat(axes[rows], n_points, axis=0),
                np.tile(weights, len(rows)),
                np.repeat(rows, n_points),
            )
        )
    columns = [np.concatenate(column) for column in zip(*parts, strict=True)]
    order = np.argsort(columns[3], kind="stable")
    return Pickup(*(column[order] for column in columns))


def _is_extended(entry: StockBrief) -> bool:
    if entry.kind == "electrode":
        return entry.disc_diameter > 0
    return entry.kind == "gradiometer" or entry.cell is not None or entry.coil_diameter > 0


def _electrode_points(entry: ElectrodeBrief, normals: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Offsets (n, q, 3) [m] across the scalp's normals, and weights (q,)."""
    if not entry.disc_diameter:
        return np.zeros((len(normals), 1, 3)), np.ones(1)
    flat, weights = disc_points(entry.disc_diameter)
    return np.einsum("qt,ntd->nqd", flat, tangents_at(normals)), weights


def _cell_points(entry: HousedBrief, axes: np.ndarray, frames: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Offsets (n, q, 3) [m] from the centre of a cell or coil, and weights (q,)."""
    if entry.coil_diameter:
        flat, weights = disc_points(entry.coil_diameter)
        return np.einsum("qt,ntd->nqd", flat, tangents_at(axes)), weights
    if entry.cell is None:
        return np.zeros((len(axes), 1, 3)), np.ones(1)
    inside, weights = box_points(entry.cell)
    return np.einsum("ndk,qk->nqd", frames, inside), weights


def _coil_centres(entry: GradiometerBrief, baselines: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Offsets (n, 3) of the positive and the negative coil from the sensitive centre (axial: the near coil's)."""
    if entry.shape == "axial":
        return np.zeros_like(baselines), -baselines
    return baselines / 2, -baselines / 2
