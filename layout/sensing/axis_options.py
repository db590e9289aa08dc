"""What each stock entry can measure at a site: the axes that can be chosen there, and the channels each brings."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.brief.objects_stock import StockBrief

# Per axes option: the choices at a site, each the rows of (normal, tangent 1, tangent 2) it measures.
_AXES = {
    "normal": (("normal", (0,)),),
    "tangents": (("tangent1", (1,)), ("tangent2", (2,))),
    "any_of_three": (("normal", (0,)), ("tangent1", (1,)), ("tangent2", (2,))),
    "two_axis": (("normal+tangent1", (0, 1)), ("normal+tangent2", (0, 2))),
    "three_axis": (("three axes", (0, 1, 2)),),
    "free": (("free axis", (0, 1, 2)),),
    "free_two": (("two free axes", (0, 1, 2)),),
}
# Per gradients option of a planar gradiometer: the same for the directions of its baselines.
_GRADIENTS = {
    "one_tangent": (("gradient1", (1,)), ("gradient2", (2,))),
    "both_tangents": (("gradients", (1, 2)),),
}
TURNED = ("tangents", "two_axis", "one_tangent")  # their second choice is the first with the housing turned


@dataclass(frozen=True)
class AxisOption:
    """One choice at a site, m channels.

    axes (m, 3): components of each channel's sensitive axis along (normal, tangent 1, tangent 2), zeros for electrodes;
    baselines (m, 3) [m]: the same for gradiometers' baselines, zeros elsewhere. mirror: number of the option that a
    mirror in the median plane makes of it, -1 where there is none. turned: whether it is another option of the same
    sensor, its housing turned by a quarter about the normal, so that tangent 2 takes the place of tangent 1.
    """

    name: str
    axes: np.ndarray
    baselines: np.ndarray
    mirror: int
    turned: bool = False


def can_be_turned(entry: StockBrief) -> bool:
    """Whether any choice turns the housing."""
    return any(option.turned for option in axis_options(entry))


def quarter_turned(frames: np.ndarray) -> np.ndarray:
    """Housing poses (n, 4, 4) turned about their own z, so that x goes where y was."""
    turn = np.array([[0.0, -1.0, 0.0, 0.0], [1.0, 0.0, 0.0, 0.0], [0.0, 0.0, 1.0, 0.0], [0.0, 0.0, 0.0, 1.0]])
    return frames @ turn


def axis_options(entry: StockBrief) -> tuple[AxisOption, ...]:
    """What can be chosen at each site of a stock entry.

    A free axis brings the three components of the field along normal and tangents, from which any axis can be made.
    """
    if entry.kind == "electrode":
        return (AxisOption("", np.zeros((1, 3)), np.zeros((1, 3)), 0),)
    if entry.kind == "gradiometer":
        return _gradiometer_options(entry)
    if isinstance(entry.axes, str):
        return tuple(
            AxisOption(
                name, np.eye(3)[list(rows)], np.zeros((len(rows), 3)), number, entry.axes in TURNED and 2 in rows
            )
            for number, (name, rows) in enumerate(_AXES[entry.axes])
        )
    axes = np.array(entry.axes)
    # A sensor turned end for end measures the same but for the sign.
    likeness = np.abs((axes * [1.0, 1.0, -1.0]) @ axes.T)
    mirrors = np.where(likeness.max(axis=1) > 1 - 1e-12, likeness.argmax(axis=1), -1)
    return tuple(
        AxisOption(f"axis{number + 1}", axis[None], np.zeros((1, 3)), int(mirrors[number]))
        for number, axis in enumerate(axes)
    )


def _gradiometer_options(entry: StockBrief) -> tuple[AxisOption, ...]:
    normal = np.array([1.0, 0.0, 0.0])
    if entry.shape == "axial":
        return (AxisOption("axial", normal[None], -entry.baseline * normal[None], 0),)
    return tuple(
        AxisOption(
            name,
            np.tile(normal, (len(rows), 1)),
            entry.baseline * np.eye(3)[list(rows)],
            number,
            entry.gradients in TURNED and 2 in rows,
        )
        for number, (name, rows) in enumerate(_GRADIENTS[entry.gradients])
    )
