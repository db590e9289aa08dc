"""The curve as a picture: the best layouts met, their bound, the baselines, the ceiling and the knee."""

from __future__ import annotations

from typing import TYPE_CHECKING

from layout.outputs.curve_tables import Curve
from layout.outputs.pictures.figure import STYLE, Picture, rendered
from layout.outputs.plain import fixed, shortened

if TYPE_CHECKING:
    from matplotlib.axes import Axes

FOUND, BOUND, EVEN, STANDARD, CEILING = "#0B3C6F", "#B5651D", "#5B2A6E", "#4E7D3A", "#6B6B6B"


def curve_picture(curve: Curve) -> Picture:
    """The picture as file contents; the same curve gives the same bytes."""
    import matplotlib
    from matplotlib.figure import Figure

    with matplotlib.rc_context(STYLE):
        figure = Figure(figsize=(8.0, 5.4), facecolor="white", layout="constrained")
        draw_curve(figure.add_subplot(), curve)
        return rendered(figure)


def draw_curve(axes: Axes, curve: Curve) -> Axes:
    """Draw the curve into the axes."""
    spent = [one.spent for one in curve.points]
    values = [one.value for one in curve.points]
    bounds = [one.bound for one in curve.points]
    axes.fill_between(spent, values, bounds, color=BOUND, alpha=0.15, linewidth=0)
    axes.plot(spent, bounds, color=BOUND, linestyle="--", label="bound: no allowed layout passes it")
    kind = "each contains the smaller" if curve.nested else "each searched anew"
    axes.plot(spent, values, color=FOUND, marker="o", label=f"best layout met, {kind}")
    for name, colour, mark, baseline in (
        ("even spread", EVEN, "s", [one.even_spread for one in curve.points]),
        ("standard positions", STANDARD, "^", [one.standard for one in curve.points]),
    ):
        pairs = [(x, y) for x, y in zip(spent, baseline, strict=True) if y is not None]
        if pairs:
            axes.plot(*zip(*pairs, strict=True), color=colour, marker=mark, linewidth=1, label=name)
    label = f"all candidates at once: {fixed(curve.ceiling, 2)} {curve.unit}"
    axes.axhline(curve.ceiling, color=CEILING, linewidth=1, linestyle=":", label=label)
    if curve.knee is not None:
        knee = curve.points[curve.knee]
        axes.plot(
            [knee.spent],
            [knee.value],
            "o",
            markersize=13,
            markerfacecolor="none",
            color=FOUND,
            label="knee of the curve",
        )
    axes.set_xlabel("sensors" if curve.by == "count" else "budget")
    axes.set_ylabel("information [bits]" if curve.unit == "bits" else "linearised localisation error [mm]")
    axes.set_title(shortened(curve.title, 72), loc="left", fontsize=12, fontweight="bold")
    axes.set_ylim(bottom=0)
    axes.grid(color="#DDDDDD", linewidth=0.6)
    axes.set_axisbelow(True)
    axes.spines[["top", "right"]].set_visible(False)
    axes.legend(frameon=False, fontsize=9)
    return axes
