"""Background brain activity: one moment density over the cortex, coherent within patches, independent between them."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head
from layout.physics.channels import Channels
from layout.physics.sphere_model import SphereModel

GAIN_AT_ONCE = 16_000_000  # numbers: keeps the lead field to all sources out of memory at once


def background_columns(
    channels: Channels, sphere: SphereModel, head: Head, labels: np.ndarray, left_out: np.ndarray
) -> np.ndarray:
    """Response of the channels to each patch at a moment density of 1 A/m (n_channels, n_columns) [V or T].

    labels (n_sources,): the sources' patches; left_out (n_sources,) bool: sources that are not background. Moments
    follow the cortical normals; on a head without them each patch has three independent components of a third of the
    variance. Columns are in the order of the patches' numbers.
    """
    free = not head.normal_orientation
    parts = []
    for some in _whole_patches(labels, GAIN_AT_ONCE // (len(channels) * (3 if free else 1))):
        gain = channels.lead_field(sphere, head, some, free=free).gain
        parts.append(patch_columns(gain, head.cortex.areas[some], labels[some], left_out[some]))
    return np.hstack(parts)


def _whole_patches(labels: np.ndarray, at_once: int) -> list[np.ndarray]:
    """The sources in order of their patch, cut between patches into pieces of about at_once.

    Cut by sources and not by channels: placing a source on the spheres costs more than its lead field.
    """
    order = np.argsort(labels, kind="stable")
    starts = np.flatnonzero(np.diff(labels[order], prepend=-1))
    new_piece = np.diff(starts // max(1, at_once), prepend=-1) > 0
    return np.split(order, starts[new_piece][1:])


def patch_columns(gain: np.ndarray, areas: np.ndarray, labels: np.ndarray, left_out: np.ndarray) -> np.ndarray:
    """The same from a given gain: (n_channels, n_sources) along normals, (n_channels, n_sources, 3) free."""
    weight = np.where(left_out, 0.0, areas)
    order = np.argsort(labels, kind="stable")
    bounds = np.searchsorted(labels[order], np.unique(labels))
    if gain.ndim == 2:
        return np.add.reduceat((gain * weight)[:, order], bounds, axis=1)
    columns = np.add.reduceat((gain * weight[:, None])[:, order], bounds, axis=1) / np.sqrt(3.0)
    return columns.reshape(len(gain), -1)


def average_referenced_rms(columns: np.ndarray) -> float:
    """rms over electrodes of the potential against their mean, for independent columns of unit variance (n, m)."""
    against_mean = columns - columns.mean(axis=0)
    return float(np.sqrt((against_mean**2).sum(axis=1).mean()))
