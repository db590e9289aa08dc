"""The noise picture of one layout: what makes up each channel's noise, and how the channels' noise goes together."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from layout.outputs.evidence_result import ChannelNoise
from layout.outputs.pictures.figure import STYLE, Picture, rendered
from layout.outputs.plain import one_line, shortened
from layout.outputs.report.charts import MIDDLE, NEGATIVE, POSITIVE, part_colour
from layout.outputs.result import DesignResult, RankedLayout
from layout.units import FT, UV

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

WIDTH, HEIGHT = 180 / 25.4, 4.2  # inches: two columns of a journal
LOW, HEAD = 1.02, 0.86  # inches left free under and over the panels
DPI = 200
SMALL, LARGE, NUMBERS = 10.5, 12, 8.5  # pt: the text is readable when the picture is shrunk to one column as well
INK = "#333333"
MOST_NUMBERS = 14  # sensor numbers along an edge that do not touch
UNITS = {"V": (UV, "µV"), "T": (FT, "fT")}


def noise_pictures(result: DesignResult) -> tuple[Picture, ...]:
    """One picture per ranked layout, in order; none where the noise was not examined. Same result, same bytes."""
    import matplotlib

    if result.evidence is None or not result.evidence.noise:
        return ()
    with matplotlib.rc_context(STYLE):
        return tuple(
            rendered(noise_figure(result, layout, noise), DPI)
            for layout, noise in zip(result.layouts, result.evidence.noise, strict=True)
        )


def noise_figure(result: DesignResult, layout: RankedLayout, noise: ChannelNoise) -> Figure:
    """Bars of each unit on the left, the correlation matrix on the right."""
    from matplotlib.figure import Figure

    averages = result.brief.noise.averages
    figure = Figure(figsize=(WIDTH, HEIGHT), facecolor="white")
    figure.text(0.01, 1 - 0.18 / HEIGHT, shortened(result.brief.title, 80), size=LARGE, weight="bold", va="center")
    epochs = "one epoch" if averages == 1 else f"{averages} epochs averaged"
    infinity = ", potentials against a far point" if "V" in noise.units else ""
    text = f"Layout {layout.rank}: modelled noise, {epochs}{infinity}"
    figure.text(0.01, 1 - 0.42 / HEIGHT, text, size=SMALL, color=INK, va="center")
    used = [unit for unit in UNITS if unit in noise.units]
    low, high, gap = LOW / HEIGHT, 1 - HEAD / HEIGHT, 0.40 / HEIGHT
    each = (high - low - gap * (len(used) - 1)) / len(used)
    for place, unit in enumerate(used):
        axes = figure.add_axes((0.095, high - each - place * (each + gap), 0.475, each), label=unit)
        draw_parts(axes, noise, unit)
        if place == len(used) - 1:
            axes.set_xlabel("sensor", fontsize=SMALL, labelpad=2)
    figure.text(0.01, 1 - 0.68 / HEIGHT, "whole noise, parts as shares of its variance", size=SMALL, va="center")
    _part_legend(figure, noise)
    _draw_correlation(figure, noise)
    return figure


def draw_parts(axes: Axes, noise: ChannelNoise, unit: str) -> Axes:
    """One bar a channel of this unit: as high as the noise's rms, divided as its parts share the variance."""
    mine = np.array([one == unit for one in noise.units])
    scale, name = UNITS[unit]
    variances = np.stack([np.broadcast_to(part, mine.shape)[mine] ** 2 for part in noise.parts.values()])
    whole = np.sqrt(variances.sum(axis=0)) / scale
    pieces = whole * variances / variances.sum(axis=0)
    at, bottom = np.arange(mine.sum()), np.zeros(mine.sum())
    for index, piece in enumerate(pieces):
        axes.bar(at, piece, 0.86, bottom=bottom, color=part_colour(index), edgecolor="white", linewidth=0.3)
        bottom = bottom + piece
    axes.set(xlim=(-0.6, mine.sum() - 0.4), ylim=(0, 1.05 * whole.max()))
    axes.set_ylabel(f"rms [{name}]", fontsize=SMALL, labelpad=2)
    places, numbers = numbers_along(noise.sensor[mine])
    axes.set_xticks(places, numbers, fontsize=NUMBERS)
    axes.tick_params(axis="x", length=0, pad=2)
    axes.tick_params(axis="y", labelsize=NUMBERS, length=2.5, pad=1.5)
    axes.spines[["top", "right"]].set_visible(False)
    return axes


def numbers_along(sensor: np.ndarray) -> tuple[list[float], list[str]]:
    """Places and sensor numbers along an edge: in the middle of a sensor's channels, so many as fit."""
    firsts = np.flatnonzero(np.append(True, sensor[1:] != sensor[:-1]))
    ends = np.append(firsts[1:], len(sensor))
    every = int(np.ceil(len(firsts) / MOST_NUMBERS))
    places = [(first + end - 1) / 2 for first, end in zip(firsts, ends, strict=True)]
    return places[::every], [str(int(sensor[first])) for first in firsts[::every]]


def _part_legend(figure: Figure, noise: ChannelNoise) -> None:
    from matplotlib.patches import Patch

    figure.legend(
        handles=[Patch(color=part_colour(index), label=one_line(name)) for index, name in enumerate(noise.parts)],
        loc="lower left",
        bbox_to_anchor=(0.0, 0.02),
        ncols=3,
        frameon=False,
        fontsize=SMALL,
        borderaxespad=0.2,
        handlelength=1.2,
        columnspacing=1.1,
        handletextpad=0.4,
    )


def _draw_correlation(figure: Figure, noise: ChannelNoise) -> None:
    from matplotlib.colors import LinearSegmentedColormap

    stops = [tuple(value / 255 for value in colour) for colour in (NEGATIVE, MIDDLE, POSITIVE)]
    ramp = LinearSegmentedColormap.from_list("correlation", stops)
    n = len(noise.names)
    side = HEIGHT - LOW - HEAD
    left, bottom = 1 - (side + 0.1) / WIDTH, LOW / HEIGHT
    axes = figure.add_axes((left, bottom, side / WIDTH, side / HEIGHT), label="correlation")
    axes.imshow(noise.correlation, cmap=ramp, vmin=-1, vmax=1, interpolation="nearest", extent=(0, n, n, 0))
    places, numbers = numbers_along(noise.sensor)
    middles = [place + 0.5 for place in places]
    axes.set_xticks(middles, numbers, fontsize=NUMBERS)
    axes.set_yticks(middles, numbers, fontsize=NUMBERS)
    axes.tick_params(length=0, pad=2)
    axes.set_xlabel("sensor", fontsize=SMALL, labelpad=2)
    figure.text(left, 1 - 0.68 / HEIGHT, "correlation of the whole noise", size=SMALL, va="center")
    bar = figure.add_axes((left + 0.02, 0.34 / HEIGHT, side / WIDTH - 0.04, 0.12 / HEIGHT), label="colour bar")
    steps = np.linspace(-1, 1, 128)
    spans = [(step - 1 / 127, 2.1 / 127) for step in steps]  # overlapping: no seams
    bar.broken_barh(spans, (0, 1), facecolors=ramp((steps + 1) / 2), linewidth=0)
    bar.set(xlim=(-1, 1), ylim=(0, 1), yticks=[], xticks=[-1, 0, 1])
    bar.tick_params(labelsize=NUMBERS, length=2.5, pad=1.5)
