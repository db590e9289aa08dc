"""The placement sheet as printed: read back by pdfplumber and poppler."""

import re
import subprocess
from dataclasses import replace

import numpy as np
import pytest
from made_result import HOSTILE_NAME, make_result
from sheet_results import COILS, CUPS, sheet_result
from sheet_text import pages_of, printed_steps

from layout.outputs.evidence_result import Evidence
from layout.outputs.placement_tables import PlacedSensor, Placement, Room
from layout.outputs.sheet.page_style import MARGIN
from layout.outputs.sheet.pages import placement_sheet_pdf, sheet_pdf
from layout.outputs.sheet.rows import sheet_of

SIZES = {"a4": (841.89, 595.28), "letter": (792.0, 612.0)}  # points, lying
SLACK = 0.6  # points: boxes of neighbouring words touch


@pytest.fixture(scope="module")
def sheet(result):
    """Both kinds of sensors, a ground, hostile names."""
    first = result.layouts[0]
    rows = [row for row in first.sensors if row.number <= 14]
    rows[0] = replace(rows[0], site=HOSTILE_NAME, kind="endless<b>" + 16 * "x" + "Ω 漢字")
    rows.append(replace(rows[2], number=len(rows) + 1, role="ground", kind="ground", kind_number=-1))
    return sheet_of(result, replace(first, sensors=tuple(rows)))


@pytest.fixture(scope="module")
def a4(sheet):
    return sheet_pdf(sheet, "a4")


@pytest.fixture(scope="module")
def pages(a4):
    with pages_of(a4) as opened:
        yield opened.pages


@pytest.fixture(scope="module")
def texts(pages):
    return [page.extract_text().replace("\xa0", " ") for page in pages]


def _assert_clean(pages, paper: str) -> None:
    """Nothing outside the margins, no word over another, no table's word outside its cell."""
    for page in pages:
        assert (page.width, page.height) == pytest.approx(SIZES[paper], abs=0.1)
        words = page.extract_words()
        boxes = np.array([(word["x0"], word["top"], word["x1"], word["bottom"]) for word in words])
        assert boxes[:, 0].min() >= MARGIN - SLACK
        assert boxes[:, 2].max() <= page.width - MARGIN + SLACK
        assert boxes[:, 1].min() >= 0.6 * MARGIN  # the head and foot lines stand in the margin
        assert boxes[:, 3].max() <= page.height - 0.4 * MARGIN
        meets = (
            (boxes[:, None, 0] < boxes[None, :, 2] - SLACK)
            & (boxes[None, :, 0] < boxes[:, None, 2] - SLACK)
            & (boxes[:, None, 1] < boxes[None, :, 3] - 1.5)
            & (boxes[None, :, 1] < boxes[:, None, 3] - 1.5)
        )
        np.fill_diagonal(meets, False)
        over = [(words[i]["text"], words[j]["text"]) for i, j in np.argwhere(np.triu(meets))]
        assert not over, (page.page_number, over)
        for table in page.find_tables():
            left, top, right, bottom = table.bbox
            cells = np.array([cell for row in table.rows for cell in row.cells if cell])
            for word, box in zip(words, boxes, strict=True):
                if left < box[0] < right and top < (box[1] + box[3]) / 2 < bottom:
                    inside = (cells[:, 0] <= box[0] + SLACK) & (cells[:, 2] >= box[2] - SLACK)
                    inside &= (cells[:, 1] <= box[1] + 1.5) & (cells[:, 3] >= box[3] - 1.5)
                    assert inside.any(), (page.page_number, word["text"])


def test_nothing_is_cut_and_nothing_overlaps(pages):
    _assert_clean(pages, "a4")


def test_every_page_says_which_of_how_many(texts):
    for number, text in enumerate(texts, 1):
        assert f"page {number} of {len(texts)}" in text
        assert "not a medical device" in text
    tables = [text for text in texts if "nearest standard position," in text]
    assert len(tables) >= 2  # the header comes again
    assert all("neighbours," in text for text in tables)


def test_every_sensor_has_its_row_its_box_and_its_lines(a4, pages, texts, sheet):
    steps, text = printed_steps(a4), "\n".join(texts)
    assert [step["step"] for step in steps] == list(range(1, len(sheet.steps) + 1))
    assert [step["number"] for step in steps] == [step.sensor.number for step in sheet.steps]
    boxes = [one for page in pages for one in page.rects if abs(one["width"] - 12) + abs(one["height"] - 12) < 0.1]
    assert len(boxes) == len(sheet.steps)
    electrodes = sum(step.sensor.kind_type == "electrode" for step in sheet.steps)
    assert text.count("kΩ") == electrodes
    assert text.count("nT") == len(sheet.steps) - electrodes
    assert text.count("off by ____ mm") == len(sheet.steps)
    assert "REFERENCE" in text
    assert "GROUND" in text


def test_each_number_is_on_the_drawings(pages, texts, sheet):
    page = pages[next(i for i, text in enumerate(texts) if "from behind" in text)]
    bold = page.filter(lambda item: item.get("text") is None or "Bold" in item["fontname"])
    assert {int(word["text"]) for word in bold.extract_words() if word["text"].isdigit()} == {
        step.sensor.number for step in sheet.steps
    }


def test_hostile_names_are_print_not_markup(texts):
    text = " ".join(texts)
    assert '<script>alert("title")</script>' in text
    assert "endless<b>" in text
    assert "Ω □□" in text  # what the font lacks
    assert "\x1b" not in text


def test_fonts_are_embedded_and_there_is_no_colour(a4, tmp_path):
    path = tmp_path / "sheet.pdf"
    path.write_bytes(a4)
    listed = subprocess.run(["pdffonts", path], capture_output=True, text=True, check=True).stdout.splitlines()[2:]
    assert {line.split()[0].split("+")[-1] for line in listed} == {"DejaVuSans", "DejaVuSans-Bold"}
    assert all(re.search(r"yes\s+yes\s+yes\s+\d+\s+\d+$", line) for line in listed), listed
    subprocess.run(["pdftoppm", "-r", "30", "-png", path, tmp_path / "page"], check=True)
    from matplotlib.image import imread

    pictures = sorted(tmp_path.glob("page*.png"))
    assert pictures
    for picture in pictures:
        assert np.ptp(imread(picture)[..., :3], axis=2).max() < 0.02


def test_same_result_same_bytes_and_no_traces(sheet, a4):
    letter = sheet_pdf(sheet, "letter")
    assert letter != a4
    assert sheet_pdf(sheet, "a4") == a4  # whatever was made between
    assert b"eportLab" not in a4
    with pages_of(a4) as opened:
        assert opened.metadata["Title"] == sheet.title
        assert {opened.metadata[name] for name in ("Author", "Creator", "Producer", "Subject")} == {"scalpsite"}
        assert opened.metadata["CreationDate"].startswith("D:20000101")


def test_room_is_printed_where_it_is_known():
    result = make_result("magnetometer")
    layout = replace(result.layouts[1], sensors=result.layouts[1].sensors[:3])
    result = replace(result, layouts=(result.layouts[0], layout))
    room = Room((4.26e-3, 8e-3, 9e-3), (2e-3, 5e-3, 9e-3), ("0", "0", "0"), 20e-3)
    tilt = Room((np.inf,) * 3, (0.2, np.inf, np.inf), ("",) * 3, np.deg2rad(60))
    rows = tuple(PlacedSensor(r.number, r.name, r.kind, r.site, 0.1, room, tilt, room, ()) for r in layout.sensors)
    placed = Placement("title", "layout 2", "bits", 1.0, rows, (), ())
    evidence = Evidence((replace(placed, sensors=()), placed), None, (), 1e-8, ())
    with pages_of(placement_sheet_pdf(replace(result, evidence=evidence), layout, "a4")) as opened:
        text = opened.pages[-1].extract_text().replace("\xa0", " ")
    assert text.count("slide 4.3 mm") == len(rows)
    assert text.count("tilt >60°") == len(rows)
    assert text.count("lift 4.3 mm") == len(rows)


@pytest.mark.slow
def test_letter_is_as_clean_as_a4(sheet):
    with pages_of(sheet_pdf(sheet, "letter")) as opened:
        _assert_clean(opened.pages, "letter")


@pytest.mark.slow
@pytest.mark.parametrize(
    ("count", "tables", "paper"), [(1, CUPS, "a4"), (128, CUPS, "letter"), (20, COILS, "a4")], ids=["1", "128", "coils"]
)
def test_any_size_is_clean(count, tables, paper):
    result = sheet_result(count, tables)
    content = placement_sheet_pdf(result, result.layouts[0], paper)
    assert len(printed_steps(content)) == count
    with pages_of(content) as opened:
        _assert_clean(opened.pages, paper)
