"""Background brain activity: one moment density over the cortex, coherent within patches, independent between them."""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from layout.physics.channels import Channels, CortexModel

GAIN_AT_ONCE = 16_000_000  # numbers: keeps the lead field to all sources out of memory at once


def background_columns(channels: Channels, cortex: CortexModel, labels: np.ndarray, areas: np.ndarray) -> np.ndarray:
    """Response of the channels to each patch at a moment density of 1 A/m (n_channels, n_columns) [V or T].

    labels (n_sources,): the sources' patches; areas (n_sources,) [m²]: of background at each. Moments
    follow the cortical normals; on a head without them each patch has three independent components of a third of the
    variance. Columns are in the order of the patches' numbers.
    """
    free = not cortex.head.normal_orientation
    parts = []
    for some in _whole_patches(labels, GAIN_AT_ONCE // (len(channels) * (3 if free else 1))):
        gain = channels.lead_field(cortex, some, free=free).gain
        parts.append(patch_columns(gain, areas[some], labels[some]))
    return np.hstack(parts)


def _whole_patches(labels: np.ndarray, at_once: int) -> list[np.ndarray]:
    """The sources in order of their patch, cut between patches into pieces of about at_once.

    Cut by sources and not by channels: a piece then holds whole patches, and each patch is summed at once.
    """
    order = np.argsort(labels, kind="stable")
    starts = np.flatnonzero(np.diff(labels[order], prepend=-1))
    new_piece = np.diff(starts // max(1, at_once), prepend=-1) > 0
    return np.split(order, starts[new_piece][1:])


def patch_columns(gain: np.ndarray, areas: np.ndarray, labels: np.ndarray) -> np.ndarray:
    """The same from a given gain: (n_channels, n_sources) along normals, (n_channels, n_sources, 3) free."""
    if (np.diff(labels) < 0).any():
        order = np.argsort(labels, kind="stable")
        gain, areas, labels = gain[:, order], areas[order], labels[order]
    bounds = np.flatnonzero(np.diff(labels, prepend=-1, append=labels.max() + 1))
    pieces = [slice(*ends) for ends in pairwise(bounds)]
    if gain.ndim == 2:
        return np.stack([gain[:, patch] @ areas[patch] for patch in pieces], axis=1)
    columns = np.stack([areas[patch] @ gain[:, patch] for patch in pieces], axis=1) / np.sqrt(3.0)
    return columns.reshape(len(gain), -1)


def average_referenced_rms(columns: np.ndarray) -> float:
    """rms over electrodes of the potential against their mean, for independent columns of unit variance (n, m)."""
    against_mean = columns - columns.mean(axis=0)
    return float(np.sqrt((against_mean**2).sum(axis=1).mean()))
