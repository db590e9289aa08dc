"""The cap template as files, read back: true size, holes at true distances, pages that join, nothing in the margins."""

import io
import re
import shutil
import subprocess
import xml.etree.ElementTree as ET
from itertools import combinations

import numpy as np
import pytest
import shapely
from cap_cases import cap_pattern, cap_result, cap_written

from layout.anatomy.geodesics import geodesic_distances
from layout.outputs.cap.piece import draw_piece
from layout.outputs.cap.template import CAP_A4, CAP_FILES, CAP_LETTER, CAP_SVG, cap_files
from layout.outputs.cap.tiles import MARGIN, OVERLAP, SIZES, best_pages, joins

SVG = "{http://www.w3.org/2000/svg}"
POINT = 72 / 25.4  # points in a millimetre
PAPERS = {"a4": CAP_A4, "letter": CAP_LETTER}


@pytest.fixture(scope="module")
def svg():
    return ET.fromstring(cap_written()[CAP_SVG])


@pytest.fixture(scope="module")
def sheets():
    pieces = [draw_piece(piece) for piece in cap_pattern().pieces]
    return {paper: best_pages(pieces, paper) for paper in PAPERS}


@pytest.fixture(scope="module")
def pages():
    """Per paper the pages as pdfplumber reads them: (width, curves, words)."""
    pdfplumber = pytest.importorskip("pdfplumber")
    read = {}
    for paper, name in PAPERS.items():
        with pdfplumber.open(io.BytesIO(cap_written()[name])) as file:
            read[paper] = [
                (page.width, page.height, page.curves, page.extract_words(extra_attrs=["fontname", "size"]))
                for page in file.pages
            ]
    return read


def _group(svg, name):
    return next(one for one in svg.iter(SVG + "g") if one.get("id") == name)


def _path(data: str) -> np.ndarray:
    return np.array(re.findall(r"(-?[\d.]+) (-?[\d.]+)", data), dtype=float)


def _svg_holes(svg) -> dict[str, dict[int, np.ndarray]]:
    """Gore -> number -> centre [mm], numbers read from the text inside each circle."""
    found = {}
    for group in _group(svg, "hole"):
        gore = group.get("id").removeprefix("hole-")
        numbers = [
            (int(text.text), np.array([float(text.get("x")), float(text.get("y"))]))
            for text in _group(svg, f"text-{gore}")
            if text.get("font-weight") == "bold" and text.text.isdigit()
        ]
        for circle in group.iter(SVG + "circle"):
            centre = np.array([float(circle.get("cx")), float(circle.get("cy"))])
            assert float(circle.get("r")) == pytest.approx(5.0, abs=1e-3)
            inside = [n for n, at in numbers if np.linalg.norm(at - centre) < 4.0]
            assert len(inside) == 1
            found.setdefault(gore, {})[inside[0]] = centre
    return found


@pytest.mark.slow
def test_same_result_same_files():
    assert tuple(cap_written()) == CAP_FILES
    result = cap_result()
    assert cap_files(result, result.layouts[0]) == cap_written()


def test_no_electrodes_no_template(magnetometers_only):
    assert cap_files(magnetometers_only, magnetometers_only.layouts[0]) == {}


def test_the_drawing_is_in_millimetres_with_a_group_per_kind_of_line(svg):
    width, height = (float(svg.get(key).removesuffix("mm")) for key in ("width", "height"))
    assert svg.get("viewBox").split() == ["0", "0", *(svg.get(key).removesuffix("mm") for key in ("width", "height"))]
    assert width > 400
    assert [one.get("id") for one in svg if one.tag == SVG + "g"] == [
        "stretch",
        "mark",
        "seam",
        "rim",
        "cut",
        "hole",
        "check",
        "text",
    ]
    bar = max((_path(one.get("d")) for one in _group(svg, "check").iter(SVG + "path")), key=len)
    assert np.abs(np.diff(bar, axis=0)).sum(axis=1) == pytest.approx([100.0, 100.0], abs=1e-6)
    assert len(_group(svg, "cut")) == len(cap_pattern().pieces)
    ids = [one.get("id") for one in svg.iter() if one.get("id")]
    assert len(ids) == len(set(ids))
    for one in (one for name in ("mark", "seam", "cut") for one in _group(svg, name).iter(SVG + "path")):
        points = _path(one.get("d"))
        assert (points >= 0).all()
        assert (points <= [width, height]).all()


def test_cut_lines_run_six_millimetres_outside_seams_and_rims_and_apart(svg):
    cuts = []
    for group in _group(svg, "cut"):
        gore = group.get("id").removeprefix("cut-")
        cut = shapely.Polygon(_path(group[0].get("d")))
        inner = [
            _path(one.get("d")) for kind in ("seam", "rim") for one in _group(svg, f"{kind}-{gore}").iter(SVG + "path")
        ]
        lines = shapely.union_all([shapely.LineString(line) for line in inner])
        assert cut.exterior.distance(lines) == pytest.approx(6.0, abs=0.01)
        away = [lines.distance(shapely.Point(point)) for point in cut.exterior.coords]
        assert max(away) < 12.1  # at mitred corners
        cuts.append(cut)
    assert min(one.distance(two) for one, two in combinations(cuts, 2)) > 2.0


def test_holes_of_the_drawing_are_apart_as_on_the_scalp(svg):
    pattern, head = cap_pattern(), cap_result().head
    rows = {row.number: row.scalp_position for row in pattern.rows}
    gores = {piece.gore.name: piece.gore for piece in pattern.pieces}
    checked = 0
    for name, holes in sorted(_svg_holes(svg).items())[::2]:
        numbers = sorted(holes)[:6]
        places = np.array([rows[number] for number in numbers])
        ways = 1e3 * geodesic_distances(head.scalp, places, places)
        area = shapely.Polygon(_path(_group(svg, f"cut-{name}")[0].get("d")))
        low, high = gores[name].flat.stretch.min(), gores[name].flat.stretch.max()
        for i, j in combinations(range(len(numbers)), 2):
            straight = shapely.LineString([holes[numbers[i]], holes[numbers[j]]])
            if straight.length < 60 and area.contains(straight.buffer(8.0)):
                assert low * ways[i, j] - 0.1 < straight.length < high * ways[i, j] + 0.1
                checked += 1
    assert checked > 5


@pytest.mark.parametrize("paper", PAPERS)
def test_holes_on_paper_are_those_of_the_drawing(svg, pages, paper):
    drawn = _svg_holes(svg)
    seen = set()
    for _, height, curves, words in pages[paper][2:]:
        circles = {}
        for curve in curves:
            points = np.array(curve["pts"])
            if len(points) > 4 and np.ptp(points, axis=0) == pytest.approx([10 * POINT, 10 * POINT], abs=0.01):
                centre = (points.min(axis=0) + points.max(axis=0)) / 2
                for word in words:
                    middle = np.array([word["x0"] + word["x1"], word["top"] + word["bottom"]]) / 2
                    if word["text"].isdigit() and np.linalg.norm(middle - centre) < 3 * POINT:
                        circles[int(word["text"])] = centre / POINT
        for holes in drawn.values():
            for one, two in combinations(sorted(set(holes) & set(circles)), 2):
                expected = np.linalg.norm(holes[one] - holes[two])
                assert np.linalg.norm(circles[one] - circles[two]) == pytest.approx(expected, abs=0.02)
                seen |= {one, two}
        assert height > 0
    assert len(seen) > 20


@pytest.mark.parametrize("paper", PAPERS)
def test_every_page_has_bars_of_exactly_100_mm(pages, paper):
    assert len(pages[paper]) > 4
    for width, height, curves, _ in pages[paper]:
        assert sorted([width / POINT, height / POINT]) == pytest.approx(sorted(SIZES[paper]), abs=0.01)
        bars = [
            np.diff(np.array(curve["pts"]), axis=0)
            for curve in curves
            if len(curve["pts"]) == 3 and abs(np.ptp(np.array(curve["pts"])[:, 0]) - 100 * POINT) < 1
        ]
        assert len(bars) == 1
        assert np.abs(bars[0]).sum(axis=1) == pytest.approx([283.464567, 283.464567], abs=2e-3)


@pytest.mark.parametrize("paper", PAPERS)
def test_every_part_of_every_gore_is_on_some_page(sheets, paper):
    names = [piece.name for sheet, _ in sheets[paper] for piece in sheet.pieces]
    assert names == [piece.gore.name for piece in cap_pattern().pieces]
    for sheet, tiling in sheets[paper]:
        parts = [shapely.box(*tile.corner, *(tile.corner + tiling.part)) for tile in tiling.tiles]
        shown = shapely.union_all(parts)
        for piece in sheet.pieces:
            assert shapely.Polygon(piece.cut).difference(shown).area == pytest.approx(0.0, abs=1e-6)
        for one, two in combinations(range(len(parts)), 2):
            a, b = tiling.tiles[one], tiling.tiles[two]
            if abs(a.row - b.row) + abs(a.column - b.column) == 1:
                x0, y0, x1, y1 = parts[one].intersection(parts[two]).bounds
                assert min(x1 - x0, y1 - y0) == pytest.approx(OVERLAP, abs=1e-9)
        marks = joins(tiling)
        for label, place in marks:
            on = {tile.name for tile, part in zip(tiling.tiles, parts, strict=True) if part.contains(_disc(place))}
            assert set(label.split(" | ")) <= on
        assert len(marks) >= 2 * (len(tiling.tiles) - 1)


def test_text_says_what_was_measured(pages):
    pattern = cap_pattern()
    text = " ".join(word["text"] for *_, words in pages["a4"][:2] for word in words)
    strains = [float(one) for one in re.search(r"paper are (-[\d.]+) % to \+([\d.]+) %", text).groups()]
    flats = [gore.flat.stretch - 1 for gore in pattern.cap.gores]
    assert strains[0] == pytest.approx(100 * min(one.min() for one in flats), abs=0.051)
    assert strains[1] == pytest.approx(100 * max(one.max() for one in flats), abs=0.051)
    assert "not a medical device" in text
    assert "100 % (actual size)" in text
    for row in pattern.rows:
        assert re.search(rf"\b{row.number} ", text)


def _disc(place: np.ndarray):
    return shapely.Point(place).buffer(3.0)


@pytest.mark.slow
@pytest.mark.skipif(shutil.which("pdftoppm") is None, reason="needs poppler")
@pytest.mark.parametrize("paper", PAPERS)
def test_printed_pages_join_and_keep_their_margins(sheets, paper, tmp_path):
    dpi = 300
    pixel = 25.4 / dpi
    (tmp_path / "cap.pdf").write_bytes(cap_written()[PAPERS[paper]])
    subprocess.run(["pdftoppm", "-r", str(dpi), "-gray", tmp_path / "cap.pdf", tmp_path / "page"], check=True)
    images = [_pgm(path) for path in sorted(tmp_path.glob("page*.pgm"))]
    edge = int((MARGIN - 0.5) / pixel)
    for image in images:
        inner = image[edge:-edge, edge:-edge]
        assert (image < 250).sum() == (inner < 250).sum()
        ticks = image[-round(17.8 / pixel)] < 128  # the row 0.8 mm above the lying bar
        starts, ends = np.flatnonzero(np.diff(np.concatenate([[0], ticks.astype(int), [0]]))).reshape(-1, 2)[[0, 1]]
        assert np.diff([starts.mean(), ends.mean()])[0] == pytest.approx(100 / pixel, abs=1.0)
    shown = iter(images[-sum(len(tiling.tiles) for _, tiling in sheets[paper]) :])
    compared = 0
    for _, tiling in sheets[paper]:
        page = {(tile.row, tile.column): next(shown) for tile in tiling.tiles}
        for (row, column), image in page.items():
            below = page.get((row + 1, column))
            if below is None:
                continue
            left, up = (tiling.origin / pixel).round().astype(int)
            strip = int(OVERLAP / pixel)
            foot = len(image) - up
            top = len(below) - up - round(float(tiling.part[1]) / pixel)
            right = left + int(tiling.part[0] / pixel) - 8
            one = image[foot - strip + 8 : foot - 8, left + 8 : right]
            two = below[top + 8 : top + strip - 8, left + 8 : right]
            best = min(
                np.abs(one[2:-2, 2:-2].astype(int) - two[2 + dy : len(two) - 2 + dy, 2 + dx : -2 + dx or None]).mean()
                for dy in (-1, 0, 1)
                for dx in (-1, 0, 1)
            )
            assert (one < 128).sum() > 300
            assert best < 2.5
            compared += 1
    assert compared > 0


def _pgm(path) -> np.ndarray:
    data = path.read_bytes()
    header = re.match(rb"P5\s+(\d+)\s+(\d+)\s+255\s", data)
    width, height = int(header[1]), int(header[2])
    return np.frombuffer(data, dtype=np.uint8, offset=header.end()).reshape(height, width)
