"""The cortex picture of one layout: both halves from outside and inside, regions outlined, sensitivity as colour."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from layout.anatomy.head import Head, Region
from layout.outputs.pictures.backdrop import CORTEX_GREY, LIGHT, blended, region_colour, rgb, vertex_normals
from layout.outputs.pictures.depth_image import seen_faces
from layout.outputs.pictures.figure import STYLE, Picture, rendered
from layout.outputs.pictures.views import LEFT, RIGHT, View
from layout.outputs.plain import shortened, significant
from layout.outputs.report.page import RAMP
from layout.outputs.report.scene import sensitivity_top
from layout.outputs.result import DesignResult, RankedLayout
from layout.units import NAM

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from scipy.sparse import csr_array

WIDTH = 180 / 25.4  # inches: two columns of a journal
PIXELS_PER_METRE = 4000.0  # some 200 per inch at that width
MARGIN = 3e-3  # m around a half
SMOOTHINGS = 25  # opens the folds a little, so that less of a region hides in them
PANELS = (
    ("left half, outside", -1, LEFT),
    ("right half, outside", 1, RIGHT),
    ("left half, inside", -1, RIGHT),
    ("right half, inside", 1, LEFT),
)
STEPS = 128  # of the colour bar
DPI, INSIDE_DPI = 170, 140
SMALL, LARGE = 10.5, 12  # pt: readable when the picture is shrunk to one column as well
CASING, EDGE = 2.6, 1.4  # pt: widths of a region's outline, dark casing and colour
INK = "#333333"


@dataclass(frozen=True)
class Sheet:
    """The cortex to draw: vertices (n, 3) [m], faces (m, 3), side (n,) and the source that each vertex shows (n,), -1
    where there is no source."""

    vertices: np.ndarray
    faces: np.ndarray
    side: np.ndarray
    source: np.ndarray

    @cached_property
    def mean(self) -> csr_array:
        """Takes values at the vertices to their means over each vertex and its neighbours."""
        return neighbour_mean(self.faces, len(self.vertices))


@dataclass(frozen=True)
class Seen:
    """One panel before it is coloured: face and corner weights at every pixel, light (rows, columns), and the extent
    [m] in the view's plane."""

    faces: np.ndarray
    face: np.ndarray
    weights: np.ndarray
    light: np.ndarray
    extent: tuple[float, float, float, float]


def cortex_pictures(result: DesignResult) -> tuple[Picture, ...]:
    """One picture per ranked layout, in order; the same result gives the same bytes."""
    import matplotlib

    sheet = cortex_sheet(result.head)
    seen = tuple(_see(sheet, side, view) for _, side, view in PANELS)
    with matplotlib.rc_context(STYLE):
        return tuple(rendered(cortex_figure(result, layout, sheet, seen), DPI, INSIDE_DPI) for layout in result.layouts)


def cortex_sheet(head: Head) -> Sheet:
    """The surface the sources lie on, its folds opened a little; without one, the mesh over the sources.

    A sphere's shell of sources has no folds to open.
    """
    cortex, whole, vertices = head.cortex, head.cortex_surface, head.cortex_vertices
    if whole is not None and vertices is not None and len(vertices.side) == len(whole.vertices):
        side, source = vertices.side, vertices.source
        return Sheet(smoothed(whole.vertices, whole.faces), whole.faces, side, source)
    places = cortex.positions if head.sphere is not None else smoothed(cortex.positions, cortex.faces)
    return Sheet(places, cortex.faces, cortex.side, np.arange(len(cortex)))


def smoothed(vertices: np.ndarray, faces: np.ndarray) -> np.ndarray:
    """Every vertex moved to the mean of its neighbours and itself, SMOOTHINGS times; the size is kept."""
    mean, moved = neighbour_mean(faces, len(vertices)), vertices
    for _ in range(SMOOTHINGS):
        moved = mean @ moved
    middle = vertices.mean(axis=0)
    growth = np.ptp(vertices, axis=0) / np.ptp(moved, axis=0)
    return middle + (moved - moved.mean(axis=0)) * growth


def neighbour_mean(faces: np.ndarray, n_vertices: int) -> csr_array:
    """Matrix (n_vertices, n_vertices): means over each vertex and its neighbours."""
    from scipy.sparse import coo_array, diags_array, eye_array

    ends = np.concatenate([faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]]])
    ends = np.concatenate([ends, ends[:, ::-1]])
    joined = coo_array((np.ones(len(ends)), (ends[:, 0], ends[:, 1])), shape=(n_vertices, n_vertices)).tocsr()
    joined.data[:] = 1.0
    around = joined + eye_array(n_vertices, format="csr")
    return (diags_array(1 / around.sum(axis=1)) @ around).tocsr()


def cortex_figure(result: DesignResult, layout: RankedLayout, sheet: Sheet, seen: tuple[Seen, ...]) -> Figure:
    """Four panels on one figure with legend and, where the sensitivity is known, its colour bar."""
    from matplotlib.figure import Figure

    evidence = result.evidence
    known = evidence is not None and len(evidence.sensitivity) >= layout.rank
    values = evidence.sensitivity[layout.rank - 1] if known else None
    top = sensitivity_top(evidence.sensitivity) if known else 1.0
    gap, side = 0.06, 0.04  # inches
    panel = (WIDTH - gap - 2 * side) / 2
    widest = max(one.extent[1] - one.extent[0] for one in seen)
    heights = [panel * (one.extent[3] - one.extent[2]) / widest for one in seen]
    rows = [max(heights[:2]), max(heights[2:])]
    title, name = 0.58, 0.26
    columns = 2 if len(result.regions) > 1 else 1
    legend = 0.24 * int(np.ceil(len(result.regions) / columns)) + (0.70 if known else 0.12)
    height = title + sum(rows) + 2 * name + legend
    figure = Figure(figsize=(WIDTH, height), facecolor="white")
    for place, ((label, _, _), one) in enumerate(zip(PANELS, seen, strict=True)):
        row, column = divmod(place, 2)
        bottom = legend + sum(rows[row + 1 :]) + name * (1 - row) + (rows[row] - heights[place]) / 2
        left = side + column * (panel + gap) + (panel - panel * (one.extent[1] - one.extent[0]) / widest) / 2
        width = panel * (one.extent[1] - one.extent[0]) / widest
        axes = figure.add_axes((left / WIDTH, bottom / height, width / WIDTH, heights[place] / height), label=label)
        draw_half(axes, result.regions, sheet, one, values, top)
        figure.text(
            (side + column * (panel + gap) + panel / 2) / WIDTH,
            (legend + sum(rows[row:]) + name * (1 - row) + 0.5 * name) / height,
            f"{label}  ({_ends(PANELS[place][2])})",
            size=SMALL,
            color=INK,
            ha="center",
            va="center",
        )
    opened = "" if result.head.sphere is not None else ", whose folds are opened"
    text = f"{'sensitivity over' if known else 'regions on'} the cortex{opened}"
    if known and (sheet.source < 0).any():
        text += "; grey: no cortex"
    figure.text(0.01, 1 - 0.18 / height, shortened(result.brief.title, 80), size=LARGE, weight="bold", va="center")
    figure.text(0.01, 1 - 0.42 / height, f"Layout {layout.rank}: {text}", size=SMALL, color=INK, va="center")
    _legend(figure, result.regions, columns, known, height)
    if known:
        along = "along the cortex's normal" if result.head.normal_orientation else "averaged over its directions"
        label = (
            f"amplitude signal-to-noise ratio of a dipole of {significant(evidence.probe_moment / NAM, 3)} nAm {along}"
        )
        _colour_bar(figure, label, top, height)
    return figure


def _ends(view: View) -> str:
    return "front is left" if view is LEFT else "front is right"


def draw_half(
    axes: Axes, regions: tuple[Region, ...], sheet: Sheet, one: Seen, values: np.ndarray | None, top: float
) -> Axes:
    """One half from one side; axes in metres. values (n_sources,): coloured up to `top`; None: regions are filled."""
    rows, columns = one.face.shape
    members = _at_pixels(sheet, one, _memberships(regions, sheet))
    image = np.ones((rows, columns, 4))
    image[..., 3] = one.face >= 0
    image[..., :3] = CORTEX_GREY
    if values is not None:
        has = sheet.source >= 0
        at_vertices = np.where(has, values[np.maximum(sheet.source, 0)], 0.0)
        share = _at_pixels(sheet, one, np.stack([at_vertices * has, has], axis=1))
        known = share[..., 1] > 0.5
        level = np.divide(share[..., 0], share[..., 1], out=np.zeros((rows, columns)), where=known)
        image[known, :3] = ramp_colours(level[known] / top)
    else:
        for index in range(len(regions)):
            image[members[..., index] > 0.5, :3] = rgb(region_colour(index))
    image[..., :3] *= (0.80 + 0.20 * one.light)[..., None]
    left, right, bottom, high = one.extent
    axes.imshow(np.round(255 * np.clip(image, 0, 1)).astype(np.uint8), extent=one.extent, origin="lower", zorder=0)
    x = left + (np.arange(columns) + 0.5) * (right - left) / columns
    y = bottom + (np.arange(rows) + 0.5) * (high - bottom) / rows
    for index in range(len(regions)):
        if values is not None and (members[..., index] > 0.5).any():
            axes.contour(x, y, members[..., index], levels=[0.5], colors=INK, linewidths=CASING, zorder=2)
            colour = region_colour(index)
            axes.contour(x, y, members[..., index], levels=[0.5], colors=colour, linewidths=EDGE, zorder=3)
    axes.set(xlim=(left, right), ylim=(bottom, high), aspect="equal")
    axes.set_axis_off()
    return axes


def ramp_colours(shares: np.ndarray) -> np.ndarray:
    """Colours (..., 3) of shares (...) in 0..1 of the scale's top; what is above has the last colour."""
    stops = np.array([rgb(colour) for colour in RAMP])
    at = np.clip(shares, 0, 1) * (len(stops) - 1)
    return np.stack([np.interp(at, np.arange(len(stops)), stops[:, k]) for k in range(3)], axis=-1)


def _memberships(regions: tuple[Region, ...], sheet: Sheet) -> np.ndarray:
    """(n_vertices, n_regions): share of the region around each vertex; evened out, so that outlines are not ragged."""
    member = np.zeros((len(sheet.source), len(regions)))
    for index, region in enumerate(regions):
        member[np.isin(sheet.source, region.members), index] = 1.0
    return sheet.mean @ (sheet.mean @ member)


def _see(sheet: Sheet, side: int, view: View) -> Seen:
    faces = sheet.faces[(sheet.side[sheet.faces] == side).all(axis=1)]
    used = np.unique(faces)
    flat = view.project(sheet.vertices)
    low, high = flat[used, :2].min(axis=0) - MARGIN, flat[used, :2].max(axis=0) + MARGIN
    columns, rows = np.ceil((high - low) * PIXELS_PER_METRE).astype(int)
    pixels = np.concatenate([(flat[:, :2] - low) / (high - low) * (columns, rows) - 0.5, flat[:, 2:]], axis=1)
    face, weights, _ = seen_faces(pixels, faces, (int(rows), int(columns)))
    normal = blended(view.project(vertex_normals(sheet.vertices, faces)), faces, face, weights)
    light = np.clip(normal @ (LIGHT / np.linalg.norm(LIGHT)), 0, 1)
    return Seen(faces, face, weights, light, (float(low[0]), float(high[0]), float(low[1]), float(high[1])))


def _at_pixels(sheet: Sheet, one: Seen, at_vertices: np.ndarray) -> np.ndarray:
    return blended(at_vertices, one.faces, one.face, one.weights)


def _legend(figure: Figure, regions: tuple[Region, ...], columns: int, outlined: bool, height: float) -> None:
    from matplotlib.patches import Patch

    handles = [
        Patch(
            facecolor="white" if outlined else region_colour(index),
            edgecolor=region_colour(index),
            linewidth=1.6,
            label=shortened(region.name, 40),
        )
        for index, region in enumerate(regions)
    ]
    figure.legend(
        handles=handles,
        loc="lower center",
        bbox_to_anchor=(0.5, (0.64 if outlined else 0.04) / height),
        ncols=columns,
        frameon=False,
        fontsize=SMALL,
        borderaxespad=0,
    )


def _colour_bar(figure: Figure, label: str, top: float, height: float) -> None:
    from matplotlib.ticker import MaxNLocator

    axes = figure.add_axes((0.25, 0.46 / height, 0.5, 0.12 / height), label="colour bar")
    steps = ramp_colours(np.linspace(0, 1, STEPS))
    spans = [(step * top / STEPS, 1.05 * top / STEPS) for step in range(STEPS)]  # overlapping: no seams
    axes.broken_barh(spans, (0, 1), facecolors=steps, linewidth=0)  # drawn, not an image: sharp at any size
    inner = [tick for tick in MaxNLocator(4).tick_values(0, top) if tick < 0.88 * top]
    axes.set(xlim=(0, top), ylim=(0, 1), yticks=[])
    axes.set_xticks([*inner, top], [*(f"{tick:g}" for tick in inner), f"\u2265 {significant(top, 2)}"])
    axes.tick_params(labelsize=SMALL, length=2.5, pad=1.5)
    axes.set_xlabel(label, fontsize=SMALL, labelpad=1.5)
