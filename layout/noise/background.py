"""Background brain activity: one moment density over the cortex, coherent within patches, independent between them."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head
from layout.physics.channels import Channels
from layout.physics.sphere_model import SphereModel

CHANNELS_AT_ONCE = 256  # keeps the lead field to all sources out of memory at once


def background_columns(
    channels: Channels, sphere: SphereModel, head: Head, labels: np.ndarray, left_out: np.ndarray
) -> np.ndarray:
    """Response of the channels to each patch at a moment density of 1 A/m (n_channels, n_columns) [V or T].

    labels (n_sources,): the sources' patches; left_out (n_sources,) bool: sources that are not background. Moments
    follow the cortical normals; on a head without them each patch has three independent components of a third of the
    variance.
    """
    everything = np.arange(len(head.cortex))
    parts = []
    for first in range(0, len(channels), CHANNELS_AT_ONCE):
        some = channels.part(slice(first, first + CHANNELS_AT_ONCE))
        gain = some.lead_field(sphere, head, everything, free=not head.normal_orientation).gain
        parts.append(patch_columns(gain, head.cortex.areas, labels, left_out))
    return np.concatenate(parts)


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
