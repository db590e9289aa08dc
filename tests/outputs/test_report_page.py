"""The report's text: escaped, self-contained, labelled, its links true, and no more said than was shown."""

import base64
import dataclasses
import hashlib
import json
import re
from html.parser import HTMLParser

import pytest
from made_evidence import with_evidence
from made_result import HOSTILE_TITLE

from layout.outputs import design_files, writer
from layout.outputs.cautions import CAUTIONS
from layout.outputs.methods.text import methods_text
from layout.outputs.report.page import report_html

EMPTY = {"meta", "br", "img", "input"}


class Page(HTMLParser):
    """Tags with their attributes, words, scripts, and whether every tag is closed in order."""

    def __init__(self, text):
        super().__init__()
        self.tags, self.words, self.open, self.scripts = [], [], [], []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        if tag not in EMPTY:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        if "script" in self.open:
            self.scripts.append(data)
        elif "style" not in self.open:
            self.words.append(data)

    def all(self, *names):
        return [attributes for tag, attributes in self.tags if tag in names]

    @property
    def text(self):
        return " ".join(" ".join(self.words).split())


@pytest.fixture(scope="module")
def evident(result):
    return with_evidence(result)


@pytest.fixture(scope="module")
def html(evident, pictures):
    return report_html(evident, pictures)


@pytest.fixture(scope="module")
def page(html):
    return Page(html)


def test_well_formed_and_hostile_names_are_words(page):
    assert page.open == []
    assert page.all("b", "iframe", "link", "object") == []
    assert len(page.all("script")) == 3
    assert HOSTILE_TITLE in page.text
    assert '"<img src=x onerror=alert(1)>"' in page.text
    assert "wet <b>cup</b>" in page.text
    assert "Mind <this>." in page.text
    assert "<surroundings>" in page.text
    assert all(not name.startswith("on") for _, attributes in page.tags for name in attributes)


def test_only_its_own_two_scripts_may_run(page, html):
    policy = next(a["content"] for a in page.all("meta") if a.get("http-equiv"))
    assert policy.startswith("default-src 'none'")
    allowed = set(re.search(r"script-src (.*)$", policy)[1].split())
    scripts = re.findall(r"<script>(.*?)</script>", html, flags=re.DOTALL)
    digests = {base64.b64encode(hashlib.sha256(script.encode()).digest()).decode() for script in scripts}
    assert allowed == {f"'sha256-{digest}'" for digest in digests}
    data = re.search(r'<script type="application/json" id="scene">(.*?)</script>', html, flags=re.DOTALL)[1]
    assert not set("<>&") & set(data)
    assert len(json.loads(data)["layouts"]) == 3


def test_links_lead_to_every_file_that_was_written(evident, pictures, tmp_path, monkeypatch):
    monkeypatch.setattr(design_files, "scalp_pictures", lambda result: pictures)
    monkeypatch.setattr(design_files, "sheet_files", lambda result, layout: {"placement-sheet-a4.pdf": b"a sheet"})
    monkeypatch.setattr(design_files, "helmet_files", lambda result: ())
    monkeypatch.setattr(design_files, "cap_files", lambda result, layout: {})
    monkeypatch.setattr(design_files, "curve_files", lambda result: {})
    monkeypatch.setattr(design_files, "picture_files", lambda result: ())
    folder = writer.write_result(evident, tmp_path / "out")
    files = {path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file()} - {"report.html"}
    links = [a["href"] for a in Page((folder / "report.html").read_text(encoding="utf-8")).all("a")]
    beside = [link for link in links if not link.startswith("#")]
    assert set(beside) == files
    assert beside[0] == "layout-1/placement-sheet-a4.pdf"  # what the bench needs comes first


def test_nothing_comes_from_elsewhere(page, html):
    ids = [attributes["id"] for _, attributes in page.tags if "id" in attributes]
    assert len(ids) == len(set(ids))
    links = {a["href"] for a in page.all("a")}
    assert {link[1:] for link in links if link.startswith("#")} <= set(ids)
    assert all(link.startswith("#") for link in links)
    assert all(re.match("data:image/(webp|png);base64,", a["src"]) for a in page.all("img"))
    assert "url(" not in html
    assert "@import" not in html
    assert "://" not in html


def test_the_written_page_is_this_page_byte_for_byte(html, evident, pictures):
    assert report_html(evident, pictures) == html
    assert len(html.encode()) < 10e6


def test_labels_for_those_who_do_not_see_it(page, result):
    ids = {attributes["id"] for _, attributes in page.tags if "id" in attributes}
    for _, attributes in page.tags:
        for name in ("aria-labelledby", "aria-controls", "aria-describedby"):
            assert attributes.get(name, "head") in ids
    assert len(page.all("h1")) == len(page.all("main")) == len(page.all("header")) == len(page.all("footer")) == 1
    assert len(page.all("table")) == len(page.all("caption"))
    assert all(a.get("scope") in ("col", "row") for a in page.all("th"))
    assert all(a.get("aria-label") or a.get("aria-hidden") for a in page.all("svg"))
    assert all(a["alt"] for a in page.all("img"))
    assert sum("20 numbered sensors" in a["alt"] for a in page.all("img")) == len(result.layouts)
    assert [a["aria-selected"] for a in page.all("button") if a.get("role") == "tab"] == ["true", "false", "false"]
    assert {a["lang"] for a in page.all("html")} == {"en"}


def test_says_what_was_shown_and_no_more(page, result, pictures):
    assert "10.333 bits" in page.text
    assert "10.339" in page.text
    assert "proven to 0.1 %" in page.text
    assert page.text.count("more than 64") == 1 + 2  # the ranking, and two points of the curve
    assert all(caution in page.text for caution in CAUTIONS)
    assert all(note in page.text for notes in result.notes.values() for note in notes)
    assert page.text.count("outside the band, above it") == 1
    assert "120 parts examined, 7 left open" in page.text
    assert "Pairs of housings that meet: 2 in layout 1, 1 in layout 2" in page.text
    assert "nan" not in re.findall(r"[a-z]+", page.text.lower())
    open_layout = dataclasses.replace(result.layouts[0], proven=False, gap_percent=3.2)
    stopped = dataclasses.replace(
        result, layouts=(open_layout, *result.layouts[1:]), stopped_by_clock=True, figures_of_noise={}
    )
    text = Page(report_html(stopped, pictures)).text
    assert "Better layouts may exist" in text
    assert "stopped by its time allowance" in text
    assert "and so proven" not in text
    assert "optimal" not in re.sub("not proven optimal", "", text + page.text)


def test_the_methods_stand_in_it_word_for_word(page, evident):
    assert " ".join(methods_text(evident).split()) in page.text


def test_a_sensor_s_card_and_row_say_the_same(html, evident):
    sensor = evident.evidence.placements[0].sensors[10]
    row = evident.layouts[0].sensors[10]
    card = Page(re.search(rf'<template id="card-1-{row.number}">(.*?)</template>', html, flags=re.DOTALL)[1]).text
    assert f"{row.worth:.3f} bits ({100 * row.worth / evident.layouts[0].value:.1f} % of the value)" in card
    assert f"{1000 * sensor.slide.worst[1]:.1f} mm along the scalp (worst to the back)" not in card  # 270 is the right
    assert f"{1000 * sensor.slide.worst[1]:.1f} mm along the scalp (worst to the right), 17° of tilt, 6.0 mm" in card
    near = (
        f"{1000 * sensor.slide.worst[0]:.1f} mm along the scalp (worst to the front left), 6° of tilt, 2.0 mm of lift"
    )
    assert card.index("1 % worse at") < card.index(near) < card.index("5 % worse at")
    name, value = sensor.substitutes[1]
    assert f"{100 * value / evident.layouts[0].value:.1f} %" in card
    text = Page(html).text
    assert f"{1000 * sensor.slide.worst[0]:.1f} / {1000 * sensor.slide.worst[1]:.1f} / >30" in text
    assert text.count("none that keeps the rules") == 2 * len(evident.layouts)
    assert name.split()[-1] in card


def test_without_evidence_it_says_how_to_get_it(result, pictures):
    page = Page(report_html(result, pictures))
    assert page.open == []
    for verb in ("layout placement BRIEF", "layout curve BRIEF"):
        assert verb in page.text
    assert page.text.count("figures of noise below hold for all layouts") == len(result.layouts)
    assert not [a for a in page.all("input") if a["name"] == "paint"]


def test_an_error_counts_down_and_says_it_is_linearised(evident, pictures):
    in_mm = dataclasses.replace(evident, unit="mm", goal="localisation")
    text = Page(report_html(in_mm, pictures)).text
    assert "a shorter one is better" in text
    assert "above 100: a larger error" in text
    assert "The error is linearised" in text


def test_bars_are_in_proportion(page, evident):
    bars = [float(a["width"]) for a in page.all("rect") if a.get("class") in ("value", "baseline")]
    expected = []
    for layout in evident.layouts:
        values = [layout.value, *(base.value for base in evident.baselines)]
        expected += [100 * value / max([layout.bound, *values]) for value in values]
    assert bars == pytest.approx(expected, abs=0.006)
