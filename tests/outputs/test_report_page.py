"""The report: escaped, self-contained, navigable, and what a browser makes of it."""

import dataclasses
import re
import shutil
import subprocess
from html.parser import HTMLParser

import pytest
from made_result import HOSTILE_TITLE

from layout.outputs.cautions import CAUTIONS
from layout.outputs.report import report_html

EMPTY = {"meta", "br", "img"}


class Page(HTMLParser):
    """Tags with their attributes, words, and whether every tag is closed in order."""

    def __init__(self, text):
        super().__init__()
        self.tags, self.words, self.open = [], [], []
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
        if "style" not in self.open:
            self.words.append(data)

    def all(self, *names):
        return [(tag, attributes) for tag, attributes in self.tags if tag in names]

    @property
    def text(self):
        return " ".join(" ".join(self.words).split())


@pytest.fixture(scope="module")
def html(result, pictures):
    return report_html(result, pictures)


@pytest.fixture(scope="module")
def page(html):
    return Page(html)


def test_well_formed_and_hostile_names_are_words(page):
    assert page.open == []
    assert page.all("script", "b", "iframe", "link", "object") == []
    assert HOSTILE_TITLE in page.text
    assert '"<img src=x onerror=alert(1)>"' in page.text
    assert "wet <b>cup</b>" in page.text
    assert all(not name.startswith("on") for _, attributes in page.tags for name in attributes)


def test_nothing_comes_from_elsewhere(page, html):
    for _, attributes in page.tags:
        for name in ("src", "href"):
            assert attributes.get(name, "#").startswith(("#", "data:image/png;base64,"))
    assert "url(" not in html
    assert "@import" not in html
    policy = next(a["content"] for _, a in page.all("meta") if a.get("http-equiv"))
    assert policy.startswith("default-src 'none'")


def test_links_headings_captions_and_pictures(page, result):
    ids = {attributes["id"] for _, attributes in page.tags if "id" in attributes}
    assert {a["href"][1:] for _, a in page.all("a")} <= ids
    assert page.all("h1", "h2", "h3")[0][0] == "h1"
    assert len(page.all("h1")) == 1
    assert len(page.all("table")) == len(page.all("caption")) == 3 + 2 * len(result.layouts)
    images = page.all("img")
    assert len(images) == len(result.layouts)
    assert all("20 numbered sensors" in attributes["alt"] for _, attributes in images)


def test_says_what_was_shown_and_no_more(page, result, pictures):
    assert "10.333 bits" in page.text
    assert "10.339" in page.text
    assert "proven to 0.1 %" in page.text
    assert page.text.count("more than 64") == 1
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
    assert "optimal" not in (text + page.text).lower()


def test_bars_are_in_proportion(page, result):
    widths = [float(a["width"]) for tag, a in page.all("rect") if a["fill"] != "#eef1f5"]
    longest = result.layouts[0].bound
    values = [result.layouts[0].value, *(base.value for base in result.baselines)]
    assert widths == pytest.approx([100 * value / longest for value in values], abs=0.006)


@pytest.mark.slow
@pytest.mark.skipif(shutil.which("chromium") is None, reason="no browser here")
def test_a_browser_shows_it_without_running_anything(html, tmp_path):
    """A name that became a script, or something loaded from elsewhere, breaks the page's policy: logged."""
    path = tmp_path / "report.html"
    path.write_text(html, encoding="utf-8")
    options = "--headless --no-sandbox --disable-gpu --disable-background-networking --no-first-run"
    options += " --disable-component-update --disable-sync --enable-logging=stderr --dump-dom"
    command = ["chromium", *options.split(), f"--user-data-dir={tmp_path / 'user'}", path.as_uri()]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60, check=True)
    seen = Page(done.stdout)
    assert seen.all("script") == []
    assert len(seen.all("table")) == len(Page(html).all("table"))
    assert "Content Security Policy" not in done.stderr
