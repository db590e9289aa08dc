"""The scalp picture of one layout: the head from four sides, regions, candidate sites, numbered sensors with
axes."""

from __future__ import annotations

import io
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from layout.anatomy.head import Head, Region
from layout.outputs.pictures.backdrop import Backdrop, paint_backdrop, region_colour, window
from layout.outputs.pictures.spreading import spread_apart
from layout.outputs.pictures.views import View, four_views
from layout.outputs.plain import bound_text, fixed, rounded_up, shortened
from layout.outputs.result import DesignResult, RankedLayout, SensorRow
from layout.units import MM

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

DPI = 150
INSIDE_DPI = 120  # what a painted head has of its own: more would make the files larger and nothing clearer
TEXT, NUMBER = 14, 10  # pt on a picture of 244 mm: 10.3 and 7.4 on two columns of a journal (180 mm)
LEGEND_COLUMNS = 2
DISC_RADIUS = 5.6e-3  # m on the head's own scale
ARROW = 14.5e-3  # m, an axis lying in the picture's plane
HEAD_ON = 0.87  # cosine beyond which an axis has no arrow worth drawing
BEHIND = 4e-3  # m: a site this far under the nearest scalp is on the far side
KIND_COLOURS = ("#0B3C6F", "#1B1B1B", "#996600", "#0000D6")
GROUND_COLOUR = "#6B6B6B"
STYLE = {
    "text.parse_math": False,
    "svg.hashsalt": "layout",
    "svg.fonttype": "path",
    "pdf.fonttype": 42,  # whole outlines of the letters in use, which journals ask for
    "font.family": "DejaVu Sans",
}


@dataclass(frozen=True)
class Picture:
    """One drawing as file contents."""

    png: bytes
    svg: bytes
    pdf: bytes = b""


def scalp_pictures(result: DesignResult) -> tuple[Picture, ...]:
    """One picture per ranked layout, in order; the same result gives the same bytes."""
    backdrops: dict[str, Backdrop] = {}
    return tuple(scalp_picture(result, layout, backdrops) for layout in result.layouts)


def scalp_picture(result: DesignResult, layout: RankedLayout, backdrops: dict[str, Backdrop] | None = None) -> Picture:
    """The picture of one layout. `backdrops` keeps the painted head from one layout to the next."""
    import matplotlib

    with matplotlib.rc_context(STYLE):
        return rendered(scalp_figure(result, layout, backdrops))


def rendered(figure: Figure, dpi: float = DPI, inside_dpi: float = INSIDE_DPI) -> Picture:
    """A figure as file contents without time or program in them.

    dpi: of the picture as pixels; inside_dpi: of the images inside the others, whose lines and letters are sharp at any
    size.
    """
    png, svg, pdf = io.BytesIO(), io.BytesIO(), io.BytesIO()
    figure.savefig(png, format="png", dpi=dpi, metadata={"Software": None})
    figure.savefig(svg, format="svg", dpi=inside_dpi, metadata={"Date": None, "Creator": None})
    figure.savefig(
        pdf, format="pdf", dpi=inside_dpi, metadata={"CreationDate": None, "Creator": None, "Producer": None}
    )
    return Picture(png.getvalue(), svg.getvalue(), pdf.getvalue())


def scalp_figure(result: DesignResult, layout: RankedLayout, backdrops: dict[str, Backdrop] | None = None) -> Figure:
    """Four views on one figure, with title, scale bar and legend."""
    backdrops = {} if backdrops is None else backdrops
    views = four_views(_normals(layout.sensors))

    def draw(axes: Axes, view: View) -> None:
        if view.name not in backdrops:
            backdrops[view.name] = paint_backdrop(result.head, result.regions, view)
        draw_view(axes, result, layout, view, backdrops[view.name])

    return four_panels(views, draw, result.brief.title, _subtitle(result, layout), _legend_entries(result, layout))


def four_panels(
    views: tuple[View, ...],
    draw: Callable[[Axes, View], None],
    title: str,
    subtitle: str,
    legend: list[tuple[object, str]],
) -> Figure:
    """A figure of four views, each drawn by `draw`, with title, scale bar and legend entries (handle, label)."""
    from matplotlib.figure import Figure

    legend_height = 0.35 + 0.31 * int(np.ceil(len(legend) / LEGEND_COLUMNS))  # inches
    width, title_height, panel = 9.6, 0.95, 4.7
    figure = Figure(figsize=(width, width), facecolor="white")
    panels = [figure.add_axes((0, 0, 1, 1), label=view.name) for view in views]
    for axes, view in zip(panels, views, strict=True):
        draw(axes, view)
    heights = [panel * np.ptp(axes.get_ylim()) / np.ptp(axes.get_xlim()) for axes in panels]
    rows = [max(heights[:2]), max(heights[2:])]
    height = title_height + sum(rows) + legend_height
    figure.set_size_inches(width, height)
    for place, (axes, own) in enumerate(zip(panels, heights, strict=True)):
        row, column = divmod(place, 2)
        left = (0.05 + column * (panel + 0.1)) / width
        bottom = legend_height + sum(rows[row:]) - own  # the tops of a row are level
        axes.set_position((left, bottom / height, panel / width, own / height))
    draw_scale_bar(figure.axes[0])
    figure.text(0.01, 1 - 0.31 / height, shortened(title, 72), size=17, weight="bold", va="center")
    figure.text(0.01, 1 - 0.70 / height, subtitle, size=TEXT, color="#333333", va="center")
    figure.legend(
        handles=[handle for handle, _ in legend],
        labels=[label for _, label in legend],
        loc="lower center",
        bbox_to_anchor=(0.5, 0.06 / height),
        ncols=LEGEND_COLUMNS,
        frameon=False,
        fontsize=TEXT,
        handletextpad=0.6,
        columnspacing=2.0,
    )
    return figure


def draw_view(
    axes: Axes, result: DesignResult, layout: RankedLayout, view: View, backdrop: Backdrop | None = None
) -> Axes:
    """One view of the head with the layout's sensors; axes in metres of the head."""
    backdrop = paint_backdrop(result.head, result.regions, view) if backdrop is None else backdrop
    draw_head(axes, result.head, view, backdrop)
    draw_candidates(axes, result, view, backdrop)
    draw_sensors(axes, result, layout, view, backdrop)
    frame_view(axes, result.head, view)
    return axes


def frame_view(axes: Axes, head: Head, view: View) -> Axes:
    """The same scale in every view, no axes."""
    left, right, bottom, top = window(head, view)
    axes.set(xlim=(left, right), ylim=(bottom, top), aspect="equal")
    axes.set_axis_off()
    return axes


def draw_head(axes: Axes, head: Head, view: View, backdrop: Backdrop) -> Axes:
    """The painted head, its outline, the nasion and the names of the picture's ends."""
    from scipy.ndimage import gaussian_filter

    left, right, bottom, top = backdrop.extent
    axes.imshow(backdrop.image, extent=backdrop.extent, origin="lower", interpolation="bilinear", zorder=0)
    rows, columns = backdrop.inside.shape
    x = left + (np.arange(columns) + 0.5) * (right - left) / columns
    y = bottom + (np.arange(rows) + 0.5) * (top - bottom) / rows
    smooth = gaussian_filter(backdrop.inside, 2.0)  # the coverage is all or nothing: smoothed, its edge is a fine line
    axes.contour(x, y, smooth, levels=[0.5], colors="#4A5160", linewidths=1.1, zorder=1)
    nasion = view.project(head.landmarks.nas)
    if not behind(nasion[None], backdrop)[0]:
        axes.plot(*nasion[:2], marker="^", color="#4A5160", markersize=5, linestyle="none", zorder=2)
    inset = 5e-3
    for name, (spot_x, spot_y), side in zip(view.ends, _end_spots(view, backdrop.extent), "lrcc", strict=True):
        align = {"l": "left", "r": "right", "c": "center"}[side]
        axes.text(spot_x, spot_y, name, size=TEXT, color="#4A5160", ha=align, va="center")
    axes.text(left + 2e-3, top - inset, view.name, size=TEXT, weight="bold", color="#333333", ha="left", va="center")
    return axes


def _end_spots(view: View, extent: tuple[float, float, float, float]) -> tuple[tuple[float, float], ...]:
    """Where the names of the left, right, top and bottom end stand: words go low, where a head seen from the
    side is narrow; single letters at half height."""
    left, right, bottom, top = extent
    middle, inset = (left + right) / 2, 5e-3
    sideways = bottom + inset if len(view.ends[0]) > 1 else (bottom + top) / 2
    return (
        (left + inset, sideways),
        (right - inset, sideways),
        (middle, top - inset),
        (middle, bottom + inset),
    )


def draw_candidates(axes: Axes, result: DesignResult, view: View, backdrop: Backdrop) -> Axes:
    """Faint dots where a sensor could sit, on the near side only."""
    sites = np.unique(result.candidates.site)
    flat = view.project(result.candidates.sites.positions[sites])
    flat = flat[~behind(flat, backdrop)]
    axes.scatter(flat[:, 0], flat[:, 1], s=3.5, color="#3A4250", alpha=0.35, linewidths=0, zorder=3)
    return axes


def draw_sensors(axes: Axes, result: DesignResult, layout: RankedLayout, view: View, backdrop: Backdrop) -> Axes:
    """Numbered discs on the near side, parted where they would overlap; faint rings on the far side."""
    from matplotlib.patches import Circle

    flat = view.project(np.stack([row.scalp_position for row in layout.sensors]))
    far = behind(flat, backdrop)
    for row, spot in zip(layout.sensors, flat, strict=True):
        if far[row.number - 1]:
            colour = _kind_colour(row)
            axes.add_patch(
                Circle(
                    spot[:2],
                    0.55 * DISC_RADIUS,
                    fill=False,
                    edgecolor=colour,
                    alpha=0.35,
                    linewidth=0.9,
                    zorder=4,
                )
            )
    near = [row for row in layout.sensors if not far[row.number - 1]]
    anchors = flat[~far, :2]
    places = spread_apart(anchors, 2.15 * DISC_RADIUS)
    for row, anchor, place in zip(near, anchors, places, strict=True):
        _draw_sensor(axes, _kind_colour(row), row, anchor, place, view)
    return axes


def draw_scale_bar(axes: Axes, length: float = 50 * MM) -> Axes:
    """A bar of `length` [m] in the lower left corner of axes in metres."""
    left, right = axes.get_xlim()
    bottom, _ = axes.get_ylim()
    start, height = left + 0.02 * (right - left), bottom + 0.035 * (right - left)
    axes.plot([start, start + length], [height, height], color="#333333", linewidth=2.2, solid_capstyle="butt")
    axes.text(start + length / 2, height + 2e-3, f"{length / MM:.0f} mm", size=TEXT, ha="center", va="bottom")
    return axes


def _draw_sensor(axes: Axes, colour: str, row: SensorRow, anchor: np.ndarray, place: np.ndarray, view: View) -> None:
    from matplotlib.patches import Circle

    if np.linalg.norm(place - anchor) > 0.3 * DISC_RADIUS:
        axes.plot(*zip(anchor, place, strict=True), color=colour, linewidth=0.8, zorder=5)
        axes.plot(*anchor, marker=".", color=colour, markersize=4, zorder=5)
    is_reference = row.role == "reference"
    if row.kind_type != "electrode":
        for axis in view.project(row.axes):
            if abs(axis[2]) > HEAD_ON:
                axes.add_patch(Circle(place, 1.32 * DISC_RADIUS, fill=False, edgecolor=colour, linewidth=1.0, zorder=6))
                continue
            tip = place + ARROW * axis[:2]
            axes.annotate(
                "",
                xy=tip,
                xytext=place,
                arrowprops={
                    "arrowstyle": "-|>,head_length=0.32,head_width=0.16",
                    "color": colour,
                    "linewidth": 1.3,
                    "shrinkA": 0,
                    "shrinkB": 0,
                },
                zorder=6,
            )
    face = "white" if is_reference else colour
    edge = colour if is_reference else "white"
    axes.add_patch(Circle(place, DISC_RADIUS, facecolor=face, edgecolor=edge, linewidth=1.0, zorder=7))
    ink = colour if is_reference else "white"
    axes.text(
        *place,
        str(row.number),
        size=NUMBER,
        weight="bold",
        color=ink,
        ha="center",
        va="center_baseline",
        zorder=8,
    )


def behind(flat: np.ndarray, backdrop: Backdrop) -> np.ndarray:
    """Which projected points (n, 3) lie on the far side of the scalp; off the picture of the scalp nothing
    does."""
    left, right, bottom, top = backdrop.extent
    rows, columns = backdrop.height.shape
    column = np.clip(((flat[:, 0] - left) / (right - left) * columns).astype(int), 0, columns - 1)
    row = np.clip(((flat[:, 1] - bottom) / (top - bottom) * rows).astype(int), 0, rows - 1)
    return flat[:, 2] < backdrop.height[row, column] - BEHIND


def _normals(sensors: tuple[SensorRow, ...]) -> np.ndarray:
    return np.array([row.normal for row in sensors])


def _kind_colour(row: SensorRow) -> str:
    return GROUND_COLOUR if row.role == "ground" else KIND_COLOURS[row.kind_number % len(KIND_COLOURS)]


def _subtitle(result: DesignResult, layout: RankedLayout) -> str:
    return (
        f"Layout {layout.rank}: {fixed(layout.value, 3)} {result.unit}, "
        f"bound {bound_text(layout.bound, result.unit)} {result.unit}, gap {rounded_up(layout.gap_percent, 2)} %"
    )


def region_legend(regions: tuple[Region, ...]) -> list[tuple[object, str]]:
    """(handle, label) of each region."""
    from matplotlib.patches import Patch

    return [(Patch(color=region_colour(index)), shortened(region.name, 34)) for index, region in enumerate(regions)]


def nasion_legend() -> tuple[object, str]:
    """(handle, label) of the nasion's mark."""
    from matplotlib.lines import Line2D

    return Line2D([], [], linestyle="none", marker="^", color="#4A5160", markersize=5), "nasion"


def _legend_entries(result: DesignResult, layout: RankedLayout) -> list[tuple[object, str]]:
    """(handle, label) for what the picture shows, and nothing else."""
    from matplotlib.lines import Line2D

    def mark(**style) -> Line2D:
        return Line2D([], [], linestyle="none", **style)

    entries = region_legend(result.regions)
    shown = {}
    for row in layout.sensors:
        shown.setdefault(row.kind, row)
    for kind, row in shown.items():
        colour = _kind_colour(row)
        name = shortened(kind, 30)
        label = name if row.kind_type in name else f"{name} ({row.kind_type})"
        entries.append((mark(marker="o", color=colour, markersize=8), label))
    for row in layout.sensors:
        if row.role == "reference":
            colour = _kind_colour(row)
            style = {"markerfacecolor": "white", "markeredgecolor": colour, "markersize": 8}
            entries.append((mark(marker="o", **style), f"reference (number {row.number})"))
    entries.append((mark(marker="o", color="#3A4250", alpha=0.5, markersize=2.5), "candidate site"))
    ring = {"markerfacecolor": "none", "markeredgecolor": "#333333", "alpha": 0.45, "markersize": 5}
    entries.append((mark(marker="o", **ring), "sensor on the far side"))
    if any(row.kind_type != "electrode" for row in layout.sensors):
        arrow = Line2D([], [], color="#333333", linewidth=1.3, marker=">", markersize=4.5)
        entries.append((arrow, "sensitive axis"))
        ring = {"markerfacecolor": "none", "markeredgecolor": "#333333", "markersize": 9}
        entries.append((mark(marker="o", **ring), "outer ring: axis along the line of sight"))
    return [*entries, nasion_legend()]
