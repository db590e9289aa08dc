"""Pictures for papers: embedded fonts, few bitmaps, the report's colours, what is shown is where it is."""

import dataclasses
import io

import matplotlib
import numpy as np
import pdfplumber
import pytest
from matplotlib.colors import to_rgb
from pdfminer.pdftypes import resolve1

from layout.outputs.evidence_result import ChannelNoise, Evidence
from layout.outputs.pictures import files as files_of
from layout.outputs.pictures.backdrop import REGION_COLOURS, region_colour
from layout.outputs.pictures.cortex_figure import (
    PANELS,
    _ends,
    _see,
    cortex_pictures,
    cortex_sheet,
    draw_half,
    neighbour_mean,
    ramp_colours,
    smoothed,
)
from layout.outputs.pictures.figure import STYLE, scalp_picture
from layout.outputs.pictures.files import PICTURE_FILES, picture_files
from layout.outputs.pictures.noise_figure import draw_parts, noise_pictures, numbers_along
from layout.outputs.pictures.views import LEFT
from layout.outputs.report.charts import part_colour
from layout.outputs.report.page import RAMP

MOST_BYTES = 2e6


def _noise(layout):
    """Three parts in both units; channels of one sensor side by side."""
    owners = np.array([row.number for row in layout.sensors for _ in row.axes])
    units = tuple("V" if row.kind_type == "electrode" else "T" for row in layout.sensors for _ in row.axes)
    scale = np.where(np.array(units) == "V", 1e-6, 1e-14)
    n = len(owners)
    parts = {"sensor": scale, "background": 3 * scale * (1 + np.arange(n) / n), "eyes": scale * (np.arange(n) % 3)}
    away = np.abs(owners[:, None] - owners)
    return ChannelNoise(tuple(f"c{k}" for k in range(n)), owners, units, parts, np.exp(-away / 3.0) * (-1.0) ** away)


@pytest.fixture(scope="module")
def examined(result):
    """One layout with evidence: the sensitivity grows towards the front."""
    cortex, layout = result.head.cortex, result.layouts[0]
    front = (cortex.positions[:, 1] - cortex.positions[:, 1].min()) * 100
    evidence = Evidence((), None, (front,), 10e-9, (_noise(layout),))
    return dataclasses.replace(result, layouts=(layout,), evidence=evidence)


@pytest.fixture(scope="module")
def drawn(examined):
    """Name -> picture."""
    scalp = scalp_picture(examined, examined.layouts[0])
    return {"scalp": scalp, "cortex": cortex_pictures(examined)[0], "noise": noise_pictures(examined)[0]}


def _pixels(pdf, dpi=100):
    """The first page as (rows, columns, 3), drawn by another renderer."""
    with pdfplumber.open(io.BytesIO(pdf)) as document:
        return np.asarray(document.pages[0].to_image(resolution=dpi).original.convert("RGB"))


def _near(pixels, colour, within=12):
    return (np.abs(pixels.astype(float) - 255 * np.array(to_rgb(colour))) < within).all(axis=2)


@pytest.mark.slow
@pytest.mark.parametrize("name", ["scalp", "cortex", "noise"])
def test_every_font_is_embedded_as_outlines(drawn, name):
    with pdfplumber.open(io.BytesIO(drawn[name].pdf)) as document:
        fonts = [resolve1(font) for font in resolve1(document.pages[0].page_obj.resources["Font"]).values()]
        words = document.pages[0].extract_text()
    assert fonts
    for font in fonts:
        assert font["Subtype"].name == "Type0"  # not Type 3, which publishers refuse
        (inner,) = resolve1(font["DescendantFonts"])
        assert resolve1(resolve1(resolve1(inner)["FontDescriptor"])["FontFile2"]).get_data()
    assert "Layout 1" in words


@pytest.mark.slow
@pytest.mark.parametrize(("name", "images"), [("scalp", 4), ("cortex", 4), ("noise", 1)])
def test_only_surfaces_and_the_matrix_are_bitmaps(drawn, name, images):
    picture = drawn[name]
    with pdfplumber.open(io.BytesIO(picture.pdf)) as document:
        page = document.pages[0]
        assert len(page.images) == images
        assert page.curves or page.rects
        assert len(page.chars) > 50
    assert picture.svg.count(b"<image") == images
    assert picture.png.startswith(b"\x89PNG")
    assert max(len(picture.png), len(picture.svg), len(picture.pdf)) < MOST_BYTES


@pytest.mark.slow
def test_same_result_same_bytes(examined, drawn):
    again = {"cortex": cortex_pictures(examined)[0], "noise": noise_pictures(examined)[0]}
    assert again == {name: drawn[name] for name in again}
    assert scalp_picture(examined, examined.layouts[0]) == drawn["scalp"]
    for picture in drawn.values():
        assert b"/CreationDate" not in picture.pdf
        assert b"atplotlib" not in picture.pdf
        assert b"atplotlib" not in picture.png


@pytest.mark.slow
def test_colours_are_the_reports(examined, drawn):
    pixels = {name: _pixels(picture.pdf) for name, picture in drawn.items()}
    for index in range(2):  # the third region is hidden inside
        assert _near(pixels["scalp"], region_colour(index), 40).sum() > 50
        assert _near(pixels["cortex"], region_colour(index)).sum() > 50
    for index in range(3):
        assert _near(pixels["noise"], part_colour(index)).sum() > 50
    assert len(set(REGION_COLOURS) & set(RAMP)) == 0


def test_the_ramp_darkens_evenly_and_ends_in_its_last_colour():
    colours = ramp_colours(np.linspace(0, 1, 101))
    linear = np.where(colours <= 0.04045, colours / 12.92, ((colours + 0.055) / 1.055) ** 2.4)
    lightness = 116 * np.cbrt(linear @ [0.2126, 0.7152, 0.0722]) - 16  # CIE 1976 L*, white at Y = 1
    assert (np.diff(lightness) < 0).all()
    assert lightness[0] - lightness[-1] > 70
    np.testing.assert_allclose(ramp_colours(np.array([7.0]))[0], to_rgb(RAMP[-1]), atol=1e-12)


def test_without_evidence_regions_are_filled(examined):
    from matplotlib.figure import Figure

    sheet = cortex_sheet(examined.head)
    axes = draw_half(Figure().add_subplot(), examined.regions, sheet, _see(sheet, -1, LEFT), None, 1.0)
    drawn = np.asarray(axes.images[0].get_array()).astype(float) / 255
    wanted = np.array(to_rgb(region_colour(0)))
    share = drawn[..., :3] @ wanted / (np.linalg.norm(drawn[..., :3], axis=2) * np.linalg.norm(wanted))
    rows, columns = np.nonzero(share > 0.9999)  # the colour, lit more or less
    assert len(rows) > 500
    left, right, _, _ = axes.images[0].get_extent()
    middle = left + (columns.mean() + 0.5) * (right - left) / drawn.shape[1]
    assert middle == pytest.approx(-examined.regions[0].centre[1], abs=5e-3)
    assert not axes.collections  # no outline


@pytest.mark.parametrize("panel", PANELS, ids=lambda panel: panel[0])
def test_the_sensitive_front_is_dark_where_the_front_is(examined, panel):
    from matplotlib.figure import Figure

    label, side, view = panel
    assert ("outside" in label) == (view.toward[0] * side > 0)
    assert label.startswith({-1: "left", 1: "right"}[side])
    assert _ends(view) == f"front is {'right' if view.across[1] > 0 else 'left'}"
    sheet = cortex_sheet(examined.head)
    values = examined.evidence.sensitivity[0]
    axes = Figure().add_subplot()
    draw_half(axes, (), sheet, _see(sheet, side, view), values, float(values.max()))
    (image,) = axes.images
    left, right, _, _ = image.get_extent()
    drawn = np.asarray(image.get_array()).astype(float)
    rows, columns = np.nonzero(drawn[..., 3])
    across = left + (columns + 0.5) * (right - left) / drawn.shape[1]
    towards_front = np.sign(view.across[1]) * across  # along y of the head
    dark = drawn[rows, columns, :3].sum(axis=1)
    assert dark[towards_front > 0.03].mean() < 0.7 * dark[towards_front < -0.03].mean()
    own = examined.head.cortex.positions[examined.head.cortex.side == side]
    assert np.ptp(across) == pytest.approx(np.ptp(own[:, 1]), abs=2e-3)


def test_opened_folds_keep_their_size():
    points = np.random.default_rng(3).normal(size=(40, 3))
    faces = np.array([(k, (k + 1) % 40, (k + 7) % 40) for k in range(40)])
    mean = neighbour_mean(faces, 40)
    np.testing.assert_allclose(mean.sum(axis=1), 1.0)
    joined = {b for face in faces for a in face for b in face if 0 in face and a == 0}
    assert mean[[0]].toarray()[0].nonzero()[0].tolist() == sorted(joined)
    opened = smoothed(points, faces)
    np.testing.assert_allclose(np.ptp(opened, axis=0), np.ptp(points, axis=0))
    assert np.abs(opened - points).max() > 0.1


def test_bars_are_the_noise_and_its_shares(examined):
    from matplotlib.figure import Figure

    noise = examined.evidence.noise[0]
    axes = draw_parts(Figure().add_subplot(), noise, "T")
    mine = np.array(noise.units) == "T"
    sizes = np.stack([np.broadcast_to(part, mine.shape)[mine] / 1e-15 for part in noise.parts.values()])
    heights = np.array([bar.get_height() for bar in axes.patches]).reshape(sizes.shape)
    whole = np.sqrt((sizes**2).sum(axis=0))
    np.testing.assert_allclose(heights.sum(axis=0), whole)
    np.testing.assert_allclose(heights / whole, sizes**2 / whole**2, atol=1e-12)
    assert axes.get_ylabel() == "rms [fT]"
    places, numbers = numbers_along(np.array([4, 4, 5, 6, 6, 6]))
    assert (places, numbers) == ([0.5, 2.0, 4.0], ["4", "5", "6"])


@pytest.mark.slow
def test_files_of_every_layout(examined, result, drawn, monkeypatch):
    monkeypatch.setattr(files_of, "cortex_pictures", lambda result: [drawn["cortex"]] * len(result.layouts))
    ((rank, files),) = picture_files(examined)
    assert rank == 1
    assert files == {name: getattr(drawn[name[:-4]], name[-3:]) for name in PICTURE_FILES}
    plain = picture_files(result)  # no evidence: no noise picture
    assert [rank for rank, _ in plain] == [1, 2, 3]
    assert all(set(files) == {"cortex.png", "cortex.svg", "cortex.pdf"} for _, files in plain)


def test_style_is_for_papers():
    assert STYLE["pdf.fonttype"] == 42
    assert set(STYLE) <= set(matplotlib.rcParams)
