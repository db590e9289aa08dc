"""Fields from outside the head as magnetometers meet them: homogeneous, and of constant gradient."""

from __future__ import annotations

import numpy as np

# Gradients of a field without sources or curl: symmetric and traceless, five of them, each of unit Frobenius norm.
_GRADIENTS = np.array(
    [
        np.diag([1.0, -1.0, 0.0]) / np.sqrt(2.0),
        np.diag([1.0, 1.0, -2.0]) / np.sqrt(6.0),
        np.array([[0.0, 1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 0.0]]) / np.sqrt(2.0),
        np.array([[0.0, 0.0, 1.0], [0.0, 0.0, 0.0], [1.0, 0.0, 0.0]]) / np.sqrt(2.0),
        np.array([[0.0, 0.0, 0.0], [0.0, 0.0, 1.0], [0.0, 1.0, 0.0]]) / np.sqrt(2.0),
    ]
)


def surroundings_columns(positions: np.ndarray, axes: np.ndarray, field_rms: float, gradient_rms: float) -> np.ndarray:
    """Responses (n_channels, 0 to 8) [T] of channels at positions (n, 3) [m], axes (n, 3); zero axes stay silent.

    field_rms [T]: rms of each component of the homogeneous field. gradient_rms [T/m]: rms of each of the five
    independent constant gradients about the head's origin. A strength of 0 leaves its columns out.
    """
    parts = [np.zeros((len(axes), 0))]
    if field_rms > 0:
        parts.append(field_rms * axes)
    if gradient_rms > 0:
        parts.append(gradient_rms * np.einsum("ni,gij,nj->ng", axes, _GRADIENTS, positions))
    return np.hstack(parts)
